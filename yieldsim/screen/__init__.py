"""Whether a weather file can be believed: what is odd is found, mended in the open, or refused.

good = screen.screen(weather)      # mended, or InputError
screen.review(good).verdict        # usable | usable with care
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from yieldsim.errors import InputError, Problem
from yieldsim.screen import ceiling, limits, mend, sensors, timestamps
from yieldsim.screen.marked import flagged, noted
from yieldsim.sky import sun
from yieldsim.weather import REQUIRED, Flag, Weather

YEAR_H = 8760
LEAST_H = 24  # with allow_gaps: hours with light below which a year says nothing

#: Findings that are told of but cast no doubt on what is computed.
HARMLESS = frozenset(
    {"unfilled", "missing_code", "night_light", "negative", "unit", "tenfold_water", "leap_day", "from_two", "air_gap"}
)
USABLE, WITH_CARE, NOT_USABLE = "usable", "usable with care", "not usable"


@dataclass(frozen=True, slots=True)
class Review:
    """What to think of a weather file: a verdict and the reasons for it, in plain words."""

    verdict: str
    reasons: tuple[str, ...]


def review(weather: Weather) -> Review:
    """Return the verdict on a weather that `screen` let pass."""
    reasons = tuple(f"{each.found}; {each.done}" for each in weather.findings if each.kind not in HARMLESS)
    return Review(WITH_CARE if reasons else USABLE, reasons)


def screen(weather: Weather, allow_gaps: bool = False) -> Weather:
    """Return a weather fit to compute with; everything found and done is in its findings and flags.

    Parameters
    ----------
    weather : Weather, as a reader made it
    allow_gaps : bool, take less than a year, and leave out what cannot be mended

    Raises
    ------
    InputError
        If it is not fit: too few hours, values missing that cannot be mended.
    """
    weather = mend.without_missing_columns(weather)
    weather = timestamps.corrected(weather)
    weather = mend.on_a_grid(weather)
    course = _course(weather)
    dark = _dark_share(weather, course)
    weather = limits.without_night_light(weather, course)
    weather = limits.without_negative_light(weather)
    weather = limits.with_limited_beam(weather, course)
    before = _missing_light(weather, course)
    weather = limits.possible(weather, course)
    _refuse_another_place(weather, course, dark)
    weather = sensors.without_stuck(weather, course)
    taken_out = _missing_light(weather, course) & ~before
    weather = sensors.closed(weather, course)
    weather = sensors.unshaded(weather, course)
    weather = mend.mended(weather, course, taken_out)
    weather = limits.with_limited_beam(weather, course)
    if allow_gaps:
        weather, course = _without_gaps(weather, course)
    problems = [*_length_problems(weather, course.lit, allow_gaps), *_missing_problems(weather)]
    if problems:
        raise InputError(problems)
    return ceiling.looked_at(weather, course, dark)


def _course(weather: Weather) -> sun.SunCourse:
    return sun.course(
        weather.time, weather.interval_s, weather.latitude_deg, weather.longitude_deg, weather.elevation_m
    )


MOST_BEYOND = 0.01  # of daylight rows beyond what is possible, above which place or clock are another
MOST_DARK = 0.03  # of the light while the sun is down, likewise


def _refuse_another_place(weather: Weather, course: sun.SunCourse, dark: float) -> None:
    """Raise InputError for light that cannot be that of this place and clock."""
    beyond = sum(each.rows for each in weather.findings if each.kind == "beyond_possible")
    share = beyond / max(1, int(np.count_nonzero(course.lit > 0)))
    if share <= MOST_BEYOND and dark <= MOST_DARK:
        return
    place = f"{weather.latitude_deg:g} deg north, {weather.longitude_deg:g} deg east"
    found = (
        f"{100 * dark:.1f} % of the light while the sun is down, {100 * share:.1f} % of daylight rows beyond possible"
    )
    allowed = f"light of {place}, labels at the {weather.label}; is the place or the clock another? See `timestamps:`"
    raise InputError(Problem(weather.source, 0, "ghi", found, allowed))


def _dark_share(weather: Weather, course: sun.SunCourse) -> float:
    """Return the share of global light that falls while the sun is down."""
    light = np.maximum(np.nan_to_num(weather["ghi"]), 0.0)
    return float(light[course.lit == 0].sum() / light.sum()) if light.sum() > 0 else 0.0


def _missing_light(weather: Weather, course: sun.SunCourse) -> NDArray[np.bool_]:
    return np.asarray(~np.isfinite(weather["ghi"] + weather["dni"] + weather["dhi"]) & (course.lit > 0))


def _without_gaps(weather: Weather, course: sun.SunCourse) -> tuple[Weather, sun.SunCourse]:
    """Return the weather without the intervals that lack a value, and the sun of the others."""
    whole = np.all([np.isfinite(weather[name]) for name in REQUIRED], axis=0)
    if whole.all() or not whole.any():
        return weather, course
    flags = weather.flags | flagged(~whole, Flag.GAP)
    weather = noted(replace(weather, flags=flags), "left_out", ~whole, "no values that could be mended", "left out")
    columns = {name: values[whole] for name, values in weather.columns.items()}
    arrays = {name: getattr(weather, name)[whole] for name in ("time", "flags", "row")}
    return replace(weather, columns=columns, **arrays), course.only(whole)


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
            row = int(weather.row[at])
            when = str(np.datetime64(int(weather.time[at]), "s"))
            place = f"row {row}" if row else f"the interval of {when} UTC, which the file does not have"
            found = f"no value in {int(missing.sum())} rows, first in {place}; gaps too long to mend"
            allowed = "values, gaps of light up to 3 h, or `allow_gaps: true` to leave them out"
            problems.append(Problem(weather.source, row, name, found, allowed))
    return problems
