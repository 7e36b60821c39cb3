"""From rows as read to a Weather: place, clock, label, order, and what stands for "missing"."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from yieldsim.errors import InputError, Problem
from yieldsim.readers._raw import Array, Mark, Mask, Raw, Times, Wanted, chosen, zone_h
from yieldsim.weather import REQUIRED, Finding, Stamp, Weather

# The year a typical year is dated to: no leap year, and mid-way between two, where the calendar is closest to the sun.
TYPICAL_YEAR = 2002

STILL_WIND = 2.0  # m/s, where a file has no wind at all

_LIGHT = ("ghi", "dni", "dhi")
_FIRST_YEAR, _LAST_YEAR = 1900, 2200
_STRAY_SHARE = 0.02  # labels between two intervals: up to that share left out, beyond it the file has no one interval


def weather_from(raw: Raw, wanted: Wanted) -> Weather:
    """Return the Weather of rows of one file.

    Raises
    ------
    InputError
        For an unknown position, columns missing, an interval that cannot be told, years that cannot be.
    """
    problems = [*_position_problems(raw, wanted), *_column_problems(raw)]
    if problems:
        raise InputError(problems)
    stamp = wanted.stamp or Stamp()
    interval_s = raw.interval_s or interval_of(raw)
    label = stamp.label or raw.label
    clock_s = clock_of(raw, wanted)
    to_label_s = stamp.shift_s - before_label(label, interval_s)

    def started(labels: Times) -> Times:
        """Return the starts of intervals in UTC from labels of the file's clock."""
        start = labels + to_label_s
        return (_dated(start) if raw.typical else start) - clock_s

    notes = list(raw.notes)
    if raw.typical:
        raw = _without_leap_day(raw, to_label_s)
        notes.append(f"typical year: months of several years set together, dated to {TYPICAL_YEAR}")
    raw = _in_order(raw, started, interval_s)
    time = started(raw.time)
    if raw.clock_offset_s is None and stamp.utc_offset_s is None:
        notes.append(f"the file does not tell its clock: taken for {_clock(clock_s)}, by its longitude")
    columns, findings = _without_placeholders(raw, time)
    for name in _LIGHT:
        columns.setdefault(name, np.full(len(time), np.nan))  # for the screen to work out
    if "wind_speed" not in columns:
        columns["wind_speed"] = np.full(len(time), STILL_WIND)
        done = f"{STILL_WIND:g} m/s taken throughout (common practice, no source)"
        findings.append(Finding("no_wind", len(time), int(time[0]), int(time[-1]), "no wind in the file", done))
    words = f"{label} of interval, {raw.clock if stamp.utc_offset_s is None else _clock(stamp.utc_offset_s)}"
    return Weather(
        latitude_deg=float(_first(wanted.latitude_deg, raw.latitude_deg)),
        longitude_deg=float(_first(wanted.longitude_deg, raw.longitude_deg)),
        elevation_m=float(_first(wanted.elevation_m, raw.elevation_m)),
        utc_offset_h=local_h(raw, wanted),
        time=time,
        interval_s=interval_s,
        columns=columns,
        source=raw.shown,
        label=words + (f", {stamp.shift_s // 60:+d} min" if stamp.shift_s else ""),
        flags=np.zeros(len(time), dtype=np.uint32),
        row=raw.row,
        notes=tuple(notes),
        findings=(*(_finding(mark, raw, started) for mark in raw.marks), *findings),
        name=raw.name,
        typical=raw.typical,
        stated=wanted.stamp is not None,
    )


def clock_of(raw: Raw, wanted: Wanted) -> int:
    """Return the labels' clock less UTC [s]: as the study says, as the file says, by the longitude."""
    told = wanted.stamp.utc_offset_s if wanted.stamp else None
    longitude = raw.longitude_deg if wanted.longitude_deg is None else wanted.longitude_deg
    return round(_first(told, raw.clock_offset_s, 3600 * (zone_h(longitude) or 0.0)))


def local_h(raw: Raw, wanted: Wanted) -> float:
    """Return local standard time less UTC [h]."""
    return float(_first(wanted.utc_offset_h, raw.utc_offset_h, clock_of(raw, wanted) / 3600))


