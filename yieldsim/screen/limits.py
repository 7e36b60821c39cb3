"""What the sun and the air allow: light at night, below zero, beyond what arrives from space."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from yieldsim.screen.clear import SOLAR_CONSTANT
from yieldsim.sky import sun
from yieldsim.weather import Finding, Flag, Weather

Array = NDArray[np.float64]

LIGHT = ("ghi", "dni", "dhi")


def possible(weather: Weather, course: sun.SunCourse) -> Weather:
    """Return the weather with light beyond what is physically possible taken out, rare light told of.

    Notes
    -----
    Physically possible, with S the sun's irradiance at its distance and mu its cosine: global up to 1.5 S mu^1.2 + 100,
    diffuse up to 0.95 S mu^1.2 + 50 W m-2. Extremely rare: 1.2 S mu^1.2 + 50 and 0.75 S mu^1.2 + 30 W m-2. (Beam has a
    limit of its own.)

    References
    ----------
    C. N. Long, Y. Shi, An automated quality assessment and control algorithm for surface radiation measurements, Open
    Atmos. Sci. J. 2 (2008) 23, table 1; limits as recommended for BSRN.
    """
    top = SOLAR_CONSTANT * course.earth_sun * course.cos_zenith**1.2
    columns = dict(weather.columns)
    for name, (most, plus, rare, rare_plus) in {"ghi": (1.5, 100, 1.2, 50), "dhi": (0.95, 50, 0.75, 30)}.items():
        values = columns[name]
        beyond = (course.lit > 0) & (values > most * top + plus)
        if beyond.any():
            worst = float(np.nanmax(np.where(beyond, values, -np.inf)))
            columns[name] = np.where(beyond, np.nan, values)
            weather = replace(weather, columns=columns)
            what = f"{name} up to {worst:.0f} W/m2, more than is physically possible"
            note = finding("beyond_possible", weather, beyond, what, "taken out, then mended")
            weather = replace(weather, findings=(*weather.findings, note))
        seldom = (course.lit > 0) & (values > rare * top + rare_plus) & ~beyond
        if seldom.sum() > _RARE_SHARE * np.count_nonzero(course.lit > 0):
            what = f"{name} is extremely high in {int(seldom.sum())} rows"
            note = finding("rare", weather, seldom, what, "kept")
            weather = replace(weather, findings=(*weather.findings, note))
    return weather


_RARE_SHARE = 0.005  # of daylight rows: single ones are clouds' edges


def finding(kind: str, weather: Weather, where: NDArray[np.bool_], found: str, done: str) -> Finding:
    """Return a Finding about the chosen intervals of a Weather."""
    at = np.flatnonzero(where)
    first, last = (int(weather.time[at[0]]), int(weather.time[at[-1]])) if at.size else (0, 0)
    return Finding(kind, int(at.size), first, last, found, done)


def without_night_light(weather: Weather, course: sun.SunCourse) -> Weather:
    """Return the weather with light set to zero in intervals with the sun down at every sub-step.

    Parameters
    ----------
    weather : Weather
    course : SunCourse of its intervals
    """
    columns = dict(weather.columns)
    night = course.lit == 0.0
    light = np.zeros(len(weather), dtype=bool)
    brightest = 0.0
    for name in LIGHT:
        shining = night & (columns[name] != 0.0)  # a night without a value is dark, too
        light |= shining & (columns[name] > 0.0)
        brightest = max(brightest, float(np.nanmax(np.where(shining, columns[name], 0.0), initial=0.0)))
        columns[name] = np.where(shining, 0.0, columns[name])
    if not light.any():
        return replace(weather, columns=columns)
    note = finding("night_light", weather, light, f"up to {brightest:.0f} W/m2 with the sun down", "set to zero")
    flags = weather.flags | np.where(light, np.uint32(Flag.NIGHT_LIGHT), np.uint32(0))
    return replace(weather, columns=columns, flags=flags, findings=(*weather.findings, note))


def without_negative_light(weather: Weather) -> Weather:
    """Return the weather with negative irradiance, a sensor's offset at night, set to zero."""
    columns = dict(weather.columns)
    negative = np.zeros(len(weather), dtype=bool)
    lowest = 0.0
    for name in LIGHT:
        below = columns[name] < 0.0
        negative |= below
        lowest = min(lowest, float(np.min(np.where(below, columns[name], 0.0), initial=0.0)))
        columns[name] = np.where(below, 0.0, columns[name])
    if not negative.any():
        return weather
    note = finding("negative", weather, negative, f"irradiance down to {lowest:.1f} W/m2", "set to zero")
    flags = weather.flags | np.where(negative, np.uint32(Flag.NEGATIVE), np.uint32(0))
    return replace(weather, columns=columns, flags=flags, findings=(*weather.findings, note))


def with_limited_beam(weather: Weather, course: sun.SunCourse) -> Weather:
    """Return the weather with no more beam than the sun sends to the top of the air.

    Notes
    -----
    Limit: solar constant x earth-sun factor x lit share of the interval; the share because a file's value is the mean
    over the whole interval.
    """
    limit = SOLAR_CONSTANT * course.earth_sun * course.lit
    over = weather["dni"] > limit
    if not over.any():
        return weather
    worst = float(np.max(np.where(over, weather["dni"] - limit, 0.0)))
    note = finding(
        "dni_beyond_sun", weather, over, f"beam up to {worst:.0f} W/m2 above what the sun sends", "limited to that"
    )
    flags = weather.flags | np.where(over, np.uint32(Flag.DNI_LIMITED), np.uint32(0))
    columns = {**weather.columns, "dni": np.where(over, limit, weather["dni"])}
    return replace(weather, columns=columns, flags=flags, findings=(*weather.findings, note))
