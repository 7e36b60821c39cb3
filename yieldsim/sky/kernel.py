"""The compiled column over hours: transmittances, haze from the beam, cloud depth, light split onto the bands.

`column` and `closing` say what is computed and call these; the tests hold them to plain numpy.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky.kernel_layer import (
    AIR_MASS,
    AOD,
    BAND_ROWS,
    CLOUD,
    DEPTH,
    EXPONENT,
    GAS,
    LANES,
    MIXED_NODES,
    OZONE,
    PRESSURE,
    RAYLEIGH,
    SHAPE,
    SLOPE,
    STRAIGHT,
    STRIDE,
    TOTAL,
    WATER,
    WATER_NODES,
    Model,
    Room,
    back_to_top,
    compiled,
    exp,
    gas,
    on_ground,
    start,
    summed,
    through,
    workspace,
)

__all__ = [
    "BAND_ROWS",
    "MIXED_NODES",
    "STRIDE",
    "WATER_NODES",
    "beam_haze",
    "beam_sum",
    "cloud_depth",
    "split",
    "transmit",
]

Array = NDArray[np.float64]

# numba keeps compiled code until the function's own file changes and does not look at the files it calls. So this file
# must change whenever kernel_layer.py does: a test compares the hash.
LAYER_SHA256 = "bbf00ef74f9ca49e5c98db9cd75d8e52b3e5543b80065e0504d27d43b88b0af9"

CLOUD_DEPTH_MAX = 300.0  # the thickest clouds pass about 2 %; beyond it nothing measurable changes
CLOUD_TOLERANCE = 2e-4  # of transmittance: moves no band over broadband by more than 0.01 %
_CLOUD_STEPS = 60
_CHORD = 0.003  # of 1/K: the chord from there ends within the tolerance
_HAZE_STEPS, _HAZE_SETTLED = 12, 1e-5  # the third power of the last step is left


@compiled
def _lanes(n_band: int) -> int:
    return (n_band + LANES - 1) // LANES * LANES


@compiled
def transmit(hours: Array, albedo: Array, model: Model, beam: Array, total: Array) -> None:
    """Fill the transmittances of each hour.

    Parameters
    ----------
    hours : (n, 8) array, air mass, ozone air mass, pressure ratio, water [cm], ozone [atm-cm], AOD at 500 nm, Angstrom
        exponent, cloud depth
    albedo : (n, n_band) or (n, 1) array [1]
    model : `Model`
    beam, total : (n, n_band) arrays to fill [1]
    """
    s, room = workspace()
    n_band = beam.shape[1]
    n, known_exponent = _lanes(n_band), math.nan
    for h in range(hours.shape[0]):
        hour = hours[h]
        start(s, n, model, hour, known_exponent)
        known_exponent = hour[EXPONENT]
        through(s, n, model, hour, hour[CLOUD], 0, room)
        on_ground(s, n, albedo[h], hour[AIR_MASS])
        for b in range(n_band):
            beam[h, b], total[h, b] = s[STRAIGHT + b], s[TOTAL + b]


@compiled
def _beam(s: Array, n: int, model: Model, log_top: Array, hour: Array, room: Room) -> None:
    """Set the logarithm of the hazeless beam and haze's depth along it per AOD."""
    bands, air_mass = model[0], hour[AIR_MASS]
    start(s, n, model, hour, math.nan)
    gas(s, n, model, hour[WATER] * air_mass, hour[PRESSURE] * air_mass, 1.0, room)
    for b in range(n):
        air = bands[RAYLEIGH + b] * (hour[PRESSURE] * air_mass)
        s[DEPTH + b] = log_top[b] - (s[GAS + b] + air + s[OZONE + b])
        s[SLOPE + b] = s[SHAPE + b] * air_mass


