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
    GROUND,
    LANES,
    LOG_TOP,
    OZONE,
    PRESSURE,
    RAYLEIGH,
    SHAPE,
    SLOPE,
    STRAIGHT,
    STRIDE,
    TOP,
    TOTAL,
    WATER,
    Model,
    below,
    exp,
    gas,
    on_ground,
    start,
    summed,
    take,
    take_ground,
    top,
    top_of_few,
    workspace,
)

Array = NDArray[np.float64]

# numba keeps compiled code until the function's own file changes and does not look at the files it calls. So this file
# must change whenever kernel_layer.py does: a test compares the hash.
LAYER_SHA256 = "c9ed7e061437b8185b30db78df3c98eda390aa6b84055514bd2e6e379c984eec"

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
    s, curves = workspace(model), model[1]
    n_band = beam.shape[1]
    n, known_exponent = _lanes(n_band), math.nan
    for h in range(hours.shape[0]):
        take(s, hours, h)
        take_ground(s, n, albedo, h)
        start(s, n, known_exponent)
        known_exponent = s[EXPONENT]
        top(s, n, curves)
        below(s, n, curves, s[CLOUD])
        on_ground(s, n)
        for b in range(n_band):
            beam[h, b], total[h, b] = s[STRAIGHT + b], s[TOTAL + b]


@inner
def _beam(s: Array, n: int, curves: Array) -> None:
    """Set the logarithm of the hazeless beam and haze's depth along it per AOD."""
    air_mass, pressure = s[AIR_MASS], s[PRESSURE]
    start(s, n, math.nan)
    gas(s, n, curves, s[WATER] * air_mass, pressure * air_mass, 1.0)
    for b in range(n):
        air = s[RAYLEIGH + b] * (pressure * air_mass)
        s[DEPTH + b] = s[LOG_TOP + b] - (s[GAS + b] + air + s[OZONE + b])
        s[SLOPE + b] = s[SHAPE + b] * air_mass


@compiled
def beam_haze(hours: Array, model: Model, wanted: Array, bounds: tuple[float, float], haze: Array) -> None:
    """Fill the haze with which each hour's beam has the wanted sum; Halley's steps on the logarithm of the beam.

    Parameters
    ----------
    hours, model : as in `transmit`; the AOD of the hours is where the search starts
    wanted : (n,) array [ln(W m-2)], at the mean earth-sun distance
    bounds : two floats [1], of the haze
    haze : (n,) array [1] to fill
    """
    s, n = workspace(model), STRIDE
    for b in range(n):
        s[LOG_TOP + b] = math.log(s[TOP + b]) if s[TOP + b] > 0 else -math.inf
    for h in range(hours.shape[0]):
        take(s, hours, h)
        aod = s[AOD]
        _beam(s, n, model[1])
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
def _cloud_depth(s: Array, n: int, curves: Array, ground: float, clear: float, passed: float) -> float:
    """Return the depth of the cloud that passes a share of the clear light, from the top layer kept in s.

    With K the cloud's transmittance, 1/K - 1 is nearly linear in the depth: steps follow the chord through the last two
    points inside a bracket that always holds the root, halved where a step leaves it, so the search cannot fail. Over
    bright ground K may first rise above 1. The ground is its mean albedo, for the first guess.
    """
    if passed >= 1.0 - CLOUD_TOLERANCE:
        return 0.0
    target, into = 1.0 / max(passed, 1e-3) - 1.0, 1.0 / s[AIR_MASS]
    low, high, before, miss_before = 0.0, CLOUD_DEPTH_MAX, 0.0, -target
    # First guess: a line through skies of all kinds, 12 % off at the median.
    now = min(target / max((0.2 - 0.12 * into) - ground * (0.2 - 0.1 * into), 0.01), CLOUD_DEPTH_MAX)
    for step in range(_CLOUD_STEPS):
        below(s, n, curves, now)
        on_ground(s, n)
        miss = clear / summed(s, TOTAL, n) - 1.0 - target
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
def _scaled_to(diffuse: Array, h: int, dhi: float) -> None:
    total = 0.0
    for b in range(diffuse.shape[1]):
        total += diffuse[h, b]
    scale = dhi / total if total > 0 else 0.0
    for b in range(diffuse.shape[1]):
        diffuse[h, b] *= scale


@compiled
def split(
    hours: Array, albedo: Array, models: tuple[Model, Model], chosen: NDArray[np.intp], light: Array,
    least_hidden: float, found: Array, beam: Array, diffuse: Array,
) -> None:  # fmt: skip
    """Fill beam and diffuse light of each band, their sums the measured ones, and the cloud that explains them.

    Parameters
    ----------
    hours, albedo : as in `transmit`
    models : two `Model`, of all bands and of the few that stand for them while the cloud is sought, whose light above
        the air is times their weights
    chosen : (n_few,) int array, the few bands, a multiple of `LANES`
    light : (n, 4) array, dni, dhi [W m-2], extraterrestrial irradiance over its mean, cosine of the zenith
    least_hidden : float [1], hidden share of the hour from which a cloud is sought
    found : (n, 2) array of zeros to fill [1], share of open sun and depth of the cloud over the rest
    beam, diffuse : (n, n_band) arrays of zeros to fill [W m-2], on a plane facing the sun and on the horizontal
    """
    s, few = workspace(models[0]), workspace(models[1])
    curves, few_curves = models[0][1], models[1][1]
    n_band, n_few = beam.shape[1], _lanes(len(chosen))
    n, known_exponent, n_ground = _lanes(n_band), math.nan, albedo.shape[1]
    for h in range(hours.shape[0]):
        dni, dhi, level = light[h, 0], light[h, 1], light[h, 2] * light[h, 3]
        if not (dni > 0 or dhi > 0):
            continue
        take(s, hours, h)
        take_ground(s, n, albedo, h)
        start(s, n, known_exponent)
        known_exponent = s[EXPONENT]
        top(s, n, curves)
        if dni > 0:
            below(s, n, curves, 0.0)
            on_ground(s, n)
            straight, clear = summed(s, STRAIGHT, n), summed(s, TOTAL, n)
            share, scale = min(1.0, dni / (straight * light[h, 2])), dni / straight
            for b in range(n_band):
                direct = s[STRAIGHT + b] * s[TOP + b]
                beam[h, b], diffuse[h, b] = direct * scale, (s[TOTAL + b] * s[TOP + b] - direct) * (level * share)
            given = (clear - straight) * level * share
            found[h, 0] = share
        else:
            share, given = 0.0, 0.0
        if dhi > 0 and 1.0 - share > least_hidden:
            take(few, hours, h)
            ground = 0.0 if n_ground > 1 else albedo[h, 0]
            for i in range(n_few):
                few[GROUND + i] = albedo[h, min(chosen[i], n_ground - 1)]
                ground += few[GROUND + i] / n_few if n_ground > 1 else 0.0
            top_of_few(s, few, chosen)
            if dni <= 0:
                below(few, n_few, few_curves, 0.0)
                on_ground(few, n_few)
            clear = summed(few, TOTAL, n_few)
            passed = ((dni * light[h, 3] + dhi) / level - share * clear) / ((1.0 - share) * clear)
            cloud = _cloud_depth(few, n_few, few_curves, ground, clear, passed)
            if cloud > 0 or dni <= 0:
                below(s, n, curves, cloud)
                on_ground(s, n)
            scale = max(dhi - given, 0.0) / summed(s, TOTAL, n)
            for b in range(n_band):
                diffuse[h, b] += s[TOTAL + b] * s[TOP + b] * scale
            found[h, 1] = cloud
        _scaled_to(diffuse, h, dhi)
