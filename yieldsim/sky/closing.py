"""Closing each hour on the weather file: the column's haze and cloud solved until beam and diffuse are the measured
ones."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky import column
from yieldsim.sky.atmosphere import AOD_RANGE
from yieldsim.sky.column import Air, Optics

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

BLOCK = 256  # hours at once: band arrays of a block stay in a core's cache
CLOUD_DEPTH_MAX = 300.0  # the thickest clouds pass about 2 %; beyond it nothing measurable changes
DIFFUSE_TOLERANCE = 0.15  # a clear hour's haze explains its diffuse light within this share (found on real files)
DIFFUSE_FLOOR = 8.0  # W m-2, on top: what pyranometers leave at low sun (common practice, no source)
NEIGHBOUR_RATIO = 1.5  # haze of neighbouring clear hours agrees within this factor ...
NEIGHBOUR_STEP = 0.05  # ... or within this optical depth, whichever is wider
STEADY_STEP = 0.03  # haze of three hours in a row differs by no more than this depth ...
STEADY_SHARE = 0.2  # ... or this share, whichever is wider, where it is to tell of a month
EXCESS_RATIO = 2.5  # haze beyond this many times the expected, and ...
EXCESS_STEP = 0.15  # ... beyond it by this depth, is taken for cloud unless it holds still
PRIOR_DAYS = 1.0  # how many clear days the climatology counts for
_DAY_HOURS = 2  # clear hours a day needs to tell of its haze
_LEAST_COS_ZENITH = 0.2  # lower suns tell more of refraction and of the horizon than of haze
_LEAST_BEAM = 1.0  # W m-2: below it a beam tells nothing about haze
_OPEN = 1e-3  # share of the hour under cloud below which there is no cloud to solve
_CLOUD_TOLERANCE = 2e-4  # of transmittance: moves no band over broadband by more than 0.01 %
_CLOUD_STEPS = 40
_HAZE_STEPS = 12


@dataclass(frozen=True, slots=True)
class ClosedSky:
    """Band spectra whose sums are the measured beam and diffuse light.

    Parameters
    ----------
    beam : (n, n_band) array [W m-2], on a plane facing the sun
    diffuse : (n, n_band) array [W m-2], on the horizontal
    aod500 : (n,) array [1], haze used
    cloud_depth : (n,) array [1], of the obscured part of the hour; 0 = none
    open_share : (n,) array [1], share of the hour with open sun
    clear : (n,) bool array, hours whose haze explains beam and diffuse light
    monthly_aod500 : (12,) array [1], haze expected of each month, from its clear days and the prior; NaN where it
    has none
    clear_days : (12,) int array, days of each month with enough clear hours
    """

    beam: Array
    diffuse: Array
    aod500: Array
    cloud_depth: Array
    open_share: Array
    clear: Mask
    monthly_aod500: Array
    clear_days: NDArray[np.intp]


def close(
    air: Air,
    earth_sun: Array,
    dni: Array,
    dhi: Array,
    consecutive: Mask,
    *,
    haze_hourly: bool = True,
    calendar: tuple[NDArray[np.intp], NDArray[np.intp]] | None = None,
    constants: Optics | None = None,
) -> ClosedSky:
    """Return band spectra that sum to the measured light.

    Parameters
    ----------
    air : Air of n lit hours in the order of time; its aod500 is the prior
    earth_sun : (n,) array [1], extraterrestrial irradiance over its yearly mean
    dni, dhi : (n,) array [W m-2], not negative, over the lit part of the hour
    consecutive : (n,) bool array, hour follows the one before it without a gap
    haze_hourly : solve the haze of clear hours, and of hours with more beam than the prior lets through
    calendar : two (n,) int arrays, number of the day and month (0-11) of each hour; where given, hours that tell
    nothing of
        their haze get that of their month's clear days instead of the prior
    constants : Optics, those with the reference folded in unless given

    Returns
    -------
    ClosedSky

    Notes
    -----
    Haze first: a monthly value is only a prior, and haze taken for cloud moves wide gaps by up to 13 %. Then the share
    of open sun f = DNI/B, and the depth of the cloud that passes what the obscured part k = (GHI - f G)/((1 - f) G)
    received. Diffuse light is f times that of the clear column plus the cloud's, scaled to the measured sum.
    """
    constants = column.optics() if constants is None else constants
    haze, clear = air.aod500, np.zeros(len(dni), dtype=bool)
    monthly, clear_days = np.full(12, np.nan), np.zeros(12, dtype=np.intp)
    if haze_hourly:
        solved, clear = _solve_haze(air, earth_sun, dni, dhi, consecutive, constants)
        prior, still = air.aod500, steady(solved, consecutive)
        if calendar is not None:
            day, month = calendar
            usable = clear & still & (air.cos_zenith > _LEAST_COS_ZENITH)
            monthly, clear_days = monthly_haze(solved, prior, usable, day, month)
            prior = monthly[month]
        # Thin cloud may scatter as much as thick haze would: far more haze than expected must hold still to be
        # believed.
        clear &= still | (solved <= np.maximum(EXCESS_RATIO * prior, prior + EXCESS_STEP))
        brighter = (dni > _beam_shape(air.with_aod500(prior), earth_sun, constants)[1]) & (dni > _LEAST_BEAM)
        haze = np.where(clear | brighter, solved, prior)
    air = air.with_aod500(haze)
    n_band = len(constants.factor)
    beam, diffuse = np.empty((len(dni), n_band)), np.empty((len(dni), n_band))
    cloud_depth, open_share = np.zeros(len(dni)), np.zeros(len(dni))
    for part in _blocks(len(dni)):
        beam[part], diffuse[part], cloud_depth[part], open_share[part] = _close_block(
            air.only(part), earth_sun[part], dni[part], dhi[part], constants
        )
    return ClosedSky(beam, diffuse, haze, cloud_depth, open_share, clear, monthly, clear_days)


def _blocks(n: int) -> Iterator[slice]:
    return (slice(start, min(start + BLOCK, n)) for start in range(0, n, BLOCK))


def beam_haze(air: Air, earth_sun: Array, dni: Array, constants: Optics) -> Array:
    """Return the haze that lets the measured beam through.

    Parameters
    ----------
    air : Air of n hours; its aod500 is where the search starts
    earth_sun : (n,) array [1]
    dni : (n,) array [W m-2]

    Returns
    -------
    (n,) array [1], kept within `AOD_RANGE`

    Notes
    -----
    Newton's steps on the logarithm of the beam, which is convex in the haze: from any start they overshoot at most
    once.
    """
    passed, slope = column.beam_transmittance(air, constants)
    passed *= constants.extraterrestrial * constants.factor * earth_sun[:, None]
    haze = air.aod500.copy()
    wanted = np.log(np.maximum(dni, 1e-3))
    for _ in range(_HAZE_STEPS):
        light = passed * np.exp(-haze[:, None] * slope)
        total = np.maximum(light.sum(axis=1), 1e-300)
        steep = np.maximum((light * slope).sum(axis=1) / total, 1e-6)
        step = (np.log(total) - wanted) / steep
        haze = np.clip(haze + step, *AOD_RANGE)
        if np.max(np.abs(step), initial=0.0) < 1e-10:
            break
    return haze


def _solve_haze(
    air: Air, earth_sun: Array, dni: Array, dhi: Array, consecutive: Mask, constants: Optics
) -> tuple[Array, Mask]:
    """Return the haze that each hour's beam tells of, and which hours are clear."""
    solved, explained = np.empty_like(dni), np.zeros(len(dni), dtype=bool)
    for part in _blocks(len(dni)):
        hours = air.only(part)
        solved[part] = beam_haze(hours, earth_sun[part], dni[part], constants)
        explained[part] = _diffuse_explained(
            hours.with_aod500(solved[part]), earth_sun[part], dni[part], dhi[part], constants
        )
    return solved, explained & _neighbours_agree(solved, explained, consecutive)


