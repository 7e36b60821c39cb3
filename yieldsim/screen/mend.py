"""Gaps: intervals put in where the file has none, light mended by clearness, air by the course of the day."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from yieldsim.screen.clear import SOLAR_CONSTANT, top_of_air
from yieldsim.screen.marked import flagged, noted
from yieldsim.sky import sun
from yieldsim.weather import Flag, Weather

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

LIGHT = ("ghi", "dni", "dhi")
AIR = ("temp_air", "wind_speed", "relative_humidity", "temp_dew", "pressure")
SHORT_H = 3.0  # gaps of light up to this are mended by clearness
STUCK_GAP_H = 16.0  # what a stuck sensor left out may be mended up to a day's light
AIR_GAP_H = 72.0  # temperature, wind and humidity up to this by the course of the days around
_LEAST_ABOVE = 10.0  # W m-2 above the air: a lower sun tells nothing of clearness
_OFF_GRID_SHARE = 0.02  # steps that are no whole number of intervals, above which there is no grid


def on_a_grid(weather: Weather) -> Weather:
    """Return the weather with an interval for every step of time: those the file lacks hold no values.

    Only inside the record; months that a file leaves out altogether stay out where they are longer than a month.
    """
    steps = np.diff(weather.time)
    if len(weather) < 2 or np.all(steps == weather.interval_s):
        return weather
    whole = steps % weather.interval_s == 0
    if np.count_nonzero(~whole) > _OFF_GRID_SHARE * len(steps):
        return weather
    keep = np.concatenate([[True], whole])  # a row between two intervals has no place
    time = weather.time[keep]
    pieces = [[int(time[0])]]
    for step, moment in zip(np.diff(time), time[1:], strict=True):
        if weather.interval_s < step <= 31 * 86_400:
            pieces.append(list(range(int(moment - step) + weather.interval_s, int(moment), weather.interval_s)))
        pieces.append([int(moment)])
    filled = np.array([moment for piece in pieces for moment in piece], dtype=np.int64)
    at = np.searchsorted(filled, time)
    columns = {}
    for name, values in weather.columns.items():
        columns[name] = np.full(len(filled), np.nan)
        columns[name][at] = values[keep]
    flags, row = np.zeros(len(filled), dtype=np.uint32), np.zeros(len(filled), dtype=np.int64)
    flags[at], row[at] = weather.flags[keep], weather.row[keep]
    new = np.ones(len(filled), dtype=bool)
    new[at] = False
    made = replace(weather, time=filled, columns=columns, flags=flags, row=row)
    return noted(made, "missing_rows", new, f"{int(new.sum())} intervals are not in the file", "put in, then mended")


def without_missing_columns(weather: Weather) -> Weather:
    """Return the weather with every column of light there, without values where the file has none."""
    absent = {name: np.full(len(weather), np.nan) for name in LIGHT if name not in weather}
    return replace(weather, columns={**weather.columns, **absent}) if absent else weather


def mended(weather: Weather, course: sun.SunCourse, long_gaps: Mask) -> Weather:
    """Return the weather with gaps mended where that can be done in the open.

    Parameters
    ----------
    weather : Weather on an even grid
    course : SunCourse of its intervals
    long_gaps : (n,) bool array, rows taken out by a check, whose gaps may be as long as a day's light

    Notes
    -----
    In turn: the third column of light from the other two; beam and diffuse from global light alone (Erbs and Driesse);
    gaps of light of up to three hours by clearness (light over that above the air), interpolated between the lit hours
    around; air by the values of the same hour on the days around, up to three days.
    """
    weather = _third_column(weather, course)
    weather = _from_global(weather, course)
    weather = _by_clearness(weather, course, long_gaps)
    for name in AIR:
        if name in weather:
            weather = _by_the_day(weather, name)
    return weather


def _third_column(weather: Weather, course: sun.SunCourse) -> Weather:
    """Return light with one missing column of three worked out from the other two."""
    horizontal = course.cos_zenith * course.lit
    ghi, dni, dhi = (weather[name] for name in LIGHT)
    with np.errstate(divide="ignore", invalid="ignore"):
        found = {
            "ghi": dni * horizontal + dhi,
            "dhi": np.maximum(ghi - dni * horizontal, 0.0),
            # Beam from a low sun is noise over noise: there it is none.
            "dni": np.where(horizontal > 0.03, np.clip((ghi - dhi) / horizontal, 0.0, _most_beam(course)), 0.0),
        }
    for name in LIGHT:
        values = weather[name]
        use = ~np.isfinite(values) & np.isfinite(found[name]) & (course.lit > 0)
        if use.any():
            others = " and ".join(each for each in LIGHT if each != name)
            weather = _with_light(weather, {name: np.where(use, found[name], values)}, use)
            weather = noted(weather, "from_two", use, f"{name} is missing", f"worked out from {others}")
    return weather


def _most_beam(course: sun.SunCourse) -> Array:
    return np.asarray(SOLAR_CONSTANT * course.earth_sun * course.lit)


def _from_global(weather: Weather, course: sun.SunCourse) -> Weather:
    """Return light with beam and diffuse split from global light where both are missing."""
    from pvlib.irradiance import erbs_driesse

    use = np.isfinite(weather["ghi"]) & ~np.isfinite(weather["dni"]) & ~np.isfinite(weather["dhi"]) & (course.lit > 0)
    if not use.any():
        return weather
    zenith = np.degrees(np.arccos(np.clip(course.cos_zenith[use], 0.0, 1.0)))
    lit = course.lit[use]
    extra = SOLAR_CONSTANT * course.earth_sun[use]
    split = erbs_driesse(weather["ghi"][use] / lit, zenith, dni_extra=extra, max_zenith=90.0)
    columns = {}
    for name in ("dni", "dhi"):
        columns[name] = weather[name].copy()
        columns[name][use] = np.nan_to_num(np.asarray(split[name], dtype=np.float64)) * lit
    weather = _with_light(weather, columns, use)
    what = "global light alone"
    return noted(weather, "from_global", use, what, "beam and diffuse light by Erbs and Driesse")


def _by_clearness(weather: Weather, course: sun.SunCourse, long_gaps: Mask) -> Weather:
    """Return light with short gaps filled by clearness."""
    lit = course.lit > 0
    top, beam_top = top_of_air(course), _most_beam(course)
    missing = lit & ~np.isfinite(weather["ghi"] + weather["dni"] + weather["dhi"])
    if not missing.any():
        return weather
    step_h = weather.interval_s / 3600.0
    allowed = np.where(long_gaps, STUCK_GAP_H, SHORT_H)
    fill = _short(missing, lit, allowed / step_h)
    if not fill.any():
        return weather
    columns = {}
    positions = np.arange(len(weather))
    for name, above in (("ghi", top), ("dni", beam_top), ("dhi", top)):
        values = weather[name]
        known = lit & np.isfinite(values) & (above > _LEAST_ABOVE)
        if not known.any():
            return weather
        share = np.interp(positions, positions[known], np.minimum((values / np.maximum(above, 1.0))[known], 1.0))
        columns[name] = np.where(fill & ~np.isfinite(values), share * above, values)
    horizontal = course.cos_zenith * course.lit
    columns["ghi"] = np.where(fill, columns["dni"] * horizontal + columns["dhi"], columns["ghi"])
    weather = _with_light(weather, columns, fill)
    return noted(weather, "gap", fill, "no light in the file", "interpolated by clearness")


def _short(missing: Mask, lit: Mask, allowed: Array) -> Mask:
    """Return missing rows in gaps of few enough lit rows; the night between two days is no part of a gap."""
    at = np.flatnonzero(lit)
    gone = missing[at]
    edges = np.flatnonzero(np.diff(np.concatenate([[0], gone.astype(np.int8), [0]]))).reshape(-1, 2)
    fill = np.zeros(len(missing), dtype=bool)
    for start, end in edges:
        rows = at[start:end]
        if end - start <= allowed[rows].max() + 1e-9:
            fill[rows] = True
    return fill


def _with_light(weather: Weather, columns: dict[str, Array], where: Mask) -> Weather:
    flags = weather.flags | flagged(where, Flag.MENDED_LIGHT)
    return replace(weather, columns={**weather.columns, **columns}, flags=flags)


def _by_the_day(weather: Weather, name: str) -> Weather:
    """Return a column of the air with gaps filled by the same hour of the days around, levelled at the gap's ends."""
    values = weather[name]
    missing = ~np.isfinite(values)
    if not missing.any() or missing.all():
        return weather
    per_day = max(1, round(86_400 / weather.interval_s))
    longest = AIR_GAP_H * 3600 / weather.interval_s
    edges = np.flatnonzero(np.diff(np.concatenate([[0], missing.astype(np.int8), [0]]))).reshape(-1, 2)
    filled, done = values.copy(), np.zeros(len(values), dtype=bool)
    for start, end in edges:
        if end - start > longest:
            continue
        filled[start:end] = _course(values, int(start), int(end), per_day)
        done[start:end] = np.isfinite(filled[start:end])
    if not done.any():
        return weather
    flags = weather.flags | flagged(done, Flag.MENDED_AIR)
    weather = replace(weather, columns={**weather.columns, name: filled}, flags=flags)
    return noted(weather, "air_gap", done, f"{name} is missing", "filled by the course of the days around")


def _course(values: Array, start: int, end: int, per_day: int) -> Array:
    """Return values for a gap: the mean day around it, shifted so that it meets the values at either end."""
    rows = np.arange(start, end)
    around = [
        values[at]
        for shift in range(-3, 4)
        if shift and np.all((at := rows + shift * per_day) >= 0) and np.all(at < len(values))
    ]
    ends = [i for i in (start - 1, end) if 0 <= i < len(values) and np.isfinite(values[i])]
    if not ends:
        return np.full(end - start, np.nan)
    straight = np.interp(rows, ends, values[ends])
    if not around:
        return straight
    counted = np.isfinite(around).sum(axis=0)
    usual = np.where(counted > 0, np.nansum(around, axis=0) / np.maximum(counted, 1), straight)
    level = straight - np.interp(rows, [start, max(end - 1, start + 1)], [usual[0], usual[-1]])
    low, high = np.nanmin(values), np.nanmax(values)
    return np.asarray(np.clip(usual + level, low, high))
