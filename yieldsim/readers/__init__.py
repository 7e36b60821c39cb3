"""One file per weather format, each making a Weather.

    weather = readers.read("saltmarsh_point.csv")
    for year in readers.years(["2019.csv", "2020.csv"]): ...

A file is recognised by what is in it, not by its name; ``format`` overrides. Whether what it says can be believed is
not decided here but in `yieldsim.screen`.
"""

from __future__ import annotations

from collections.abc import Iterator
from types import ModuleType
from typing import Protocol, cast

from yieldsim.errors import InputError, Problem
from yieldsim.readers import plain, tmy3
from yieldsim.readers._raw import Raw, Wanted, joined, weather_from
from yieldsim.readers._source import Source, open_source
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
READERS = _registry(tmy3, plain)


def read(
    path: str,
    format: str | None = None,  # noqa: A002 - the study file's own word
    timestamps: str | None = None,
    *,
    shown: str | None = None,
    latitude_deg: float | None = None,
    longitude_deg: float | None = None,
    elevation_m: float | None = None,
    utc_offset_h: float | None = None,
    cell: tuple[int, int] | None = None,
) -> Weather:
    """Read one weather file.

    Parameters
    ----------
    path : str, the file, or ``pvlib:NAME`` for one that pvlib ships
    format : str or None, a name of `READERS`; None = recognise it
    timestamps : str or None, where the time labels sit, see `weather.parse_stamp`; None = as the format documents
    shown : str or None, how messages and results name the file; None = its path
    latitude_deg, longitude_deg, elevation_m, utc_offset_h : over what the file says
    cell : (row, column) or None, of a grid of weather

    Raises
    ------
    InputError
        If the file is not there, of no known format or broken: the message names file and row.
    PlaceError
        If it cannot be read on this machine.
    """
    shown = shown or path
    stamp = None
    if timestamps is not None:
        try:
            stamp = parse_stamp(timestamps)
        except ValueError:
            raise InputError(Problem(shown, 0, "timestamps", repr(timestamps), STAMP_FORM)) from None
    wanted = Wanted(stamp, latitude_deg, longitude_deg, elevation_m, utc_offset_h)
    if cell is not None:
        from yieldsim.readers import grid

        return grid.read(path, shown, cell, wanted)
    source = open_source(path, shown)
    raws = list(_reader(source, format).read(source))
    if not raws:
        raise source.refuse(0, "", "a header without rows", "at least one row")
    return weather_from(joined(raws), wanted)


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


__all__ = ["READERS", "Reader", "read"]
