"""One file per weather format, each making a Weather.

    weather = readers.read("saltmarsh_point.csv")
    for year in readers.years(["2019.csv", "2020.csv"]): ...

A file is recognised by what is in it, not by its name; ``format`` overrides. Whether what it says can be believed is
not decided here but in `yieldsim.screen`.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from types import ModuleType
from typing import Protocol, cast

from yieldsim.errors import InputError, Problem
from yieldsim.readers import bsrn, cf, epw, grid, mapped, plain, psm, pvgis, surfrad, tmy2, tmy3
from yieldsim.readers._make import weather_from
from yieldsim.readers._raw import Raw, Wanted, joined, within_range
from yieldsim.readers._source import Source, open_source
from yieldsim.readers._years import Stretch
from yieldsim.readers.mapped import Column, ColumnMap
from yieldsim.weather import STAMP_FORM, Weather, parse_stamp


class Reader(Protocol):
    """What the module of a format offers."""

    FORMAT: str

    def claims(self, source: Source) -> bool:
        """Return whether a file is of this format, from its first bytes."""

    def read(self, source: Source) -> Iterator[Raw]:
        """Yield the rows of a file, in one or several pieces."""


def _registry(*modules: ModuleType) -> dict[str, Reader]:
    return {reader.FORMAT: reader for reader in cast("tuple[Reader, ...]", modules)}


#: Format name -> reader, in the order in which they are asked.
READERS = _registry(tmy3, epw, tmy2, bsrn, surfrad, pvgis, psm, cf, plain)


def read(
    path: str,
    format: str | None = None,  # noqa: A002 - the study file's own word
    timestamps: str | None = None,
    *,
    shown: str | None = None,
    cell: tuple[int, int] | None = None,
    columns: ColumnMap | None = None,
    **over: float | None,
) -> Weather:
    """Read one weather file whole.

    Parameters
    ----------
    path : str, the file, or ``pvlib:NAME`` for one that pvlib ships
    format : str or None, a name of `READERS`; None = recognise it
    timestamps : str or None, where the time labels sit, see `weather.parse_stamp`; None = as the format documents
    shown : str or None, how messages and results name the file; None = its path
    cell : (row, column) or None, of a grid of weather
    columns : ColumnMap or None, which columns of any table are what
    over : latitude_deg, longitude_deg, elevation_m, utc_offset_h, over what the file says

    Raises
    ------
    InputError
        If the file is not there, of no known format or broken: the message names file and row.
    PlaceError
        If it cannot be read on this machine.
    """
    wanted = _wanted(timestamps, shown or path, over)
    pieces = _pieces(File(path, shown or path, format, cell=cell, columns=columns))
    return weather_from(joined(list(pieces)), wanted)


@dataclass(frozen=True, slots=True)
class File:
    """One of a site's weather files; fields as the parameters of `read`."""

    path: str
    shown: str
    format: str | None = None
    timestamps: str | None = None
    cell: tuple[int, int] | None = None
    columns: ColumnMap | None = None


def years(files: Sequence[File], **over: float | None) -> Iterator[Weather]:
    """Yield a site's weather a year at a time, one year in memory.

    Parameters
    ----------
    files : in the order of time; a year each, or many that follow each other, or one that holds many years
    over : as for `read`

    Notes
    -----
    A file of up to 366 days is a year, wherever it starts. Rows that go on for longer, in one file or in several that
    follow each other, are cut at the turn of each year: see `_years.Stretch`. Typical years stand for themselves.

    Raises
    ------
    InputError, PlaceError
        As `read`; and where files of one stretch differ in interval, clock or place.
    """
    stretch = Stretch()
    for file in files:
        wanted = _wanted(file.timestamps, file.shown, over)
        fresh = True
        for raw in _pieces(file):
            if fresh and not stretch.follows(raw, wanted):
                yield from stretch.rest()
                stretch = Stretch()
            yield from stretch.add(raw, wanted)
            fresh = False
    yield from stretch.rest()


def _pieces(file: File) -> Iterator[Raw]:
    """Yield the rows of a file in pieces, every value known to be possible."""
    if file.cell is not None:
        yield within_range(grid.rows(file.path, file.shown, file.cell))
        return
    source = open_source(file.path, file.shown)
    empty = True
    for raw in _raws(source, file.format, file.columns):
        empty = False
        yield within_range(raw)
    if empty:
        raise source.refuse(0, "", "a header without rows", "at least one row")


def _wanted(timestamps: str | None, shown: str, over: Mapping[str, float | None]) -> Wanted:
    stamp = None
    if timestamps is not None:
        try:
            stamp = parse_stamp(timestamps)
        except ValueError:
            raise InputError(Problem(shown, 0, "timestamps", repr(timestamps), STAMP_FORM)) from None
    return Wanted(stamp, **over)


def _raws(source: Source, name: str | None, columns: ColumnMap | None) -> Iterator[Raw]:
    return _reader(source, name).read(source) if columns is None else mapped.read(source, columns)


def _reader(source: Source, name: str | None) -> Reader:
    if name is not None:
        if name not in READERS:
            raise InputError(Problem(source.shown, 0, "format", repr(name), ", ".join(READERS)))
        return READERS[name]
    for reader in READERS.values():
        if reader.claims(source):
            return reader
    what = "bytes that are not text" if b"\x00" in source.head else f"a first line {_first_line(source)!r}"
    raise source.refuse(1, "", f"no known weather format: {what}", f"a file of the formats {', '.join(READERS)}")


def _first_line(source: Source) -> str:
    return source.lines_of_head[0][:60] if source.lines_of_head else ""


__all__ = ["READERS", "Column", "ColumnMap", "File", "Reader", "read", "years"]