@compiled
def beam_sum(hours: Array, model: Model, top: Array, found: Array) -> None:
    """Fill the sum of each hour's clear beam (n,) [W m-2], at the mean earth-sun distance; top as in `split`."""
    s, room = workspace()
    log_top = np.log(top)
    ones = np.ones(STRIDE)
    for h in range(hours.shape[0]):
        _beam(s, STRIDE, model, log_top, hours[h], room)
        for b in range(STRIDE):
            s[TOTAL + b] = exp(s[DEPTH + b] - hours[h, AOD] * s[SLOPE + b])
        found[h] = summed(s, STRIDE, TOTAL, ones)


@compiled
def beam_haze(hours: Array, model: Model, top: Array, wanted: Array, bounds: tuple[float, float], haze: Array) -> None:
    """Fill the haze with which each hour's beam has the wanted sum; Halley's steps on the logarithm of the beam.

    Parameters
    ----------
    hours, model : as in `transmit`; the AOD of the hours is where the search starts
    top : as in `split`
    wanted : (n,) array [ln(W m-2)], at the mean earth-sun distance
    bounds : two floats [1], of the haze
    haze : (n,) array [1] to fill
    """
    s, room = workspace()
    log_top = np.log(top)
    for h in range(hours.shape[0]):
        aod = hours[h, AOD]
        _beam(s, STRIDE, model, log_top, hours[h], room)
        for _ in range(_HAZE_STEPS):
            for b in range(STRIDE):
                s[TOTAL + b] = exp(s[DEPTH + b] - aod * s[SLOPE + b])
            light, fall, bend = 0.0, 0.0, 0.0
            for b in range(STRIDE):
                light += s[TOTAL + b]
                fall += s[TOTAL + b] * s[SLOPE + b]
                bend += s[TOTAL + b] * s[SLOPE + b] * s[SLOPE + b]
            excess, fall = math.log(light) - wanted[h], max(fall / light, 1e-6)
            curvature = fall * fall - 0.5 * excess * (bend / light - fall * fall)
            step = excess * fall / max(curvature, 0.5 * fall * fall)
            moved = aod
            aod = min(max(aod + step, bounds[0]), bounds[1])
            if abs(aod - moved) < _HAZE_SETTLED:
                break
        haze[h] = aod


@compiled
def cloud_depth(
    hours: Array, albedo: Array, model: Model, n_band: int, top: Array, received: Array, open_share: Array,
    depth: Array,
) -> None:  # fmt: skip
    """Fill the cloud depth over the hidden part of each hour.

    Parameters
    ----------
    hours, albedo, model : as in `transmit`, of bands that stand for all
    n_band : int, how many
    top : as in `split`, the bands' weights in it
    received : (n,) array [W m-2], all light on the horizontal over the sine of the sun's height, at the mean distance
    open_share : (n,) array [1], below 1
    depth : (n,) array [1] to fill; 0 where no cloud is needed

    Notes
    -----
    With K the cloud's transmittance, 1/K - 1 is nearly linear in the depth: steps follow the chord through the last two
    points inside a bracket that always holds the root, halved where a step leaves it, so the search cannot fail.
    """
    s, room = workspace()
    n, known_exponent = _lanes(n_band), math.nan
    for h in range(hours.shape[0]):
        hour = hours[h]
        start(s, n, model, hour, known_exponent)
        known_exponent = hour[EXPONENT]
        through(s, n, model, hour, 0.0, 0, room)
        on_ground(s, n, albedo[h], hour[AIR_MASS])
        clear, share = summed(s, n, TOTAL, top), open_share[h]
        passed = (received[h] - share * clear) / ((1.0 - share) * clear)
        target = 1.0 / max(passed, 1e-3) - 1.0
        depth[h] = 0.0
        if passed >= 1.0 - CLOUD_TOLERANCE:
            continue
        ground = 0.0
        for b in range(albedo.shape[1]):
            ground += albedo[h, b] / albedo.shape[1]
        low, high, before, miss_before = 0.0, CLOUD_DEPTH_MAX, 0.0, -target
        # First guess: a line through skies of all kinds, 30 % off where the sun is low.
        now = target / max(0.2 - 0.12 / hour[AIR_MASS] - ground * (0.2 - 0.1 / hour[AIR_MASS]), 0.01)
        now = min(now, CLOUD_DEPTH_MAX)
        for step in range(_CLOUD_STEPS):
            back_to_top(s, n)
            through(s, n, model, hour, now, 1, room)
            on_ground(s, n, albedo[h], hour[AIR_MASS])
            miss = clear / summed(s, n, TOTAL, top) - 1.0 - target
            if miss > 0:
                high = now
            else:
                low = now
            trial = now - miss * (now - before) / (miss - miss_before) if miss != miss_before else math.nan
            trial = min(trial, CLOUD_DEPTH_MAX)
            if not low <= trial <= high:
                trial = 0.5 * (low + high)
            settled = abs(miss) <= (_CHORD if step > 0 else CLOUD_TOLERANCE) * (1.0 + target)
            at_end = now >= CLOUD_DEPTH_MAX and miss <= 0
            before, miss_before, now = now, miss, trial
            if settled or at_end:
                break
        depth[h] = now


