"""What the sun and the air allow: light at night, below zero, beyond what arrives from space."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky import sun
from yieldsim.weather import Finding, Flag, Weather

Array = NDArray[np.float64]

SOLAR_CONSTANT = 1361.0  # W m-2, total solar irradiance at 1 AU, Kopp & Lean (2011), doi:10.1029/2010GL045777
LIGHT = ("ghi", "dni", "dhi")


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
