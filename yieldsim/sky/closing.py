"""Closing each hour on the weather file: the column's haze and cloud solved until beam and diffuse are the measured
ones."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from yieldsim import reference, spectrum
from yieldsim.sky import column, kernel
from yieldsim.sky.atmosphere import AOD_RANGE
from yieldsim.sky.column import Air, Optics
from yieldsim.sky.kernel_layer import LANES

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

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

    def only(self, chosen: slice) -> ClosedSky:
        """Return the chosen hours."""
        hourly = ("beam", "diffuse", "aod500", "cloud_depth", "open_share", "clear")
        return replace(self, **{name: getattr(self, name)[chosen] for name in hourly})


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
    few = few_bands(constants)
    haze, clear = air.aod500, np.zeros(len(dni), dtype=bool)
    monthly, clear_days = np.full(12, np.nan), np.zeros(12, dtype=np.intp)
    if haze_hourly:
        solved, clear = _solve_haze(air, earth_sun, dni, dhi, consecutive, constants, few)
        prior, still = air.aod500, steady(solved, consecutive)
        if calendar is not None:
            day, month = calendar
            usable = clear & still & (air.cos_zenith > _LEAST_COS_ZENITH)
            monthly, clear_days = monthly_haze(solved, prior, usable, day, month)
            prior = monthly[month]
        # Thin cloud may scatter as much as thick haze would: far more haze than expected must hold still to be
        # believed.
        clear &= still | (solved <= np.maximum(EXCESS_RATIO * prior, prior + EXCESS_STEP))
        brighter = (solved < prior) & (dni > _LEAST_BEAM)  # more beam than the prior lets through
        haze = np.where(clear | brighter, solved, prior)
    beam, diffuse, cloud_depth, open_share = _split(air.with_aod500(haze), earth_sun, dni, dhi, constants, few)
    return ClosedSky(beam, diffuse, haze, cloud_depth, open_share, clear, monthly, clear_days)


@lru_cache(maxsize=4)
def chosen_bands(n_band: int) -> tuple[NDArray[np.intp], Array]:
    """Return the few bands that stand for all and their weights; all of them where the bands are other than usual."""
    wavelength, table = spectrum.band_wavelengths(), reference.table("closing_bands")
    if n_band == len(wavelength):
        return np.searchsorted(wavelength, table["wavelength_nm"]), table["weight"]
    spare = -n_band % LANES
    return np.pad(np.arange(n_band), (0, spare), mode="edge"), np.pad(np.ones(n_band), (0, spare))


def few_bands(constants: Optics) -> Optics:
    """Return the constants of the few bands that stand for all while haze and cloud are sought, weights in ``factor``.

    Sums over them are those over all bands within 0.03 % rms, 1 % at worst (`reference` table closing_bands).
    """
    chosen, weight = chosen_bands(len(constants.factor))
    few = Optics(**{name: getattr(constants, name)[chosen] for name in Optics.__slots__})
    return few.replace(factor=few.factor * weight)


def on_few_bands(air: Air) -> Air:
    """Return the air with the ground's albedo in the few bands only."""
    if air.albedo.ndim == 1:
        return air
    return replace(air, albedo=air.albedo[:, chosen_bands(air.albedo.shape[1])[0]])


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
    Halley's steps on the logarithm of the beam, which falls and is convex in the haze.
    """
    haze = np.empty(len(dni))
    wanted = np.log(np.maximum(dni, 1e-3) / earth_sun)
    hours, _ = column.kernel_hours(air, np.zeros(len(dni)))
    kernel.beam_haze(hours, column.kernel_model(constants), wanted, AOD_RANGE, haze)
    return haze


def _solve_haze(
    air: Air, earth_sun: Array, dni: Array, dhi: Array, consecutive: Mask, constants: Optics, few: Optics
) -> tuple[Array, Mask]:
    """Return the haze that each hour's beam tells of, and which hours are clear."""
    solved = np.full(len(dni), AOD_RANGE[1])
    told = dni > _LEAST_BEAM
    bare = replace(air, albedo=np.zeros_like(air.aod500))  # the beam does not see the ground
    solved[told] = beam_haze(bare.only(told), earth_sun[told], dni[told], constants)
    explained = _diffuse_explained(air.with_aod500(solved), earth_sun, dni, dhi, few)
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
    counts as `PRIOR_DAYS` days, in logarithms, since haze scatters by factors.
    """
    expected, days = np.full(12, np.nan), np.zeros(12, dtype=np.intp)
    order = np.lexsort((solved[clear], day[clear], month[clear]))
    own_month, own_day, own_haze = month[clear][order], day[clear][order], solved[clear][order]
    new_day = np.diff(own_day, prepend=-1) != 0
    first = np.flatnonzero(new_day | (np.diff(own_month, prepend=-1) != 0))
    count = np.diff(first, append=len(own_day))
    median = (own_haze[first + (count - 1) // 2] + own_haze[first + count // 2]) / 2
    for m in np.unique(month):
        expected[m] = np.exp(np.mean(np.log(prior[month == m])))
        hazes = median[(own_month[first] == m) & (count >= _DAY_HOURS)]
        days[m] = len(hazes)
        if len(hazes):
            found = np.log(np.median(hazes))
            expected[m] = np.exp((found * len(hazes) + np.log(expected[m]) * PRIOR_DAYS) / (len(hazes) + PRIOR_DAYS))
    return expected, days


def _diffuse_explained(air: Air, earth_sun: Array, dni: Array, dhi: Array, few: Optics) -> Mask:
    """Return the hours whose diffuse light is what their beam's haze scatters."""
    inside = (air.aod500 > AOD_RANGE[0]) & (air.aod500 < AOD_RANGE[1]) & (dni > _LEAST_BEAM)
    explained = np.zeros(len(dni), dtype=bool)
    if inside.any():
        chosen = on_few_bands(air).only(inside)
        passed = column.transmit(chosen, np.zeros(int(inside.sum())), few)
        top = few.extraterrestrial * few.factor
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


def _split(
    air: Air, earth_sun: Array, dni: Array, dhi: Array, constants: Optics, few: Optics
) -> tuple[Array, Array, Array, Array]:
    """Return beam, diffuse, cloud depth and share of open sun of hours whose haze is known."""
    n, n_band = len(dni), len(constants.factor)
    hours, albedo = column.kernel_hours(air, np.zeros(n))
    models = column.kernel_model(constants), column.kernel_model(few)
    light = np.stack([dni, dhi, earth_sun, air.cos_zenith], axis=1)
    found, beam, diffuse = np.zeros((n, 2)), np.zeros((n, n_band)), np.zeros((n, n_band))
    kernel.split(hours, albedo, models, chosen_bands(n_band)[0], light, _OPEN, found, beam, diffuse)
    return beam, diffuse, found[:, 1], found[:, 0]
