"""The year as a whole: against a clear sky's light at the place, and against where the file says it is."""

from __future__ import annotations

import numpy as np

from yieldsim.screen.clear import clear_global
from yieldsim.screen.marked import noted
from yieldsim.sky import sun
from yieldsim.weather import Weather

MOST_OF_CLEAR = 1.05  # a year brighter than a clear one: the level is wrong, or the place
BEST_DAYS = (0.8, 1.25)  # the best tenth of days over a clear day at the place
LEAST_OF_CLEAR = 0.25
DARK_SHARE = 0.005  # light while the sun is down, above which the place or the clock is another
_TROPIC_DEG, _COLD_AT_SEA = 60.0, 45.0
#: Mean temperature by latitude: sea level, a wide band around what stations have (common practice, no source).
_WARMEST, _COLDEST, _LAPSE = 32.0, -25.0, 0.0065


def looked_at(weather: Weather, course: sun.SunCourse, dark_share: float) -> Weather:
    """Return the weather with what is odd about its year as a whole among its findings.

    Parameters
    ----------
    weather : Weather, mended
    course : SunCourse of its intervals
    dark_share : float [1], of its light that fell while the sun was down, before that was set to zero
    """
    clear = clear_global(weather, course)
    everything = np.ones(len(weather), dtype=bool)
    step_h = weather.interval_s / 3600.0
    if clear.sum() <= 0:
        return weather
    share = float(np.nansum(weather["ghi"]) / clear.sum())
    day = weather.time // 86_400
    number = day - day[0]
    by_day = np.bincount(number, np.nan_to_num(weather["ghi"])), np.bincount(number, clear)
    counted = by_day[1] * step_h > 1000.0  # days with a kilowatt-hour of clear light
    told = f"{float(np.nansum(weather['ghi'])) * step_h / 1000:.0f} kWh/m2, {100 * share:.0f} % of a clear year's"
    if share > MOST_OF_CLEAR or share < LEAST_OF_CLEAR:
        weather = noted(weather, "ceiling", everything, told, "kept; is the level or the place another?")
    elif counted.sum() > 100:
        k = np.sort(by_day[0][counted] / by_day[1][counted])
        best = float(k[-max(1, len(k) // 10) :].mean())
        if not BEST_DAYS[0] <= best <= BEST_DAYS[1]:
            what = f"its best days reach {100 * best:.0f} % of a clear day at this place"
            weather = noted(weather, "ceiling", everything, what, "kept; is the level or the place another?")
    if dark_share > DARK_SHARE:
        what = f"{100 * dark_share:.1f} % of the light fell while the sun is down at this place"
        weather = noted(weather, "other_place", everything, what, "kept; is it a file for another place or clock?")
    return _temperature(weather)


def _temperature(weather: Weather) -> Weather:
    if len(weather) * weather.interval_s < 300 * 86_400:
        return weather
    mean = float(np.nanmean(weather["temp_air"])) + _LAPSE * weather.elevation_m
    tilt = abs(weather.latitude_deg) / 90.0
    warmest, coldest = _WARMEST - 22.0 * tilt**2, 14.0 + (_COLDEST - 14.0) * min(1.0, 1.35 * tilt**1.5)
    if coldest <= mean <= warmest:
        return weather
    what = f"mean temperature {mean:.1f} degC at sea level, at {abs(weather.latitude_deg):.0f} deg of latitude"
    everything = np.ones(len(weather), dtype=bool)
    return noted(weather, "other_place", everything, what, "kept; is it a file for another place?")
