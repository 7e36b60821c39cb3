"""Power points of single junctions compiled: the equations and steps of `diode`, many hours at once.

Hours go through in chunks, step by step, until all of a chunk have settled; a settled hour is moved no further, so that
its figures do not depend on its neighbours. Loops are plain arithmetic on rows of scratch memory with no library call,
so that the compiler takes four hours at once: ten times as fast as hour by hour (`kernel`, which stacks need).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from yieldsim.compiled import compiled
from yieldsim.device import diode

Array = NDArray[np.float64]

_STEPS = diode.NEWTON_STEPS  # 40: written out, so that this file changes with it and numba compiles it anew
_SETTLED = 1e-5  # of the thermal voltage: the last step's square is left, and of that the square in the power
_LOG2E = 1.4426950408889634
_LN2_HIGH, _LN2_LOW = 0.6931471803691238, 1.9082149292705877e-10  # ln 2 in two parts (Cody & Waite 1980)
_ROUNDER = 6755399441055744.0  # 1.5 x 2**52: added to a number it leaves the nearest integer in the lowest bits
_HALF_ROOT = 0x3FE6A09E667F3BCD  # bits of sqrt(1/2)
_INTEGER = 4503599627370496.0  # 2**52: its lowest bits hold an integer
_MOST = 700.0  # exp of more is beyond the largest number
# Rows of scratch memory, a chunk of hours long; a constant distance, so that the compiler sees they do not overlap.
_CHUNK = 128
_JL, _J0, _A, _INVERSE_A, _TARGET, _W, _LOW, _HIGH, _VJ, _ACTIVE, _CURRENT = (_CHUNK * row for row in range(11))
_LIT, _BLANK = _CHUNK * 11, _CHUNK * 12
_N_ROW = 13

# What is compiled calls nothing compiled elsewhere: numba's cache looks at this file only.


@compiled
def _expm1(x: float) -> float:
    """Return exp(x) - 1 for |x| <= 700 to 1e-13 of its value, also near 0."""
    x = min(max(x, -_MOST), _MOST)
    shifted = x * _LOG2E + _ROUNDER
    k = shifted - _ROUNDER
    r = (x - k * _LN2_HIGH) - k * _LN2_LOW
    r2 = r * r
    r4 = r2 * r2
    low = (1 / 2 + r * (1 / 6)) + r2 * (1 / 24 + r * (1 / 120))
    high = (1 / 720 + r * (1 / 5040)) + r2 * (1 / 40320 + r * (1 / 362880))
    small = r + r2 * (low + r4 * (high + r4 * (1 / 3628800)))
    power = np.int64((np.float64(shifted).view(np.int64) + np.int64(1023)) << np.int64(52)).view(np.float64)
    return small * power + (power - 1.0)


@compiled
def _log(x: float) -> float:
    """Return ln(x) for normal x > 0: within 3e-9, and to rounding near 1, where steps end."""
    bits = np.float64(x).view(np.int64)
    # A bias keeps the difference positive for numbers below sqrt(1/2): shifts of positive numbers are fast.
    exponent = (np.uint64(bits) + np.uint64(1024 << 52) - np.uint64(_HALF_ROOT)) >> np.uint64(52)
    power = np.uint64(exponent | np.uint64(0x4330000000000000)).view(np.float64) - (_INTEGER + 1024.0)
    fraction = np.int64(bits - (np.int64(exponent) - np.int64(1024)) * np.int64(1 << 52)).view(np.float64)
    s = (fraction - 1.0) / (fraction + 1.0)
    q = s * s
    series = (1.0 + q * (1 / 3)) + (q * q) * ((1 / 5 + q * (1 / 7)) + (q * q) * (1 / 9))
    return power * _LN2_HIGH + (2.0 * s * series + power * _LN2_LOW)


@compiled
def _begin(s: Array, n: int, constants: Array) -> None:
    """Set the bracket and the first voltage: `diode._upper_bound`, `diode.power_point_start`."""
    shunt, recombination, built_in = constants[1], constants[2], constants[3]
    by_shunt = 1.0 / shunt if shunt > 0 else math.inf
    for h in range(n):
        ratio = s[_JL + h] / s[_J0 + h]
        grown = 1.0 + ratio
        s[_TARGET + h] = 1.0 + (_log(grown) + (ratio - (grown - 1.0)) / grown)
    for h in range(n):
        target = s[_TARGET + h]
        s[_W + h] = target - _log(target) * (1.0 - 1.0 / (1.0 + target))
    for _ in range(2):
        for h in range(n):
            w = s[_W + h]
            s[_W + h] = w * (1.0 + s[_TARGET + h] - _log(w)) / (1.0 + w)
    for h in range(n):
        a = s[_A + h]
        high = min(a * (s[_TARGET + h] - 1.0), s[_JL + h] * by_shunt)
        high = min(high, built_in - recombination)
        start = a * (s[_W + h] - 1.0)
        s[_LOW + h], s[_HIGH + h], s[_INVERSE_A + h] = 0.0, high, 1.0 / a
        s[_VJ + h] = start if start < 0.99 * high else high * 0.5


@compiled
def _step(s: Array, n: int, constants: Array) -> int:
    """Take one step of `diode.rewarded_point`, nothing rewarded; return how many hours have not settled."""
    resistance, shunt, recombination, built_in = constants[0], constants[1], constants[2], constants[3]
    active = 0
    for h in range(n):
        vj, jl, j0, inverse_a = s[_VJ + h], s[_JL + h], s[_J0 + h], s[_INVERSE_A + h]
        growth = _expm1(vj * inverse_a)
        diffusion = j0 * (growth + 1.0) * inverse_a
        room = 1.0 / (built_in - vj)
        lost = jl * recombination * room
        current = jl - j0 * growth - vj * shunt - lost
        slope = diffusion + shunt + lost * room
        bend = diffusion * inverse_a + 2.0 * lost * room * room
        brake, push = 1.0 + 2.0 * resistance * slope, slope * vj
        flows = current > 0
        flow = current if flows else 1.0
        inverse = 1.0 / (push * flow * brake)  # one division instead of three
        value = _log(push * push * inverse)
        rise = (bend * vj + slope) * (flow * brake) - 2.0 * resistance * bend * (push * flow) + slope * (push * brake)
        trial = vj - value / (rise * inverse)
        below = flows and value < 0
        low, high = (vj if below else s[_LOW + h]), (s[_HIGH + h] if below else vj)
        inside = flows and low <= trial and trial <= high
        trial = trial if inside else (low + high) * 0.5
        moves = s[_ACTIVE + h] > 0
        moved = abs(trial - vj) * inverse_a
        s[_LOW + h], s[_HIGH + h] = low, high
        s[_VJ + h] = trial if moves else vj
        goes_on = moves and moved > _SETTLED
        s[_ACTIVE + h] = 1.0 if goes_on else 0.0
        active += 1 if goes_on else 0
    return active


@compiled
def _exp(x: float) -> float:
    """Return exp(x) for |x| <= 700 to 1e-13 of its value: the whole power times what is left within +-ln(2)/2."""
    x = min(max(x, -_MOST), _MOST)
    shifted = x * _LOG2E + _ROUNDER
    k = shifted - _ROUNDER
    power = np.int64((np.float64(shifted).view(np.int64) + np.int64(1023)) << np.int64(52)).view(np.float64)
    return (_expm1((x - k * _LN2_HIGH) - k * _LN2_LOW) + 1.0) * power


@compiled
def _chunk(s: Array, n: int, constants: Array, power: Array) -> None:
    """Set the power of a chunk of hours from its rows of generated and saturation current and thermal voltage."""
    for h in range(n):
        lit = s[_JL + h] > 0 and s[_J0 + h] > 0 and s[_A + h] > 0
        s[_BLANK + h] = 0.0 if s[_JL + h] == 0 else math.nan
        s[_JL + h], s[_J0 + h] = (s[_JL + h] if lit else 1.0), (s[_J0 + h] if lit else 1.0)
        s[_A + h], s[_ACTIVE + h], s[_LIT + h] = (
            (s[_A + h] if lit else 1.0),
            (1.0 if lit else 0.0),
            (1.0 if lit else 0.0),
        )
    _begin(s, n, constants)
    for _ in range(_STEPS):
        if _step(s, n, constants) == 0:
            break
    for h in range(n):
        vj = s[_VJ + h]
        lost = s[_JL + h] * constants[2] / (constants[3] - vj)
        s[_CURRENT + h] = s[_JL + h] - s[_J0 + h] * _expm1(vj * s[_INVERSE_A + h]) - vj * constants[1] - lost
    for h in range(n):
        found = s[_CURRENT + h] * (s[_VJ + h] - s[_CURRENT + h] * constants[0])
        power[h] = found if s[_LIT + h] > 0 else s[_BLANK + h]


@compiled
def single_power(photocurrent: Array, saturation: Array, thermal: Array, constants: Array) -> Array:
    """Return the power of a junction in each hour; 0 in the dark, NaN where an input is NaN.

    Parameters
    ----------
    photocurrent, saturation, thermal : (n,) arrays [A m-2], [A m-2], [V]; what `diode.Diode` holds
    constants : (4,) array, series resistance [ohm m2], shunt conductance [ohm-1 m-2], recombination and built-in
        voltage [V]

    Returns
    -------
    (n,) array [W m-2]
    """
    power = np.empty(len(photocurrent))
    s = np.ones(_N_ROW * _CHUNK)
    for first in range(0, len(power), _CHUNK):
        n = min(_CHUNK, len(power) - first)
        for h in range(n):
            s[_JL + h], s[_J0 + h], s[_A + h] = photocurrent[first + h], saturation[first + h], thermal[first + h]
        _chunk(s, n, constants, power[first : first + n])
    return power


@compiled
def junction_power(
    photocurrent: Array, temperature: Array, log_saturation: Array, hot: float, per_step: float, thermal: float,
    constants: Array,
) -> Array:  # fmt: skip
    """Return the power of a junction in each hour from its table of saturation currents; else as `single_power`.

    Parameters
    ----------
    photocurrent, temperature : (n,) arrays [A m-2], [K]
    log_saturation : (n_step + 1,) array [ln(A m-2)], over evenly spaced inverse temperature
    hot, per_step : float [K-1], inverse temperature of the first entry, and from one to the next
    thermal : float [V K-1], ideality times k/q
    constants : (4,) array, as in `single_power`

    Returns
    -------
    (n,) array [W m-2]
    """
    power = np.empty(len(photocurrent))
    s = np.ones(_N_ROW * _CHUNK)
    last = len(log_saturation) - 2
    for first in range(0, len(power), _CHUNK):
        n = min(_CHUNK, len(power) - first)
        for h in range(n):
            heat = temperature[first + h]
            place = (1.0 / heat - hot) / per_step
            at = int(min(max(place, 0.0), float(last))) if place == place else 0  # NaN stays NaN in what follows
            low = log_saturation[at]
            s[_JL + h], s[_A + h] = photocurrent[first + h], thermal * heat
            s[_J0 + h] = low + (place - at) * (log_saturation[at + 1] - low)
        for h in range(n):
            s[_J0 + h] = _exp(s[_J0 + h]) if s[_A + h] == s[_A + h] else math.nan
        _chunk(s, n, constants, power[first : first + n])
    return power
