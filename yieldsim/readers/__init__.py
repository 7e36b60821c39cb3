"""One file per weather format, each making a Weather.

    weather = readers.read("saltmarsh_point.csv")
    for year in readers.years(["2019.csv", "2020.csv"]): ...

A file is recognised by what is in it, not by its name; ``format`` overrides. Whether what it says can be believed is
not decided here but in `yieldsim.screen`.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from types import ModuleType
from typing import Protocol, cast

import numpy as np
from numpy.typing import NDArray

from yieldsim.errors import InputError, Problem
from yieldsim.readers import bsrn, cf, epw, grid, mapped, plain, psm, pvgis, surfrad, tmy2, tmy3
from yieldsim.readers._raw import Raw, Wanted, joined, weather_from
from yieldsim.readers._source import Source, open_source
from yieldsim.readers.mapped import Column, ColumnMap
from yieldsim.weather import STAMP_FORM, Weather, cut, parse_stamp


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
    if cell is not None:
        return grid.read(path, shown or path, cell, wanted)
    source = open_source(path, shown)
    raws = list(_raws(source, format, columns))
    if not raws:
        raise source.refuse(0, "", "a header without rows", "at least one row")
    return weather_from(joined(raws), wanted)


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
    follow each other, are cut at the turn of each year of local standard time. Typical years stand for themselves.

    Raises
    ------
    InputError, PlaceError
        As `read`; and where files of one stretch differ in interval, clock or place.
    """
    run: list[tuple[Raw, Wanted]] = []
    for file in files:
        wanted = _wanted(file.timestamps, file.shown, over)
        if file.cell is not None:
            yield from _flushed(run)
            yield from cut_at_years(grid.read(file.path, file.shown, file.cell, wanted))
            continue
        source = open_source(file.path, file.shown)
        fresh = True
        for raw in _raws(source, file.format, file.columns):
            if run and (raw.typical or run[-1][0].typical or (fresh and not _follows(run[-1][0], raw))):
                yield from _flushed(run)
            run.append((raw, wanted))
            fresh = False
            yield from _whole_years(run)
        if fresh:
            raise source.refuse(0, "", "a header without rows", "at least one row")
    yield from _flushed(run)


_A_YEAR_S = 366 * 86_400
_GAP_S = 45 * 86_400  # files further apart than that are years of their own


def _follows(before: Raw, after: Raw) -> bool:
    """Return whether a file goes on where another one ended, rather than being a year of its own."""
    if _span_s([before]) > 300 * 86_400 and _span_s([after]) > 300 * 86_400:
        return False
    return 0 < int(after.time[0]) - int(before.time[-1]) < _GAP_S


def _span_s(raws: Sequence[Raw]) -> int:
    return int(raws[-1].time[-1]) - int(raws[0].time[0])


def _flushed(run: list[tuple[Raw, Wanted]]) -> Iterator[Weather]:
    """Yield what a stretch still holds, and forget it."""
    if run:
        raws, wanted = [raw for raw, _ in run], run[0][1]
        run.clear()
        weather = weather_from(joined(_alike(raws)), wanted)
        yield weather


def _whole_years(run: list[tuple[Raw, Wanted]]) -> Iterator[Weather]:
    """Yield the calendar years that a stretch longer than a year has behind it, and keep the rest."""
    if run[-1][0].typical or _span_s([raw for raw, _ in run]) <= _A_YEAR_S:
        return
    wanted = run[0][1]
    together = joined(_alike([raw for raw, _ in run]))
    run.clear()
    number = _local_year(together, wanted)
    last = int(number[-1])
    for year in np.unique(number[number < last]):
        yield weather_from(_rows(together, number == year), wanted)
    run.append((_rows(together, number == last), wanted))


def cut_at_years(weather: Weather) -> Iterator[Weather]:
    """Yield a weather of more than a year cut at the turn of each year of local standard time."""
    if weather.typical or int(weather.time[-1] - weather.time[0]) <= _A_YEAR_S:
        yield weather
        return
    local = weather.time + round(weather.utc_offset_h * 3600)
    number = local.astype("datetime64[s]").astype("datetime64[Y]").astype(np.int64)
    edges = [0, *(np.flatnonzero(np.diff(number)) + 1).tolist(), len(weather)]
    for start, end in pairwise(edges):
        yield cut(weather, start, end)


def _local_year(raw: Raw, wanted: Wanted) -> NDArray[np.int64]:
    """Return the year of local standard time each row belongs to; labels at an interval's end belong before it."""
    longitude = raw.longitude_deg if wanted.longitude_deg is None else wanted.longitude_deg
    fallback = 0.0 if longitude is None else 3600.0 * round(longitude / 15)
    clock_s = fallback if raw.clock_offset_s is None else float(raw.clock_offset_s)
    offset_h = raw.utc_offset_h if wanted.utc_offset_h is None else wanted.utc_offset_h
    local = raw.time - round(clock_s) + round((clock_s / 3600 if offset_h is None else offset_h) * 3600)
    moment = local - (1 if raw.label == "end" else 0)
    return np.asarray(moment.astype("datetime64[s]").astype("datetime64[Y]").astype(np.int64))


def _rows(raw: Raw, chosen: NDArray[np.bool_]) -> Raw:
    columns = {name: values[chosen] for name, values in raw.columns.items()}
    return replace(raw, time=raw.time[chosen], row=raw.row[chosen], columns=columns)


def _alike(raws: list[Raw]) -> list[Raw]:
    """Return pieces of one stretch, once they are known to be of one kind."""
    first = raws[0]
    for raw in raws[1:]:
        for name in ("label", "clock_offset_s", "interval_s", "latitude_deg", "longitude_deg"):
            if getattr(raw, name) != getattr(first, name):
                found = f"{getattr(raw, name)} after {getattr(first, name)} in {first.shown}"
                raise InputError(Problem(raw.shown, 0, name, found, "files of one kind for one stretch of time"))
    shared = [name for name in first.columns if all(name in raw.columns for raw in raws)]
    names = dict.fromkeys(raw.shown for raw in raws)
    shown = first.shown if len(names) == 1 else f"{first.shown} to {raws[-1].shown} ({len(names)} files)"
    return [replace(raw, shown=shown, columns={name: raw.columns[name] for name in shared}) for raw in raws]


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
