"""What a reader found in a file: rows with the labels of the file's own clock, and marks on some of them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from yieldsim.errors import InputError, Problem
from yieldsim.readers._source import Source
from yieldsim.weather import COLUMNS, Stamp

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Times = NDArray[np.int64]

MOST_OFFSET_H = 14.0  # clocks of the world lie within UTC-12 and UTC+14
_DAY_S = 86_400


@dataclass(frozen=True, slots=True)
class Wanted:
    """What the study says over what the file says; None = the file's own stands.

    Parameters
    ----------
    stamp : Stamp
    latitude_deg, longitude_deg : float [deg]
    elevation_m : float [m]
    utc_offset_h : float [h], local standard time less UTC
    """

    stamp: Stamp | None = None
    latitude_deg: float | None = None
    longitude_deg: float | None = None
    elevation_m: float | None = None
    utc_offset_h: float | None = None


@dataclass(frozen=True, slots=True)
class Mark:
    """Something a reader found in some rows; a Finding is made of it once it is known which year they belong to.

    Parameters
    ----------
    kind : str, short name
    what : str, plain words that "in 5 rows" can follow (``ghi is missing by the format's code``)
    done : str, plain words
    shown : str, the file
    time : (n,) int64 array [s], labels of the rows, as unix seconds of the file's clock
    row : (n,) int64 array, lines of the file
    """

    kind: str
    what: str
    done: str
    shown: str
    time: Times
    row: Times


@dataclass(frozen=True, slots=True)
class Raw:
    """Rows of a weather file as read.

    Parameters
    ----------
    shown : str, the file as the user named it
    name : str, of the place
    latitude_deg, longitude_deg, elevation_m, utc_offset_h : as in Weather; None where the file does not say
    clock_offset_s : int [s], the clock of the labels less UTC; None = local standard time, by the longitude
    label : ``start``, ``middle`` or ``end``: where in the interval the format documents its labels
    clock : str, plain words for the clock (``local standard time``)
    time : (n,) int64 array [s], the labels as unix seconds of the file's clock
    interval_s : int [s]; None = take the most frequent step
    row : (n,) int64 array, line of the file
    columns : name -> (n,) float64 array in the units of `weather.COLUMNS`
    typical : bool, months of several years set together
    notes : what people should know
    marks : what was found in some of the rows
    """

    shown: str
    name: str
    latitude_deg: float | None
    longitude_deg: float | None
    elevation_m: float | None
    utc_offset_h: float | None
    clock_offset_s: int | None
    label: str
    clock: str
    time: Times
    interval_s: int | None
    row: Times
    columns: Mapping[str, Array]
    typical: bool = False
    notes: tuple[str, ...] = ()
    marks: tuple[Mark, ...] = ()


def offset_s(source: Source, line: int, where: str, hours: float) -> int:
    """Return a clock's offset from UTC in seconds; raises InputError for what no clock on earth has."""
    if not abs(hours) <= MOST_OFFSET_H:
        raise source.refuse(line, where, f"{hours:g} h from UTC", f"{-MOST_OFFSET_H:g} to {MOST_OFFSET_H:g} h")
    return round(hours * 3600)


def zone_h(longitude_deg: float | None) -> float | None:
    """Return the whole hours of local standard time less UTC that a longitude suggests."""
    if longitude_deg is None or not abs(longitude_deg) <= 180:
        return None
    return float(round(longitude_deg / 15))


def missing(source: Source, name: str, coded: Mask, time: Times, row: Times) -> tuple[Mark, ...]:
    """Return the mark on values that are the format's codes for "missing"; none where there are none.

    Parameters
    ----------
    source : Source
    name : str, of the column
    coded : (n,) bool array
    time : (n,) int64 array [s], labels
    row : (n,) int64 array, lines of the file
    """
    if not coded.any():
        return ()
    what = f"{name} is missing by the format's code"
    return (Mark("missing_code", what, "taken as missing", source.shown, time[coded], row[coded]),)


def without_codes(
    source: Source, columns: Mapping[str, Array], coded: Mapping[str, Mask], time: Times, row: Times
) -> tuple[dict[str, Array], tuple[Mark, ...]]:
    """Return columns with their codes for "missing" taken out, and the marks that tell of it.

    Parameters
    ----------
    source : Source
    columns : name -> (n,) array
    coded : name -> (n,) bool array, for those columns that can have a code
    time, row : (n,) int64 arrays, labels and lines
    """
    marks = [mark for name, at in coded.items() for mark in missing(source, name, at, time, row)]
    clean = {
        name: np.where(coded[name], np.nan, values) if name in coded else values for name, values in columns.items()
    }
    return clean, tuple(marks)


def within_range(raw: Raw) -> Raw:
    """Return rows whose values are all possible; raises InputError with file and row of the first of each column."""
    problems: list[Problem] = []
    for name, values in raw.columns.items():
        unit, low, high = COLUMNS[name]
        outside = (values < low) | (values > high)
        if outside.any():
            at = int(np.argmax(outside))
            found = f"{values[at]:g} {unit} ({int(outside.sum())} such rows)"
            problems.append(Problem(raw.shown, int(raw.row[at]), name, found, f"{low:g} to {high:g} {unit}"))
    if problems:
        raise InputError(problems)
    return raw


def is_typical(time: Times) -> bool:
    """Return whether labels jump between years from month to month, as in a typical year.

    Parameters
    ----------
    time : (n,) int64 array [s], labels as unix seconds of the file's clock
    """
    month = (time - 1).astype("datetime64[s]").astype("datetime64[M]")  # a last label at midnight still belongs
    months = np.unique(month)
    if len(months) > 12 or len(np.unique(months.astype("datetime64[Y]"))) < 2:
        return False
    steps = np.diff(time)
    return bool(steps.size and (steps.min() < -_DAY_S or steps.max() > 32 * _DAY_S))


def chosen(raw: Raw, rows: Mask | NDArray[np.intp]) -> Raw:
    """Return some of the rows, with those marks that lie in their stretch of time."""
    columns = {name: values[rows] for name, values in raw.columns.items()}
    time = raw.time[rows]
    return replace(raw, time=time, row=raw.row[rows], columns=columns, marks=_marks_within(raw, time))


def _marks_within(raw: Raw, time: Times) -> tuple[Mark, ...]:
    if not raw.marks or not len(time):
        return ()
    first, last = int(time.min()), int(time.max())
    kept = []
    for mark in raw.marks:
        at = (mark.time >= first) & (mark.time <= last)
        if at.all():
            kept.append(mark)
        elif at.any():
            kept.append(replace(mark, time=mark.time[at], row=mark.row[at]))
    return tuple(kept)


def joined(raws: Sequence[Raw]) -> Raw:
    """Return pieces that follow each other as one; a column that some of them lack holds no values there."""
    first = raws[0]
    if len(raws) == 1:
        return first
    names = dict.fromkeys(name for raw in raws for name in raw.columns)
    files = list(dict.fromkeys(raw.shown for raw in raws))
    return replace(
        first,
        shown=files[0] if len(files) == 1 else f"{files[0]} to {files[-1]} ({len(files)} files)",
        time=np.concatenate([raw.time for raw in raws]),
        row=np.concatenate([raw.row for raw in raws]),
        columns={name: np.concatenate([_column(raw, name) for raw in raws]) for name in names},
        notes=tuple(dict.fromkeys(note for raw in raws for note in raw.notes)),
        marks=_joined_marks([mark for raw in raws for mark in raw.marks]),
    )


def _column(raw: Raw, name: str) -> Array:
    return raw.columns[name] if name in raw.columns else np.full(len(raw.time), np.nan)


def _joined_marks(marks: Sequence[Mark]) -> tuple[Mark, ...]:
    """Return marks of one kind as one; the file named is that of the first."""
    together: dict[tuple[str, str, str], list[Mark]] = {}
    for mark in marks:
        together.setdefault((mark.kind, mark.what, mark.done), []).append(mark)
    return tuple(
        replace(
            same[0],
            time=np.concatenate([mark.time for mark in same]),
            row=np.concatenate([mark.row for mark in same]),
        )
        for same in together.values()
    )