def before_label(label: str, interval_s: int) -> int:
    """Return how long an interval lasts before its label [s]."""
    return {"start": 0, "middle": interval_s // 2, "end": interval_s}[label]


def interval_of(raw: Raw) -> int:
    """Return the most frequent step between labels [s]."""
    if len(raw.time) < 2:
        line = int(raw.row[0]) if len(raw.row) else 0
        raise InputError(
            Problem(raw.shown, line, "time", f"{len(raw.time)} rows", "at least two, to tell the interval")
        )
    steps, counts = np.unique(np.diff(np.sort(raw.time)), return_counts=True)
    steps, counts = steps[steps > 0], counts[steps > 0]
    if not steps.size:
        raise InputError(Problem(raw.shown, int(raw.row[0]), "time", "one label for all rows", "rising times"))
    return int(steps[np.argmax(counts)])


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
    light = [name for name in _LIGHT if name in raw.columns]
    has = ", ".join(raw.columns) or "none"
    return [
        Problem(raw.shown, 0, name, "column missing", f"a column for {name}; the file has {has}")
        for name in REQUIRED
        if name not in (*raw.columns, "wind_speed") and not (name in _LIGHT and (len(light) >= 2 or "ghi" in light))
    ]


def _finding(mark: Mark, raw: Raw, started: Callable[[Times], Times]) -> Finding:
    """Return what a mark tells, with its first and last time in UTC."""
    count, time = len(mark.time), started(mark.time)
    file = "" if mark.shown == raw.shown else f" of {mark.shown}"
    where = "every row" if count >= len(raw.time) else f"{count} rows, first in row {mark.row[0]}{file}"
    return Finding(mark.kind, count, int(time.min()), int(time.max()), f"{mark.what} in {where}", mark.done)


# ----------------------------------------------------------------------------------------------------- order of time


def _in_order(raw: Raw, started: Callable[[Times], Times], interval_s: int) -> Raw:
    """Return rows in the order of time, each interval once; what was out of place is marked."""
    time = started(raw.time)
    year = time.astype("datetime64[s]").astype("datetime64[Y]").astype(np.int64) + 1970
    beyond = (year < _FIRST_YEAR) | (year > _LAST_YEAR)
    if beyond.any():
        at = int(np.argmax(beyond))
        found = f"the year {year[at]} ({int(beyond.sum())} such rows)"
        raise InputError(Problem(raw.shown, int(raw.row[at]), "time", found, f"{_FIRST_YEAR} to {_LAST_YEAR}"))
    if len(time) < 2 or np.diff(time).min() >= interval_s:
        return raw
    if not raw.typical:  # in a typical year the months need not follow each other
        back = np.concatenate([[False], np.diff(time) < 0])
        raw = _marked(raw, back, "out_of_order", "time goes back", "put in order")
    order = np.argsort(time, kind="stable")
    raw, time = _in_this_order(raw, order), time[order]
    again = np.concatenate([[False], np.diff(time) == 0])
    other = again & _differs_from_before(raw)
    raw = _marked(raw, again & ~other, "duplicate", "the same interval again", "the first of each kept")
    raw = _marked(raw, other, "duplicate", "the same interval again with other values", "the first of each kept")
    raw, time = _in_this_order(raw, np.flatnonzero(~again)), time[~again]
    return _without_strays(raw, time, interval_s)


def _without_strays(raw: Raw, time: Times, interval_s: int) -> Raw:
    """Return rows without those that begin in the first half of the interval before them."""
    stray = np.concatenate([[False], np.diff(time) < interval_s / 2])
    count = int(stray.sum())
    if not count:
        return raw
    if count > _STRAY_SHARE * len(time):
        at = int(np.argmax(stray))
        found = f"{time[at] - time[at - 1]} s after the row before ({count} such rows)"
        allowed = f"one interval throughout; most frequent are {interval_s} s"
        raise InputError(Problem(raw.shown, int(raw.row[at]), "time", found, allowed))
    raw = _marked(raw, stray, "stray_rows", "a label between two intervals", "left out")
    return _in_this_order(raw, np.flatnonzero(~stray))


def _differs_from_before(raw: Raw) -> Mask:
    """Return whether each row has other values than the one before it."""
    differs = np.zeros(len(raw.time), dtype=bool)
    for values in raw.columns.values():
        same = (values[1:] == values[:-1]) | (np.isnan(values[1:]) & np.isnan(values[:-1]))
        differs[1:] |= ~same
    return differs


def _marked(raw: Raw, at: Mask, kind: str, what: str, done: str) -> Raw:
    if not at.any():
        return raw
    return replace(raw, marks=(*raw.marks, Mark(kind, what, done, raw.shown, raw.time[at], raw.row[at])))


def _in_this_order(raw: Raw, order: np.ndarray) -> Raw:
    """Return rows in an order, with all marks: those on rows left out are what tells of them."""
    return replace(chosen(raw, order), marks=raw.marks)


# ---------------------------------------------------------------------------------------------------- typical years


def _dated(start: Times) -> Times:
    """Return starts dated to one year, month and day kept; 29 February falls on 1 March."""
    moment = start.astype("datetime64[s]")
    month = (moment.astype("datetime64[M]") - moment.astype("datetime64[Y]")).astype(int)
    in_month = moment - moment.astype("datetime64[M]").astype("datetime64[s]")
    first = np.datetime64(f"{TYPICAL_YEAR}-01") + month
    return np.asarray((first.astype("datetime64[s]") + in_month).astype(np.int64))


def _without_leap_day(raw: Raw, to_label_s: int) -> Raw:
    moment = (raw.time + to_label_s).astype("datetime64[s]")
    first = moment.astype("datetime64[M]")
    leap_day = (first - moment.astype("datetime64[Y]")).astype(int) == 1
    leap_day &= (moment.astype("datetime64[D]") - first.astype("datetime64[D]")).astype(int) == 28
    if not leap_day.any():
        return raw
    raw = _marked(raw, leap_day, "leap_day", "29 February of a typical year", "left out")
    return _in_this_order(raw, np.flatnonzero(~leap_day))


# ------------------------------------------------------------------------------------------- zeros that are no values

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
            rows = "every row" if zero.all() else f"{int(zero.sum())} rows, first in row {raw.row[zero][0]}"
            what = f"{name} is 0 in {rows}: not a measured {_NEVER_ZERO[name]}"
            first, last = int(time[zero][0]), int(time[zero][-1])
            findings.append(Finding("unfilled", int(zero.sum()), first, last, what, "taken as missing"))
    return columns, findings