def steady(haze: Array, consecutive: Mask) -> Mask:
    """Return the hours whose haze is that of the hours right before and after: cloud does not hold so still.

    Parameters
    ----------
    haze : (n,) array [1]
    consecutive : (n,) bool array, hour follows the one before it without a gap
    """
    still = np.zeros(len(haze), dtype=bool)
    if len(haze) < 3:
        return still
    three = np.stack([haze[:-2], haze[1:-1], haze[2:]])
    least = three.min(axis=0)
    near = three.max(axis=0) - least <= np.maximum(STEADY_STEP, STEADY_SHARE * least)
    still[1:-1] = near & consecutive[1:-1] & consecutive[2:]
    return still


def monthly_haze(
    solved: Array, prior: Array, clear: Mask, day: NDArray[np.intp], month: NDArray[np.intp]
) -> tuple[Array, NDArray[np.intp]]:
    """Return the haze to expect of each month from its clear days, drawn to the prior where they are few.

    Parameters
    ----------
    solved, prior : (n,) arrays [1]
    clear : (n,) bool array, hours whose solved haze is to be believed
    day, month : (n,) int arrays, number of the day, month 0-11

    Returns
    -------
    aod500 : (12,) array [1]; NaN in a month without any hour
    clear_days : (12,) int array

    Notes
    -----
    A day's haze is the median of its clear hours, of which it needs two; a month's the median of its days. The prior
    counts
    as `PRIOR_DAYS` days, in logarithms, since haze scatters by factors.
    """
    expected, days = np.full(12, np.nan), np.zeros(12, dtype=np.intp)
    for m in np.unique(month):
        inside = month == m
        expected[m] = np.exp(np.mean(np.log(prior[inside])))
        chosen = inside & clear
        numbers, count = np.unique(day[chosen], return_counts=True)
        hazes = [np.median(solved[chosen & (day == number)]) for number in numbers[count >= _DAY_HOURS]]
        days[m] = len(hazes)
        if hazes:
            found = np.log(np.median(hazes))
            expected[m] = np.exp((found * len(hazes) + np.log(expected[m]) * PRIOR_DAYS) / (len(hazes) + PRIOR_DAYS))
    return expected, days


