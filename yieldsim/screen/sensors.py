"""What one sensor or a thing in its way does to light: stuck values, a level that jumps, shade.

Three columns of light tell of each other: global = beam x cosine + diffuse. What spoils one of them alone is found and
put right by the other two. What spoils all alike shows where light is too dim for its diffuse share: cloud that takes
a third of the light makes most of the rest diffuse.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from yieldsim.screen.clear import SOLAR_CONSTANT, clear_global
from yieldsim.screen.marked import flagged, noted
from yieldsim.sky import sun
from yieldsim.weather import Flag, Weather

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

LIGHT = ("ghi", "dni", "dhi")
STUCK_H = 5.0  # daylight hours of one and the same value; real files hold four
_STUCK_ROWS = 4
_LEAST_LIGHT = 20.0  # W m-2: below it everything is alike

CLOSURE_SHARE = 0.08  # BSRN's bound for closure with the sun above 15 deg, Long & Shi (2008)
CLOSURE_FLOOR = 20.0  # W m-2
_LEAST_COSINE = 0.17  # sun 10 deg up
STEP_SHARE = 0.03  # a level that differs by this for days on end is one
_STEP_DAYS = 10
_STEP_LEFT = 0.015  # the other part of the record must close within this


def without_stuck(weather: Weather, course: sun.SunCourse) -> Weather:
    """Return the weather with values that stay the same for hours of daylight taken out: a logger that hangs.

    Parameters
    ----------
    weather : Weather on an even grid of time
    course : SunCourse of its intervals
    """
    lit = course.lit * course.cos_zenith > 0.03
    least = max(_STUCK_ROWS, int(np.ceil(STUCK_H * 3600 / weather.interval_s)))
    for name in LIGHT:
        values = weather[name]
        floor = _LEAST_LIGHT if name != "dni" else 100.0  # no beam all day is weather
        same = np.concatenate([[False], (np.diff(values) == 0) & lit[1:] & lit[:-1] & (values[1:] > floor)])
        stuck = _runs(same, least - 1)
        if stuck.any():
            columns = {**weather.columns, name: np.where(stuck, np.nan, values)}
            what = f"{name} stands still for {least} rows of daylight or more"
            weather = noted(replace(weather, columns=columns), "stuck", stuck, what, "taken out, then mended")
    return weather


def _runs(same: Mask, least: int) -> Mask:
    """Return rows that belong to runs of equal values: ``same`` says that a row equals the one before."""
    edges = np.flatnonzero(np.diff(np.concatenate([[0], same.astype(np.int8), [0]])))
    found = np.zeros(len(same), dtype=bool)
    for start, end in edges.reshape(-1, 2):
        if end - start >= least:
            found[start - 1 : end] = True
    return found


# ----------------------------------------------------------------------------------------------------- one sensor


def closed(weather: Weather, course: sun.SunCourse) -> Weather:
    """Return the weather with what one sensor gets wrong put right by the other two.

    Notes
    -----
    A level: for days on end global light is some share above or below beam and diffuse light together, while the rest
    of the record closes. Which column it is, is told by which of them must be scaled. Single rows that do not close by
    far are told of, not changed.
    """
    horizontal = course.cos_zenith * course.lit
    usable = (horizontal > _LEAST_COSINE) & np.isfinite(weather["ghi"] + weather["dni"] + weather["dhi"])
    together = weather["dni"] * horizontal + weather["dhi"]
    usable &= (together > 2 * _LEAST_LIGHT) & (weather["ghi"] > _LEAST_LIGHT)
    if usable.sum() < 100:
        return weather
    weather = _levelled(weather, course, horizontal, usable)
    together = weather["dni"] * horizontal + weather["dhi"]
    off = np.abs(weather["ghi"] - together)
    far = usable & (off > CLOSURE_FLOOR) & (off > CLOSURE_SHARE * together)
    if far.sum() > 0.01 * usable.sum():
        what = (
            f"global light is not beam and diffuse together in {100 * far.sum() / usable.sum():.1f} % of daylight rows"
        )
        weather = noted(
            weather,
            "closure",
            far,
            what,
            "kept, beam and diffuse light are used; is the place, the clock or a sensor another?",
        )
    return weather


def _levelled(weather: Weather, course: sun.SunCourse, horizontal: Array, usable: Mask) -> Weather:
    day = (weather.time + round(weather.utc_offset_h * 3600)) // 86_400
    day = day - day[0]
    ratio = _by_day(weather, horizontal, usable, day)
    stretches = _stretches(ratio)
    rest = np.isfinite(ratio)
    for start, end in stretches:
        rest[start:end] = False
    if not rest.any() or np.median(np.abs(np.log(ratio[rest]))) > _STEP_LEFT:
        return weather  # nothing to hold a level to
    for start, end in stretches:
        rows = (day >= start) & (day < end)
        weather = _scaled(weather, course, horizontal, usable & rows, rows)
    return weather


def _by_day(weather: Weather, horizontal: Array, usable: Mask, day: NDArray[np.int64]) -> Array:
    """Return each day's level of global light over the other two; of its beam alone where that tells more.

    A day whose beam is scaled shows it in its sunny hours only; the level of global less diffuse light over beam does
    not depend on how many there are. Days that close to a few watts are at one, whatever the shares say.
    """
    count = int(day[-1]) + 1
    beam = np.where(usable, weather["dni"] * horizontal, 0.0)
    sky, ghi = (np.where(usable, weather[name], 0.0) for name in ("dhi", "ghi"))
    rows = np.bincount(day, usable, count)
    with np.errstate(divide="ignore", invalid="ignore"):
        whole = np.bincount(day, ghi, count) / np.bincount(day, beam + sky, count)
        of_beam = np.bincount(day, (ghi - sky) * beam, count) / np.bincount(day, beam**2, count)
        off = np.bincount(day, np.abs(ghi - beam - sky), count) / rows
        sunny = np.bincount(day, beam, count) > _SUNNY * np.bincount(day, ghi, count)
    level = np.where(sunny & (np.abs(np.log(np.clip(of_beam, 0.1, 10))) > STEP_SHARE), of_beam, whole)
    level = np.where(off < _CLOSES, 1.0, level)
    # A day with little beam does not show the least step of it that is to be found, a tenth: no witness against it.
    unseen = ~sunny & (np.abs(np.log(np.clip(level, 0.1, 10))) < STEP_SHARE)
    level = np.where(unseen, np.nan, level)
    return np.asarray(np.where(rows > 0, np.clip(level, 0.1, 10.0), np.nan))


_SUNNY = STEP_SHARE / 0.1  # share of a day's light that is beam, from which on a tenth of it is seen in the whole
_CLOSES = 4.0  # W m-2, mean distance of a day's rows from closure that says nothing


def _stretches(ratio: Array) -> list[tuple[int, int]]:
    """Return runs of days whose ratio keeps to one side of one, the few days without light between them included."""
    level = np.log(np.where(np.isfinite(ratio), ratio, 1.0))
    side = np.where(np.abs(level) > STEP_SHARE, np.sign(level), 0).astype(int)
    known = np.isfinite(ratio)
    found: list[tuple[int, int]] = []
    for sign in (1, -1):
        days = np.flatnonzero(known & (side == sign))
        others = np.flatnonzero(known & (side != sign))
        start = 0
        while start < len(days):
            end = start
            while end + 1 < len(days):
                between = np.count_nonzero((others > days[end]) & (others < days[end + 1]))
                if between > 1:
                    break
                end += 1
            if end - start + 1 >= _STEP_DAYS:
                found.append((int(days[start]), int(days[end]) + 1))
            start = end + 1
    return sorted(found)


def _scaled(weather: Weather, course: sun.SunCourse, horizontal: Array, usable: Mask, rows: Mask) -> Weather:
    """Return the weather with the one column brought to its level, in the rows of a stretch."""
    ghi, dni, dhi = (weather[name] for name in LIGHT)
    beam, sky = (dni * horizontal)[usable], dhi[usable]
    parts, _, _, _ = np.linalg.lstsq(np.stack([beam, sky], axis=1), ghi[usable], rcond=None)
    by_beam, by_sky = float(parts[0]), float(parts[1])
    if abs(by_beam - by_sky) < 0.5 * abs(by_beam - 1) + 0.01:
        share = float(np.median(ghi[usable] / (beam + sky)))
        name, factor = ("ghi", 1 / share) if _global_is_off(weather, course, rows, share) else ("dni and dhi", share)
    elif abs(by_beam - 1) > abs(by_sky - 1):
        name, factor = "dni", by_beam
    else:
        name, factor = "dhi", by_sky
    columns = dict(weather.columns)
    for column in name.split(" and "):
        columns[column] = np.where(rows, columns[column] * factor, columns[column])
    what = (
        f"{name} {100 * abs(1 / factor - 1):.1f} % {'high' if factor < 1 else 'low'} against the other columns of light"
    )
    flags = weather.flags | flagged(rows & (ghi > 0), Flag.MENDED_LIGHT)
    done = f"multiplied by {factor:.4f}"
    return noted(replace(weather, columns=columns, flags=flags), "level", rows & (ghi > 0), what, done)


def _global_is_off(weather: Weather, course: sun.SunCourse, rows: Mask, share: float) -> bool:
    """Return whether it is the global column of a stretch that left its level: by the best days of all three.

    The best tenth of days on either side: in the column that kept its level their clearness differs less.
    """
    clear = clear_global(weather, course)
    bright = clear > 200.0
    horizontal = course.cos_zenith * course.lit
    moved = {}
    for name, values in (("ghi", weather["ghi"]), ("rest", weather["dni"] * horizontal + weather["dhi"])):
        k = values / np.maximum(clear, 1.0)
        inside, outside = (np.nanquantile(k[bright & part], 0.9) for part in (rows, ~rows))
        moved[name] = abs(np.log(inside / outside))
    return bool(moved["ghi"] >= moved["rest"] or abs(np.log(share)) < STEP_SHARE)


# ------------------------------------------------------------------------------------------------------------ shade


def unshaded(weather: Weather, course: sun.SunCourse) -> Weather:
    """Return the weather with light that something stood in the way of brought back to what its own colour of sky says.

    Notes
    -----
    Cloud that takes a share of the light makes most of the rest diffuse; shade takes it from all alike. So in each hour
    of the day the diffuse share that the level of light would have (Erbs and Driesse) is set against the one it has.
    Where the two lie apart by far more than usual on most days of a month, something is in the way, from the first to
    the last of the days; the share of light that is left is the one that brings the two together as on other days.
    """
    lit = course.cos_zenith * course.lit
    ghi = weather["ghi"]
    with np.errstate(divide="ignore", invalid="ignore"):
        share = weather["dhi"] / ghi
    usable = (lit > _SHADE_COSINE) & (ghi > 50.0) & (share < _DULL) & np.isfinite(share)
    if usable.sum() < 1000:
        return weather
    apart = np.where(usable, _expected_share(ghi, course) - share, np.nan)
    local = weather.time + weather.interval_s // 2 + round(weather.utc_offset_h * 3600)
    day, hour = local // 86_400 - local[0] // 86_400, local % 86_400 // 3600
    count = int(day[-1]) + 1
    by_hour = np.full((24, count), np.nan)
    for h in range(24):
        rows = usable & (hour == h)
        seen = np.bincount(day[rows], minlength=count)
        by_hour[h] = np.where(seen > 0, np.bincount(day[rows], apart[rows], count) / np.maximum(seen, 1), np.nan)
    shaded, left = np.zeros(len(weather), dtype=bool), np.ones(len(weather))
    for h in range(24):
        for start, end, base in _shaded_days(by_hour, h):
            mine = (hour == h) & (day >= start) & (day <= end)
            part = _share_left(ghi, course, share, usable & mine, base)
            if part < 0.95:
                shaded |= mine & (ghi > 0)
                left[mine] = part
    if not shaded.any():
        return weather
    lost = 1 - float(np.average(left[shaded], weights=np.maximum(ghi[shaded], 1.0)))
    most = SOLAR_CONSTANT * course.earth_sun
    limits = {"ghi": 1.2 * most * lit, "dni": most * course.lit, "dhi": most * lit}
    columns = dict(weather.columns)
    for name in LIGHT:
        brought = np.minimum(weather[name] / left, np.maximum(limits[name], weather[name]))
        columns[name] = np.where(shaded, brought, weather[name])
    flags = weather.flags | flagged(shaded, Flag.MENDED_LIGHT)
    what = (
        f"light {100 * lost:.0f} % too dim for its diffuse share in the same hours of many days: something in the way"
    )
    done = "brought to the level its diffuse share tells of"
    return noted(replace(weather, columns=columns, flags=flags), "shading", shaded, what, done)


_SHADE_COSINE = 0.25  # lower suns have a diffuse share of their own
_DULL = 0.9  # diffuse share above which the sky is overcast and tells nothing
_SHADE_DAYS = 30
_SHADE_SEEN = 15  # days that tell, in a window of thirty
_SHADE_APART = 0.21  # real files without shade stay below, by a third of light lost it is 0.24 and more


def _expected_share(ghi: Array, course: sun.SunCourse) -> Array:
    """Return the diffuse share of light of a level, by Erbs and Driesse, (n,) [1]."""
    from pvlib.irradiance import erbs_driesse

    zenith = np.degrees(np.arccos(np.clip(course.cos_zenith, 0.0, 1.0)))
    split = erbs_driesse(ghi / np.where(course.lit > 0, course.lit, 1.0), zenith, dni_extra=_top(course))
    with np.errstate(divide="ignore", invalid="ignore"):
        found = np.asarray(split["dhi"], dtype=np.float64) * course.lit / ghi
    return np.asarray(np.nan_to_num(found, nan=1.0, posinf=1.0))


def _top(course: sun.SunCourse) -> Array:
    return np.asarray(SOLAR_CONSTANT * course.earth_sun)


def _shaded_days(by_hour: Array, h: int) -> list[tuple[int, int, float]]:
    """Return (first day, last day, usual distance) of the stretches in which one hour of the day is shaded."""
    mine = by_hour[h]
    if np.isfinite(mine).sum() < 2 * _SHADE_SEEN:
        return []
    usual = float(np.nanmedian(mine))
    found: list[tuple[int, int, float]] = []
    left = mine.copy()
    for _ in range(3):
        window = _strongest(left, by_hour, usual)
        if window is None:
            break
        start, base, height = window
        # The stretch around it: days gain by what they lie above half of the step, lose by what they lie below.
        gain = np.nan_to_num(left - base - height / 2, nan=0.0)
        first, last = _widest(gain, start, min(start + _SHADE_DAYS, len(gain)))
        if last - first + 1 >= _SHADE_SEEN:
            found.append((first, last, base))
        left[first : last + 1] = np.nan
    return found


def _strongest(values: Array, by_hour: Array, usual: float) -> tuple[int, float, float] | None:
    """Return (start, usual distance, height above it) of the window that lies farthest above the usual."""
    best: tuple[int, float, float] | None = None
    for start in range(0, max(1, len(values) - _SHADE_DAYS + 1), 3):
        window = values[start : start + _SHADE_DAYS]
        if np.isfinite(window).sum() < _SHADE_SEEN:
            continue
        around = by_hour[:, start : start + _SHADE_DAYS]
        base = max(usual, float(np.nanmedian(around)))
        height = float(np.nanmedian(window)) - base
        if height > _SHADE_APART and (best is None or height > best[2]):
            best = start, base, height
    return best


def _widest(gain: Array, start: int, end: int) -> tuple[int, int]:
    """Return the stretch around a window that gains most."""
    forward = np.cumsum(gain[start:])
    last = start + int(np.argmax(forward))
    backward = np.cumsum(gain[:end][::-1])
    first = end - 1 - int(np.argmax(backward))
    return min(first, last), max(first, last)


def _share_left(ghi: Array, course: sun.SunCourse, share: Array, rows: Mask, base: float) -> float:
    """Return the share of light that is left: without it the diffuse share is what the level tells."""
    at = np.flatnonzero(rows)
    there = course.only(at)  # type: ignore[arg-type]
    low, high = 0.2, 1.0
    for _ in range(12):
        middle = (low + high) / 2
        apart = float(np.median(_expected_share(ghi[at] / middle, there) - share[at]))
        low, high = (middle, high) if apart < base else (low, middle)
    return (low + high) / 2
