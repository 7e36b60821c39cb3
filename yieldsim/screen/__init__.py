"""Whether a weather file can be believed: findings, limits and mending."""

from __future__ import annotations

import numpy as np

from yieldsim.errors import InputError, Problem
from yieldsim.screen import limits
from yieldsim.sky import sun
from yieldsim.weather import REQUIRED, Weather

YEAR_H = 8760
LEAST_H = 24  # with allow_gaps: hours with light below which a year says nothing


def screen(weather: Weather, allow_gaps: bool = False) -> Weather:
    """Return a weather fit to compute with; everything found and done is in its findings and flags.

    Parameters
    ----------
    weather : Weather, as a reader made it
    allow_gaps : bool, take less than a year

    Raises
    ------
    InputError
        If it is not fit: too few hours, values missing, light at night beyond what is slight.
    """
    course = sun.course(
        weather.time, weather.interval_s, weather.latitude_deg, weather.longitude_deg, weather.elevation_m
    )
    weather = limits.without_night_light(weather, course)
    weather = limits.without_negative_light(weather)
    weather = limits.with_limited_beam(weather, course)
    problems = [*_length_problems(weather, course.lit, allow_gaps), *_missing_problems(weather)]
    if problems:
        raise InputError(problems)
    return weather


def _length_problems(weather: Weather, lit: np.ndarray, allow_gaps: bool) -> list[Problem]:
    hours = len(weather) * weather.interval_s / 3600
    if not allow_gaps and hours < YEAR_H:
        found = f"{hours:g} hours"
        return [
            Problem(weather.source, 0, "time", found, f"{YEAR_H} hours or more, or `allow_gaps: true` in the study")
        ]
    light_h = int(np.count_nonzero((lit > 0) & (weather["ghi"] > 0))) * weather.interval_s / 3600
    if light_h < LEAST_H:
        return [Problem(weather.source, 0, "ghi", f"{light_h:g} hours with light", f"{LEAST_H} or more")]
    return []


def _missing_problems(weather: Weather) -> list[Problem]:
    problems = []
    for name in REQUIRED:
        missing = ~np.isfinite(weather[name])
        if missing.any():
            at = int(np.argmax(missing))
            found = f"no value in {int(missing.sum())} rows, first in row {weather.row[at]}"
            problems.append(Problem(weather.source, int(weather.row[at]), name, found, "a value in every row"))
    return problems