def _diffuse_explained(air: Air, earth_sun: Array, dni: Array, dhi: Array, constants: Optics) -> Mask:
    """Return the hours whose diffuse light is what their beam's haze scatters."""
    inside = (air.aod500 > AOD_RANGE[0]) & (air.aod500 < AOD_RANGE[1]) & (dni > _LEAST_BEAM)
    explained = np.zeros(len(dni), dtype=bool)
    if inside.any():
        chosen = air.only(inside)
        passed = column.transmit(chosen, np.zeros(int(inside.sum())), constants)
        top = constants.extraterrestrial * constants.factor
        scattered = ((passed.total - passed.beam) @ top) * earth_sun[inside] * chosen.cos_zenith
        explained[inside] = np.abs(scattered - dhi[inside]) <= DIFFUSE_TOLERANCE * dhi[inside] + DIFFUSE_FLOOR
    return explained


def _neighbours_agree(haze: Array, explained: Mask, consecutive: Mask) -> Mask:
    """Return the hours with an explained hour right before or after whose haze is alike."""
    before, after = haze[:-1], haze[1:]
    near = np.abs(after - before) <= np.maximum(NEIGHBOUR_STEP, (NEIGHBOUR_RATIO - 1) * np.minimum(before, after))
    pair = near & explained[:-1] & explained[1:] & consecutive[1:]
    agree = np.zeros(len(haze), dtype=bool)
    agree[1:] |= pair
    agree[:-1] |= pair
    return agree


def _close_block(
    air: Air, earth_sun: Array, dni: Array, dhi: Array, constants: Optics
) -> tuple[Array, Array, Array, Array]:
    """Return beam, diffuse, cloud depth and share of open sun of a block of hours."""
    top = constants.extraterrestrial * constants.factor * (earth_sun * air.cos_zenith)[:, None]
    passed = column.transmit(air, np.zeros(len(dni)), constants)
    shape, beam_clear = _beam_shape(air, earth_sun, constants)
    beam = shape * dni[:, None]
    open_share = np.minimum(1.0, np.divide(dni, beam_clear, out=np.ones_like(dni), where=beam_clear > 0))
    clear_total = top * passed.total
    clear_diffuse = top * (passed.total - passed.beam)

    hidden = 1.0 - open_share
    clouded = hidden > _OPEN
    cloud_depth = np.zeros_like(dni)
    diffuse = clear_diffuse * open_share[:, None]
    if clouded.any():
        whole = clear_total[clouded].sum(axis=1)
        received = dni[clouded] * air.cos_zenith[clouded] + dhi[clouded] - open_share[clouded] * whole
        wanted = received / (hidden[clouded] * whole)
        cloud_depth[clouded], shares = _solve_cloud(air.only(clouded), wanted, whole, top[clouded], constants)
        given = diffuse[clouded].sum(axis=1)
        rest = np.maximum(dhi[clouded] - given, 0.0)
        diffuse[clouded] += shares * (rest / shares.sum(axis=1))[:, None]
    total = diffuse.sum(axis=1)
    scale = np.divide(dhi, total, out=np.zeros_like(dhi), where=total > 0)
    return beam, diffuse * scale[:, None], cloud_depth, open_share


