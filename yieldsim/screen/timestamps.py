"""Where time labels really sit: found from the light itself, and the documented place kept unless it is plainly wrong.

Global light is beam times the sun's cosine plus diffuse light. With labels in the right place the three columns of most
files close on a few watts; a label, clock, longitude or hemisphere that is off leaves tens of them.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from yieldsim.screen.clear import clear_global
from yieldsim.sky import sun
from yieldsim.weather import Finding, Weather

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

LEAST_GAIN = 3.0  # W m-2, rms: another place must close better by this ...
LEAST_RATIO = 0.5  # ... and leave no more than this share of what the documented one leaves
SYMMETRIC_S = 900.0  # within which clear days' light lies about solar noon when labels are right
LABEL_STEP_S = 300
LABEL_REACH_S = 3600
ZONES_H = np.arange(-12.0, 12.5, 0.5)
_SAMPLE_DAYS = 73  # spread over the year: enough to tell five minutes on real files
_LEAST_ROWS = 100  # daylight rows with all three columns, below which nothing is decided
_LEAST_DAYS = 30  # with enough of a clear sky's light, to tell of symmetry
_LEAST_LIGHT = 20.0  # W m-2
_LEAST_BEAM = 100.0  # W m-2: without beam the sun's place does not show
_LEAST_OF_MONTH = 6  # daylight rows with beam that a month needs to tell of its own clock
_TELLING_MONTHS = 6  # that tell of their clock one way or the other


@dataclass(frozen=True, slots=True)
class Sample:
    """Rows that can tell where the sun stood.

    Parameters
    ----------
    time : (n,) int64 array [s], starts of their intervals
    month : (n,) int array, months since 1970 of local standard time
    ghi, dni, dhi : (n,) arrays [W m-2]
    """

    time: NDArray[np.int64]
    month: NDArray[np.int64]
    ghi: Array
    dni: Array
    dhi: Array


def sampled(weather: Weather) -> Sample | None:
    """Return rows with beam from days spread over the whole stretch; None where too few tell anything."""
    light = {name: weather[name] for name in ("ghi", "dni", "dhi") if name in weather}
    if len(light) < 3:
        return None
    local = weather.time + round(weather.utc_offset_h * 3600)
    day = local // 86_400
    days = np.unique(day)
    chosen = days[:: max(1, len(days) // _SAMPLE_DAYS)]
    usable = np.isin(day, chosen) & (light["ghi"] > _LEAST_LIGHT) & (light["dni"] > _LEAST_BEAM)
    usable &= np.isfinite(light["dhi"]) & (light["dhi"] >= 0)
    at = np.flatnonzero(usable)
    if at.size < _LEAST_ROWS:
        return None
    if at.size > 4000:  # minutes: every so many will do
        at = at[:: at.size // 4000 + 1]
    month = local[at].astype("datetime64[s]").astype("datetime64[M]").astype(np.int64)
    return Sample(weather.time[at], month, *(light[name][at] for name in ("ghi", "dni", "dhi")))


def residuals(sample: Sample, weather: Weather, shift_s: int, latitude: float = 1.0, longitude: float = 1.0) -> Array:
    """Return what closure leaves in each row [W m-2] with labels shifted by seconds, and signs of the place changed."""
    course = sun.course(
        sample.time + shift_s,
        weather.interval_s,
        weather.latitude_deg * latitude,
        weather.longitude_deg * longitude,
        weather.elevation_m,
    )
    return np.asarray(sample.ghi - sample.dni * course.cos_zenith * course.lit - sample.dhi)


def rms(values: Array) -> float:
    """Return the root of the mean square, the worst twentieth left out: spikes say nothing of the clock."""
    ordered = np.sort(values**2)
    return float(np.sqrt(np.mean(ordered[: max(1, int(0.95 * ordered.size))])))


def corrected(weather: Weather) -> Weather:
    """Return the weather with labels where its own light says they sit.

    Parameters
    ----------
    weather : Weather, as read

    Returns
    -------
    Weather; what was found and done is in its findings

    Notes
    -----
    Tried in turn: a part of the year on another clock (daylight saving), labels elsewhere in their interval, another
    time zone, a swapped sign of longitude or latitude. Each is taken only if it leaves half as much as the documented
    one or less, and 3 W m-2 less. Where global light is symmetric about noon as labelled and would not be as closure
    has it, the labels stand and the beam is of another moment: it is worked out anew. Files without beam or diffuse
    light are judged by symmetry alone. A study that says where labels sit is believed: then it is only said.
    """
    sample = sampled(weather)
    if sample is None:
        return _by_symmetry(weather)
    now = rms(residuals(sample, weather, 0))
    if now < LEAST_GAIN:
        return weather
    saved = _daylight_saving(weather, sample, now)
    if saved is not None:
        return saved
    shift, left = _best_shift(sample, weather, np.arange(-LABEL_REACH_S, LABEL_REACH_S + 1, LABEL_STEP_S))
    zone, left_by_zone = _best_shift(sample, weather, (ZONES_H * 3600).astype(np.int64))
    sign, left_by_sign = _best_sign(sample, weather)
    label_wins, zone_wins = _better(left, now), _better(left_by_zone, now)
    off = asymmetry_s(weather)
    if label_wins and off is not None and abs(off) < SYMMETRIC_S < abs(off + shift):
        return _beam_of_another_moment(weather, shift, now, left)
    if _better(left_by_sign, now) and left_by_sign < 0.7 * min(left, left_by_zone):
        return _told_of_sign(weather, sign, now, left_by_sign)
    if zone_wins and left_by_zone < 0.9 * left:
        # The zone first, then where in the interval labels sit.
        near = zone + np.arange(-LABEL_REACH_S // 2, LABEL_REACH_S // 2 + 1, LABEL_STEP_S)
        fine, left_fine = _best_shift(sample, weather, near)
        if left_fine < LEAST_RATIO * left_by_zone and left_by_zone - left_fine > LEAST_GAIN:
            zone, left_by_zone = fine, left_fine
        return _moved(weather, zone, now, left_by_zone, "time_zone")
    if label_wins:
        return _moved(weather, shift, now, left, "timestamps")
    return weather


def asymmetry_s(weather: Weather) -> float | None:
    """Return how much later than it should the middle of clear days' light falls [s]; None where that cannot be told.

    Notes
    -----
    The centre of global light of each day, less that of a clear sky's light at the same labels; the median of the
    clearest sixth of days. On real files with right labels it is within 5 min.
    """
    rows = np.arange(0, len(weather), max(1, 600 // weather.interval_s))
    ghi = np.maximum(np.nan_to_num(weather["ghi"][rows]), 0.0)
    part = replace(
        weather,
        time=weather.time[rows],
        columns={name: values[rows] for name, values in weather.columns.items()},
        flags=weather.flags[rows],
        row=weather.row[rows],
        interval_s=weather.interval_s,
    )
    course = sun.course(part.time, part.interval_s, part.latitude_deg, part.longitude_deg, part.elevation_m)
    clear = clear_global(part, course)
    solar = part.time + part.interval_s // 2 + round(part.longitude_deg * 240)
    day, moment = solar // 86_400 - solar[0] // 86_400, (solar % 86_400).astype(np.float64)
    count = int(day[-1]) + 1
    sums = {name: np.bincount(day, values, count) for name, values in (("ghi", ghi), ("clear", clear))}
    told = (sums["clear"] > 0.3 * sums["clear"].max()) & (sums["ghi"] > 0)
    if told.sum() < _LEAST_DAYS:
        return None
    with np.errstate(divide="ignore", invalid="ignore"):
        late = (
            np.bincount(day, ghi * moment, count) / sums["ghi"]
            - np.bincount(day, clear * moment, count) / sums["clear"]
        )
        k = np.where(told, sums["ghi"] / sums["clear"], -1.0)
    best = np.argsort(k)[-max(_LEAST_DAYS // 3, int(told.sum()) // 6) :]
    return float(np.median(late[best]))


def _by_symmetry(weather: Weather) -> Weather:
    """Return the weather with labels where the middle of its clear days says, if they are far from it."""
    off = asymmetry_s(weather)
    if off is None or abs(off) < SYMMETRIC_S:
        return weather
    shift = -LABEL_STEP_S * round(off / LABEL_STEP_S)
    minutes = shift / 60
    found = (
        f"clear days are symmetric about a moment {abs(off) / 60:.0f} min {'after' if off > 0 else 'before'} solar noon"
    )
    n, first, last = len(weather), int(weather.time[0]), int(weather.time[-1])
    done = "kept as the study says" if weather.stated else f"labels moved by {minutes:+.0f} min"
    note = Finding("timestamps", n, first, last, found, done)
    if weather.stated:
        return replace(weather, findings=(*weather.findings, note))
    label = f"{weather.label}, moved by {minutes:+.0f} min"
    return replace(weather, time=weather.time + shift, label=label, findings=(*weather.findings, note))


def _beam_of_another_moment(weather: Weather, shift_s: int, now: float, left: float) -> Weather:
    """Return the weather with its beam taken out, to be worked out from global and diffuse light."""
    found = f"{_words(now, left)} with the sun of {shift_s / 60:+.0f} min, but global light is symmetric as labelled"
    done = "labels kept; beam worked out from global and diffuse light"
    n, first, last = len(weather), int(weather.time[0]), int(weather.time[-1])
    both = np.isfinite(weather["ghi"]) & np.isfinite(weather["dhi"])
    columns = {**weather.columns, "dni": np.where(both, np.nan, weather["dni"])}
    note = Finding("beam_of_another_moment", n, first, last, found, done)
    return replace(weather, columns=columns, findings=(*weather.findings, note))


def _better(left: float, now: float) -> bool:
    return left <= LEAST_RATIO * now and now - left >= LEAST_GAIN


def _best_shift(sample: Sample, weather: Weather, shifts: NDArray[np.int64]) -> tuple[int, float]:
    """Return the shift [s] that closes best, the smallest of those that close alike, and what it leaves."""
    left = np.array([rms(residuals(sample, weather, int(shift))) for shift in shifts])
    near = np.flatnonzero(left <= left.min() * 1.02 + 0.05)
    best = near[np.argmin(np.abs(shifts[near]))]
    return int(shifts[best]), float(left[best])


def _best_sign(sample: Sample, weather: Weather) -> tuple[str, float]:
    signs = {"longitude": (1.0, -1.0), "latitude": (-1.0, 1.0), "latitude and longitude": (-1.0, -1.0)}
    left = {name: rms(residuals(sample, weather, 0, *factors)) for name, factors in signs.items()}
    best = min(left, key=left.__getitem__)
    return best, left[best]


def _words(now: float, left: float) -> str:
    return f"closure of beam and diffuse light on global leaves {now:.1f} W/m2 as labelled, {left:.1f} W/m2"


def _moved(weather: Weather, shift_s: int, now: float, left: float, kind: str) -> Weather:
    minutes = shift_s / 60
    found = f"{_words(now, left)} with labels {abs(minutes):.0f} min {'later' if shift_s > 0 else 'earlier'}"
    n, first, last = len(weather), int(weather.time[0]), int(weather.time[-1])
    if weather.stated:
        note = Finding(kind, n, first, last, found, "kept as the study says")
        return replace(weather, findings=(*weather.findings, note))
    note = Finding(kind, n, first, last, found, f"labels moved by {minutes:+.0f} min")
    label = f"{weather.label}, moved by {minutes:+.0f} min"
    return replace(weather, time=weather.time + shift_s, label=label, findings=(*weather.findings, note))


def _told_of_sign(weather: Weather, which: str, now: float, left: float) -> Weather:
    """Return the weather with the sign of its place changed: the file or the study has the wrong half of the earth."""
    found = f"{_words(now, left)} with the sign of the {which} changed"
    n, first, last = len(weather), int(weather.time[0]), int(weather.time[-1])
    note = Finding("hemisphere", n, first, last, found, f"sign of the {which} changed")
    place = {}
    if "latitude" in which:
        place["latitude_deg"] = -weather.latitude_deg
    if "longitude" in which:
        place["longitude_deg"] = -weather.longitude_deg
    return replace(weather, **place, findings=(*weather.findings, note))  # type: ignore[arg-type]


# ------------------------------------------------------------------------------------------------- daylight saving


def _daylight_saving(weather: Weather, sample: Sample, now: float) -> Weather | None:
    """Return the weather with the part of the year that is an hour late put right; None where there is none.

    A run of months in the middle of the year closes far better an hour earlier, the others as they are.
    """
    as_labelled, earlier = residuals(sample, weather, 0), residuals(sample, weather, -3600)
    months = np.unique(sample.month)
    late = np.zeros(len(months), dtype=bool)
    told = np.zeros(len(months), dtype=bool)
    for i, month in enumerate(months):
        mine = sample.month == month
        if mine.sum() < _LEAST_OF_MONTH:
            continue  # too little beam to tell
        one, two = rms(as_labelled[mine]), rms(earlier[mine])
        late[i], told[i] = _better(two, one), _better(two, one) or _better(one, two)
    if not 2 <= late.sum() <= 9 or told.sum() < _TELLING_MONTHS or not _one_run(late[told]):
        return None
    first, last = _edges(weather, sample, months[late])
    changed = (weather.time >= first) & (weather.time < last)
    time = np.where(changed, weather.time - 3600, weather.time)
    order = np.argsort(time, kind="stable")
    kept = order[np.concatenate([[True], np.diff(time[order]) > 0])]
    columns = {name: values[kept] for name, values in weather.columns.items()}
    fixed = replace(weather, time=time[kept], columns=columns, flags=weather.flags[kept], row=weather.row[kept])
    left = rms(residuals(again, fixed, 0)) if (again := sampled(fixed)) is not None else now
    if not _better(left, now):
        return None
    when = f"from {_date(first)} to {_date(last)}"
    found = f"{_words(now, left)} with an hour of daylight saving taken off {when}"
    done = "kept as the study says" if weather.stated else "those hours put an hour earlier"
    note = Finding("daylight_saving", int(changed.sum()), first, last, found, done)
    return replace(weather if weather.stated else fixed, findings=(*weather.findings, note))


def _one_run(late: Mask) -> bool:
    """Return whether the late months follow each other, around the turn of the year too."""
    return int(np.count_nonzero(late != np.roll(late, 1))) == 2


def _edges(weather: Weather, sample: Sample, late: NDArray[np.int64]) -> tuple[int, int]:
    """Return when the clock was put forward and back [s]: the day on which closure changes sides."""
    as_labelled, earlier = residuals(sample, weather, 0) ** 2, residuals(sample, weather, -3600) ** 2
    gain = as_labelled - earlier  # above 0 where an hour earlier is right
    order = np.argsort(sample.time, kind="stable")
    running = np.cumsum(gain[order])
    # The stretch with the largest sum of gains is the one on the other clock.
    low = np.minimum.accumulate(np.concatenate([[0.0], running]))[:-1]
    end = int(np.argmax(running - low))
    start = int(np.argmin(np.concatenate([[0.0], running])[: end + 1]))
    first, last = int(sample.time[order][start]), int(sample.time[order][end]) + 1
    return _gap_near(weather, first), _repeat_near(weather, last)


def _gap_near(weather: Weather, moment: int) -> int:
    """Return the start of the interval after the one missing hour nearest to a moment, else the day it falls in."""
    steps = np.diff(weather.time)
    missing = np.flatnonzero((steps > weather.interval_s) & (np.abs(weather.time[1:] - moment) < 12 * 86_400))
    if missing.size:
        return int(weather.time[missing[0] + 1])
    return moment // 86_400 * 86_400


def _repeat_near(weather: Weather, moment: int) -> int:
    for finding in weather.findings:
        if finding.kind == "duplicate" and abs(finding.first - moment) < 12 * 86_400:
            return finding.first
    return moment // 86_400 * 86_400 + 86_400


def _date(seconds: int) -> str:
    return str(np.datetime64(seconds, "s"))[:10]
