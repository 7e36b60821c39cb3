"""The compiled column over hours: transmittances, haze from the beam, cloud depth, light split onto the bands.

`column` and `closing` say what is computed and call these; the tests hold them to plain numpy.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from yieldsim.compiled import compiled, inner
from yieldsim.sky.kernel_layer import (
    AIR_MASS,
    AOD,
    CLOUD,
    DEPTH,
    EXPONENT,
    GAS,
    LANES,
    OZONE,
    PRESSURE,
    RAYLEIGH,
    SHAPE,
    SLOPE,
    STRAIGHT,
    TOTAL,
    WATER,
    Model,
    Room,
    below,
    exp,
    gas,
    on_ground,
    start,
    summed,
    top,
    top_of_few,
    workspace,
)

Array = NDArray[np.float64]

# numba keeps compiled code until the function's own file changes and does not look at the files it calls. So this file
# must change whenever kernel_layer.py does: a test compares the hash.
LAYER_SHA256 = "59fc25c804b4a3d3f78f6aa3fb0b3deaaa3af580cc425e909baf107f889b04cc"

CLOUD_DEPTH_MAX = 300.0  # the thickest clouds pass about 2 %; beyond it nothing measurable changes
CLOUD_TOLERANCE = 2e-4  # of transmittance: moves no band over broadband by more than 0.01 %
_CLOUD_STEPS = 60
_CHORD = 0.003  # of 1/K: the chord from there ends within the tolerance
_HAZE_STEPS, _HAZE_SETTLED = 12, 1e-5  # the third power of the last step is left


@inner
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
        top(s, n, model, hour, room)
        below(s, n, model, hour, hour[CLOUD], room)
        on_ground(s, n, albedo[h], hour[AIR_MASS])
        for b in range(n_band):
            beam[h, b], total[h, b] = s[STRAIGHT + b], s[TOTAL + b]


@inner
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
def beam_haze(hours: Array, model: Model, top: Array, wanted: Array, bounds: tuple[float, float], haze: Array) -> None:
    """Fill the haze with which each hour's beam has the wanted sum; Halley's steps on the logarithm of the beam.

    Parameters
    ----------
    hours, model : as in `transmit`; the AOD of the hours is where the search starts
    top : (STRIDE,) array [W m-2], light above the air at the mean distance, 0 beyond the last band
    wanted : (n,) array [ln(W m-2)], at the mean earth-sun distance
    bounds : two floats [1], of the haze
    haze : (n,) array [1] to fill
    """
    s, room = workspace()
    n, log_top = _lanes(len(top)), np.empty(len(top))
    for b in range(n):
        log_top[b] = math.log(top[b]) if top[b] > 0 else -math.inf
    for h in range(hours.shape[0]):
        aod = hours[h, AOD]
        _beam(s, n, model, log_top, hours[h], room)
        for _ in range(_HAZE_STEPS):
            for b in range(n):
                s[TOTAL + b] = exp(s[DEPTH + b] - aod * s[SLOPE + b])
            light, fall, bend = 0.0, 0.0, 0.0
            for b in range(n):
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


@inner
def _cloud_depth(
    s: Array, n: int, model: Model, light: Array, hour: Array, albedo: Array, clear: float, passed: float, room: Room
) -> float:
    """Return the depth of the cloud that passes a share of the clear light, from the top layer kept in s.

    With K the cloud's transmittance, 1/K - 1 is nearly linear in the depth: steps follow the chord through the last two
    points inside a bracket that always holds the root, halved where a step leaves it, so the search cannot fail. Over
    bright ground K may first rise above 1.
    """
    if passed >= 1.0 - CLOUD_TOLERANCE:
        return 0.0
    target, ground, into = 1.0 / max(passed, 1e-3) - 1.0, 0.0, 1.0 / hour[AIR_MASS]
    for each in albedo:
        ground += each / len(albedo)
    low, high, before, miss_before = 0.0, CLOUD_DEPTH_MAX, 0.0, -target
    # First guess: a line through skies of all kinds, 12 % off at the median.
    now = min(target / max((0.2 - 0.12 * into) - ground * (0.2 - 0.1 * into), 0.01), CLOUD_DEPTH_MAX)
    for step in range(_CLOUD_STEPS):
        below(s, n, model, hour, now, room)
        on_ground(s, n, albedo, hour[AIR_MASS])
        miss = clear / summed(s[TOTAL : TOTAL + n], n, light) - 1.0 - target
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
    return float(now)


@inner
def _scaled_to(diffuse: Array, dhi: float) -> None:
    total = 0.0
    for b in range(len(diffuse)):
        total += diffuse[b]
    scale = dhi / total if total > 0 else 0.0
    for b in range(len(diffuse)):
        diffuse[b] *= scale


@compiled
def split(
    hours: Array, albedo: Array, models: tuple[Model, Model], tops: tuple[Array, Array], chosen: NDArray[np.intp],
    light: Array, least_hidden: float, found: Array, beam: Array, diffuse: Array,
) -> None:  # fmt: skip
    """Fill beam and diffuse light of each band, their sums the measured ones, and the cloud that explains them.

    Parameters
    ----------
    hours, albedo : as in `transmit`
    models : two `Model`, of all bands and of the few that stand for them while the cloud is sought
    tops : two (STRIDE,) arrays [W m-2], light above the air at the mean distance, 0 beyond the last band; for the few
        times their weights
    chosen : (n_few,) int array, the few bands, a multiple of `LANES`
    light : (n, 4) array, dni, dhi [W m-2], extraterrestrial irradiance over its mean, cosine of the zenith
    least_hidden : float [1], hidden share of the hour from which a cloud is sought
    found : (n, 2) array of zeros to fill [1], share of open sun and depth of the cloud over the rest
    beam, diffuse : (n, n_band) arrays of zeros to fill [W m-2], on a plane facing the sun and on the horizontal
    """
    s, room = workspace()
    few, few_room = workspace()
    n_band, n_few = beam.shape[1], _lanes(len(chosen))
    n, above, few_above, known_exponent = _lanes(n_band), tops[0], tops[1], math.nan
    few_albedo = np.empty(len(chosen) if albedo.shape[1] > 1 else 1)
    for h in range(hours.shape[0]):
        dni, dhi, level = light[h, 0], light[h, 1], light[h, 2] * light[h, 3]
        hour, air_mass = hours[h], hours[h, AIR_MASS]
        if dni > 0:
            start(s, n, models[0], hour, known_exponent)
            known_exponent = hour[EXPONENT]
            top(s, n, models[0], hour, room)
            below(s, n, models[0], hour, 0.0, room)
            on_ground(s, n, albedo[h], air_mass)
            straight = summed(s[STRAIGHT : STRAIGHT + n], n, above)
            clear = summed(s[TOTAL : TOTAL + n], n, above)
            share, scale = min(1.0, dni / (straight * light[h, 2])), dni / straight
            for b in range(n_band):
                direct = s[STRAIGHT + b] * above[b]
                beam[h, b], diffuse[h, b] = direct * scale, (s[TOTAL + b] * above[b] - direct) * (level * share)
            given = (clear - straight) * level * share
            found[h, 0] = share
        else:
            share, given = 0.0, 0.0
        if dhi > 0 and 1.0 - share > least_hidden:
            for i in range(len(few_albedo)):
                few_albedo[i] = albedo[h, chosen[i]] if albedo.shape[1] > 1 else albedo[h, 0]
            if dni > 0:
                top_of_few(s, few, chosen)
            else:
                start(few, n_few, models[1], hour, math.nan)
                top(few, n_few, models[1], hour, few_room)
                below(few, n_few, models[1], hour, 0.0, few_room)
                on_ground(few, n_few, few_albedo, air_mass)
            clear = summed(few[TOTAL : TOTAL + n_few], n_few, few_above)
            passed = ((dni * light[h, 3] + dhi) / level - share * clear) / ((1.0 - share) * clear)
            cloud = _cloud_depth(few, n_few, models[1], few_above, hour, few_albedo, clear, passed, few_room)
            if dni <= 0:
                start(s, n, models[0], hour, known_exponent)
                known_exponent = hour[EXPONENT]
                top(s, n, models[0], hour, room)
            if cloud > 0 or dni <= 0:
                below(s, n, models[0], hour, cloud, room)
                on_ground(s, n, albedo[h], air_mass)
            scale = max(dhi - given, 0.0) / summed(s[TOTAL : TOTAL + n], n, above)
            for b in range(n_band):
                diffuse[h, b] += s[TOTAL + b] * above[b] * scale
            found[h, 1] = cloud
        _scaled_to(diffuse[h], dhi)