def _beam_shape(air: Air, earth_sun: Array, constants: Optics) -> tuple[Array, Array]:
    """Return the clear beam's share in each band (n, n_band) [1] and its sum (n,) [W m-2].

    The share is formed from logarithms: with a hazy sun on the horizon every band may lie below the smallest number.
    """
    passed, slope = column.beam_transmittance(air, constants)
    with np.errstate(divide="ignore"):  # a band that passes nothing has the logarithm of zero: its share is zero
        logarithm = np.log(passed) + np.log(constants.extraterrestrial * constants.factor)
    logarithm = logarithm - air.aod500[:, None] * slope
    highest = logarithm.max(axis=1, keepdims=True)
    share = np.exp(logarithm - highest)
    total = share.sum(axis=1)
    return share / total[:, None], total * np.exp(highest[:, 0]) * earth_sun


def _solve_cloud(air: Air, wanted: Array, clear: Array, top: Array, constants: Optics) -> tuple[Array, Array]:
    """Return the cloud depth that passes the wanted share of clear light, and the light under it.

    Parameters
    ----------
    wanted : (n,) array [1], broadband light under the cloud over that without
    clear : (n,) array [W m-2], broadband light on the ground without cloud
    top : (n, n_band) array [W m-2], light above the air

    Notes
    -----
    1/K is nearly linear in the depth; steps follow the chord between the two ends of a bracket that always holds the
    root, with the kept end's residual halved when it is kept twice (the Illinois rule), so the search cannot fail.
    """
    n = len(wanted)
    depth = np.zeros(n)
    light = top * column.transmit(air, depth, constants).total
    low, high = np.zeros(n), np.full(n, CLOUD_DEPTH_MAX)
    target = 1.0 / np.clip(wanted, 1e-3, None)
    miss_low, miss_high = 1.0 - target, np.full(n, np.nan)
    active = np.flatnonzero(wanted < 1.0 - _CLOUD_TOLERANCE)
    guess = np.minimum(9.0 * (target - 1.0), CLOUD_DEPTH_MAX)
    kept = np.zeros(n, dtype=np.int8)
    for _ in range(_CLOUD_STEPS):
        if active.size == 0:
            break
        depth[active] = guess[active]
        light[active] = top[active] * column.transmit(air.only(active), depth[active], constants).total
        miss = clear[active] / light[active].sum(axis=1) - target[active]
        above = miss > 0
        over, under = active[above], active[~above]
        high[over], miss_high[over] = depth[over], miss[above]
        low[under], miss_low[under] = depth[under], miss[~above]
        miss_low[over[kept[over] == 1]] /= 2
        miss_high[under[kept[under] == -1]] /= 2
        kept[over], kept[under] = 1, -1
        done = (np.abs(miss) < _CLOUD_TOLERANCE * target[active]) | (depth[active] >= CLOUD_DEPTH_MAX)
        active = active[~done]
        bounded = ~np.isnan(miss_high)
        chord = low - miss_low * (high - low) / np.where(bounded, miss_high - miss_low, 1.0)
        # Nothing beyond yet: 1/K - 1 grows about in proportion to the depth; go a tenth further to bracket the root.
        grown = np.maximum(target - 1.0 + miss_low, 1e-9)
        onward = np.clip(1.1 * low * (target - 1.0) / grown, low + 0.1, CLOUD_DEPTH_MAX)
        guess = np.where(bounded, chord, onward)
    return depth, light