@compiled
def _sunny(s: Array, n: int, top: Array, dni: float, share: float, beam: Array, diffuse: Array) -> float:
    """Set the light of the open part of an hour from the clear column in s; return its diffuse sum."""
    direct_sum = summed(s, n, STRAIGHT, top)
    scale = dni / direct_sum
    for b in range(len(beam)):
        direct = s[STRAIGHT + b] * top[b]
        beam[b], diffuse[b] = direct * scale, (s[TOTAL + b] * top[b] - direct) * share
    return float((summed(s, n, TOTAL, top) - direct_sum) * share)


@compiled
def _scaled_to(diffuse: Array, dhi: float) -> None:
    total = 0.0
    for b in range(len(diffuse)):
        total += diffuse[b]
    scale = dhi / total if total > 0 else 0.0
    for b in range(len(diffuse)):
        diffuse[b] *= scale


@compiled
def split(
    hours: Array, albedo: Array, model: Model, top: Array, level: Array, dni: Array, dhi: Array, open_share: Array,
    depth: Array, beam: Array, diffuse: Array,
) -> None:  # fmt: skip
    """Fill beam and diffuse light of each band, their sums the measured ones.

    Parameters
    ----------
    hours, albedo, model : as in `transmit`
    top : (STRIDE,) array [W m-2], light above the air, 0 beyond the last band
    level : (n,) array [1], what turns transmittance times top into light on the horizontal
    dni, dhi : (n,) array [W m-2]
    open_share : (n,) array [1]
    depth : (n,) array [1], of the cloud over the rest; NaN = none
    beam, diffuse : (n, n_band) arrays of zeros to fill [W m-2], on a plane facing the sun and on the horizontal
    """
    s, room = workspace()
    n, known_exponent = _lanes(beam.shape[1]), math.nan
    for h in range(hours.shape[0]):
        if not (dni[h] > 0 or dhi[h] > 0):
            continue
        hour = hours[h]
        start(s, n, model, hour, known_exponent)
        known_exponent = hour[EXPONENT]
        given, first, cloud = 0.0, 0, depth[h]
        if dni[h] > 0 or not cloud > 0:
            through(s, n, model, hour, 0.0, 0, room)
            on_ground(s, n, albedo[h], hour[AIR_MASS])
            given = _sunny(s, n, top, dni[h], level[h] * open_share[h], beam[h], diffuse[h])
            first = 1
        if cloud > 0:
            if first == 1:
                back_to_top(s, n)
            through(s, n, model, hour, cloud, first, room)
            on_ground(s, n, albedo[h], hour[AIR_MASS])
        if not math.isnan(cloud):
            scale = max(dhi[h] - given, 0.0) / summed(s, n, TOTAL, top)
            for b in range(beam.shape[1]):
                diffuse[h, b] += s[TOTAL + b] * top[b] * scale
        _scaled_to(diffuse[h], dhi[h])
