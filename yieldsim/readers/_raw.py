"""What a reader found in a file, and the way from there to a Weather: clock, label, interval, missing values."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from yieldsim.errors import InputError, Problem
from yieldsim.weather import REQUIRED, Finding, Stamp, Weather

Array = NDArray[np.float64]
Times = NDArray[np.int64]

# The year a typical year is dated to: no leap year, and mid-way between two, where the calendar is closest to the sun.
TYPICAL_YEAR = 2002

STILL_WIND = 2.0  # m/s, where a file has no wind at all


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
    row: NDArray[np.int64]
    columns: Mapping[str, Array]
    typical: bool = False
    notes: tuple[str, ...] = ()
    findings: tuple[Finding, ...] = field(default=())


def weather_from(raw: Raw, wanted: Wanted) -> Weather:
    """Return the Weather of rows of one file.

    Raises
    ------
    InputError
        For an unknown position, columns missing, rows out of order, an interval that cannot be told.
    """
    problems = [*_position_problems(raw, wanted), *_column_problems(raw)]
    if problems:
        raise InputError(problems)
    stamp = wanted.stamp or Stamp()
    interval_s = raw.interval_s or _interval(raw)
    label = stamp.label or raw.label
    before_label = {"start": 0, "middle": interval_s // 2, "end": interval_s}[label]
    raw = _in_order(raw)
    longitude = float(_first(wanted.longitude_deg, raw.longitude_deg))
    clock_offset_s = _first(stamp.utc_offset_s, raw.clock_offset_s, 3600 * round(longitude / 15))
    start = raw.time + stamp.shift_s - before_label
    notes = list(raw.notes)
    if raw.typical:
        start, raw = _dated_to_one_year(start, raw)
        notes.append(f"typical year: months of several years set together, dated to {TYPICAL_YEAR}")
    time = start - round(clock_offset_s)
    columns, findings = _without_placeholders(raw, time)
    for name in ("ghi", "dni", "dhi"):
        columns.setdefault(name, np.full(len(time), np.nan))  # for the screen to work out
    if "wind_speed" not in columns:
        columns["wind_speed"] = np.full(len(time), STILL_WIND)
        what = "no wind in the file"
        done = f"{STILL_WIND:g} m/s taken throughout (common practice, no source)"
        findings.append(Finding("no_wind", len(time), int(time[0]), int(time[-1]), what, done))
    if raw.clock_offset_s is None and stamp.utc_offset_s is None:
        notes.append(f"the file does not tell its clock: taken for {_clock(round(clock_offset_s))}, by its longitude")
    words = f"{label} of interval, {raw.clock if stamp.utc_offset_s is None else _clock(stamp.utc_offset_s)}"
    return Weather(
        latitude_deg=float(_first(wanted.latitude_deg, raw.latitude_deg)),
        longitude_deg=longitude,
        elevation_m=float(_first(wanted.elevation_m, raw.elevation_m)),
        utc_offset_h=float(_first(wanted.utc_offset_h, raw.utc_offset_h, clock_offset_s / 3600)),
        time=time,
        interval_s=interval_s,
        columns=columns,
        source=raw.shown,
        label=words + (f", {stamp.shift_s // 60:+d} min" if stamp.shift_s else ""),
        flags=np.zeros(len(time), dtype=np.uint32),
        row=raw.row,
        notes=tuple(notes),
        findings=(*raw.findings, *findings),
        name=raw.name,
        typical=raw.typical,
        stated=wanted.stamp is not None,
    )


def _first(*values: float | None) -> float:
    return next(value for value in values if value is not None)


def _clock(offset_s: int) -> str:
    hours, minutes = divmod(abs(offset_s) // 60, 60)
    return f"UTC{'-' if offset_s < 0 else '+'}{hours:02d}:{minutes:02d}"


def _position_problems(raw: Raw, wanted: Wanted) -> list[Problem]:
    return [
        Problem(raw.shown, 0, name, "not in the file", f"the file's header or the study's `{name}` to say it")
        for name in ("latitude_deg", "longitude_deg", "elevation_m")
        if getattr(raw, name) is None and getattr(wanted, name) is None
    ]


def _column_problems(raw: Raw) -> list[Problem]:
    """Return what is missing: of light, global alone or any two of the three will do; wind may be absent."""
    light = [name for name in ("ghi", "dni", "dhi") if name in raw.columns]
    return [
        Problem(
            raw.shown,
            0,
            name,
            "column missing",
            f"a column for {name}; the file has {', '.join(raw.columns) or 'none'}",
        )
        for name in REQUIRED
        if name not in (*raw.columns, "wind_speed")
        and not (name in ("ghi", "dni", "dhi") and (len(light) >= 2 or "ghi" in light))
    ]


def found_missing(name: str, coded: NDArray[np.bool_], time: Times) -> Finding:
    """Return the finding of values that are codes for "missing".

    Parameters
    ----------
    name : str, of the column
    coded : (n,) bool array
    time : (n,) int64 array [s]
    """
    at = np.flatnonzero(coded)
    what = f"{name} is missing by the format's code in {'every row' if coded.all() else f'{at.size} rows'}"
    return Finding("missing_code", int(at.size), int(time[at[0]]), int(time[at[-1]]), what, "taken as missing")


def _in_order(raw: Raw) -> Raw:
    """Return rows in the order of time, each label once; a typical year is put in order when it is dated."""
    if raw.typical or len(raw.time) < 2 or np.all(np.diff(raw.time) > 0):
        return raw
    findings = list(raw.findings)
    order = np.argsort(raw.time, kind="stable")
    time = raw.time[order]
    back = int(np.count_nonzero(np.diff(raw.time) < 0))
    if back:
        at = int(np.argmax(np.diff(raw.time) < 0)) + 1
        what = f"time goes back {back} times, first in row {raw.row[at]}"
        findings.append(Finding("out_of_order", back, int(raw.time[at]), int(raw.time[at]), what, "put in order"))
    again = np.concatenate([[False], np.diff(time) == 0])
    if again.any():
        twice = time[again]
        what = f"{int(again.sum())} labels appear again, first in row {raw.row[order][again][0]}"
        done = "the first of each kept"
        findings.append(Finding("duplicate", int(again.sum()), int(twice[0]), int(twice[-1]), what, done))
    kept = order[~again]
    columns = {name: values[kept] for name, values in raw.columns.items()}
    return replace(raw, time=raw.time[kept], row=raw.row[kept], columns=columns, findings=tuple(findings))


def _interval(raw: Raw) -> int:
    """Return the most frequent step between labels [s]."""
    if len(raw.time) < 2:
        raise InputError(Problem(raw.shown, 0, "time", f"{len(raw.time)} rows", "at least two, to tell the interval"))
    steps, counts = np.unique(np.diff(np.sort(raw.time)), return_counts=True)
    steps, counts = steps[steps > 0], counts[steps > 0]
    if not steps.size:
        raise InputError(Problem(raw.shown, 0, "time", "one label for all rows", "rising times"))
    return int(steps[np.argmax(counts)])


def _dated_to_one_year(start: Times, raw: Raw) -> tuple[Times, Raw]:
    """Return starts dated to one year, month and day kept, and the rows in that order; 29 February is left out."""
    moment = start.astype("datetime64[s]")
    year = moment.astype("datetime64[Y]")
    leap_day = (moment.astype("datetime64[M]") - year).astype(int) == 1
    leap_day &= (moment.astype("datetime64[D]") - moment.astype("datetime64[M]")).astype(int) == 28
    month = (moment.astype("datetime64[M]") - year).astype(int)
    in_month = moment - moment.astype("datetime64[M]").astype("datetime64[s]")
    first = np.datetime64(f"{TYPICAL_YEAR}-01") + month
    dated = (first.astype("datetime64[s]") + in_month).astype(np.int64)
    kept = np.flatnonzero(~leap_day)
    order = kept[np.argsort(dated[kept], kind="stable")]
    findings = raw.findings
    if leap_day.any():
        count = int(leap_day.sum())
        findings = (
            *findings,
            Finding("leap_day", count, 0, 0, f"{count} rows of 29 February in a typical year", "left out"),
        )
    columns = {name: values[order] for name, values in raw.columns.items()}
    return dated[order], replace(raw, row=raw.row[order], columns=columns, findings=findings)


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
    return bool(steps.size and (steps.min() < -86_400 or steps.max() > 32 * 86_400))


_NEVER_ZERO = {"precipitable_water": "water", "aod500": "aerosol", "aod_broadband": "aerosol", "albedo": "albedo"}


def _without_placeholders(raw: Raw, time: Times) -> tuple[dict[str, Array], list[Finding]]:
    """Return the columns with a 0 that means "missing" taken out, and what was found."""
    columns: dict[str, Array] = {}
    findings: list[Finding] = []
    for name, values in raw.columns.items():
        if name not in _NEVER_ZERO:
            columns[name] = values
            continue
        zero = values == 0.0
        kept = np.where(zero, np.nan, values)
        if np.isfinite(kept).any():
            columns[name] = kept
        if zero.any():
            rows = "every row" if zero.all() else f"{int(zero.sum())} rows"
            what = f"{name} is 0 in {rows}: not a measured {_NEVER_ZERO[name]}"
            first, last = int(time[zero][0]), int(time[zero][-1])
            findings.append(Finding("unfilled", int(zero.sum()), first, last, what, "taken as missing"))
    return columns, findings


def joined(raws: list[Raw]) -> Raw:
    """Return consecutive pieces of one file as one."""
    first = raws[0]
    if len(raws) == 1:
        return first
    return replace(
        first,
        time=np.concatenate([raw.time for raw in raws]),
        row=np.concatenate([raw.row for raw in raws]),
        columns={name: np.concatenate([raw.columns[name] for raw in raws]) for name in first.columns},
        findings=tuple(finding for raw in raws for finding in raw.findings),
    )
