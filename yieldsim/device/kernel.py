"""Power points of stacks compiled: the equations of `diode` and `series`, hour by hour.

Same equations, same steps as the plain numpy forms, which the tests hold this to; ten times their speed, because each
hour takes only the steps it needs and nothing is written to memory in between. What is compiled is kept on disk until
this file changes; the limits of steps it takes over from `diode` and `series` are compiled in with it.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from yieldsim.compiled import compiled
from yieldsim.device import diode, series

Array = NDArray[np.float64]

_NEWTON_STEPS, _ROOT_STEPS = diode.NEWTON_STEPS, diode.ROOT_STEPS  # 40 and 60: a change there is one here, for numba
_SETTLED, _VOLTAGE_SETTLED, _NO_VOLTAGE = diode.SETTLED, diode.VOLTAGE_SETTLED, diode.NO_VOLTAGE
_SERIES_STEPS, _SERIES_SETTLED, _SEPARATE_ROUNDS = series.NEWTON_STEPS, series.SETTLED, series.SEPARATE_ROUNDS

# Columns of a junction's constants.
CONSTANTS = 4
_RS, _SHUNT, _CHI, _BUILT_IN = range(CONSTANTS)


@compiled
def _expm1(x: float) -> float:
    """Return exp(x) - 1; the library's own takes three times as long as exp and is needed near 0 only."""
    return math.exp(x) - 1 if abs(x) > 1 else math.expm1(x)


@compiled
def _log1p(x: float) -> float:
    """Return ln(1 + x), likewise."""
    return math.log(1 + x) if x > 1 else math.log1p(x)


@compiled
def _derivatives(jl: float, j0: float, a: float, constants: Array, vj: float) -> tuple[float, float, float]:
    """`diode.derivatives`."""
    growth = _expm1(vj / a)
    current = jl - j0 * growth - vj * constants[_SHUNT]
    diffusion = j0 * (growth + 1) / a
    slope, bend = diffusion + constants[_SHUNT], diffusion / a
    if constants[_CHI] > 0:
        room = constants[_BUILT_IN] - vj
        lost = jl * constants[_CHI] / room
        current, slope, bend = current - lost, slope + lost / room, bend + 2 * lost / (room * room)
    return current, slope, bend


@compiled
def _upper_bound(jl: float, j0: float, a: float, constants: Array) -> float:
    """`diode._upper_bound`."""
    bound: float = a * _log1p(jl / j0)
    if constants[_SHUNT] > 0:
        bound = min(bound, jl / constants[_SHUNT])
    if constants[_CHI] > 0:
        bound = min(bound, constants[_BUILT_IN] - constants[_CHI])
    return bound


@compiled
def _start(jl: float, j0: float, a: float) -> float:
    """`diode.power_point_start`."""
    target = 1 + _log1p(jl / j0)
    w = target - math.log(target) * (1 - 1 / (1 + target))
    for _ in range(2):
        w = w * (1 + target - math.log(w)) / (1 + w)
    return a * (w - 1)


@compiled
def _point(
    jl: float, j0: float, a: float, constants: Array, start: float, reward: float, emission: float, kt: float
) -> float:
    """`diode.rewarded_point` of one junction in the light."""
    high = _upper_bound(jl, j0, a, constants)
    low = 0.0
    vj = start if start < 0.99 * high else high / 2
    for _ in range(_NEWTON_STEPS):
        current, slope, bend = _derivatives(jl, j0, a, constants, vj)
        gain = reward * emission * math.exp(vj / kt) / kt if emission > 0 else 0.0
        push = slope * vj - gain
        brake = 1 + 2 * constants[_RS] * slope
        trial = math.nan
        below = current > 0
        if current > 0 and push > 0:
            value = math.log(push / (current * brake))
            below = value < 0
            rise = (bend * vj + slope - gain / kt) / push - 2 * constants[_RS] * bend / brake + slope / current
            trial = vj - value / rise
        if below:
            low = vj
        else:
            high = vj
        if not low <= trial <= high:
            trial = (low + high) / 2
        moved = abs(trial - vj)
        vj = trial
        if moved <= _SETTLED * a:
            break
    return vj


@compiled
def _voltage_at(jl: float, j0: float, a: float, constants: Array, current: float, guess: float) -> float:
    """`diode.voltage_at`; a NaN guess is none."""
    spare = jl - current
    if constants[_SHUNT] == 0 and spare <= -j0:
        return _NO_VOLTAGE
    high = _upper_bound(spare, j0, a, constants) if spare > 0 else 0.0
    vj = high if math.isnan(guess) else min(max(guess, -30 * a), high)
    for _ in range(_ROOT_STEPS):
        left, slope, _b = _derivatives(jl, j0, a, constants, vj)
        used = jl - left
        step = math.log(used / spare) * used / slope if spare > 0 and used > 0 else (used - spare) / slope
        vj = min(vj - step, high)
        if abs(step) <= _VOLTAGE_SETTLED:
            break
    return vj


@compiled
def _state(
    jl: Array, j0: Array, a: Array, constants: Array, emission: Array, thermal: float, current: float, state: Array
) -> None:
    """`series.state_at` of one hour; rows of state: voltage (also the guess), fall, bend, slope."""
    gained = gain_slope = gain_bend = 0.0
    for i in range(len(jl)):
        light = jl[i] + gained
        vj = _voltage_at(light, j0[i], a[i], constants[i], current, state[0, i])
        at = -a[i] if vj == _NO_VOLTAGE else vj
        _j, slope, curved = _derivatives(light, j0[i], a[i], constants[i], at)
        above_fall = state[1, i - 1] if i > 0 else 0.0
        above_bend = state[2, i - 1] if i > 0 else 0.0
        fall = (1 + gain_slope * above_fall) / slope
        state[0, i], state[1, i], state[3, i] = vj, fall, slope
        state[2, i] = (curved * fall * fall - gain_bend * above_fall * above_fall + gain_slope * above_bend) / slope
        gained = gain_slope = gain_bend = 0.0
        if emission[i] > 0:
            growth = _expm1(min(vj / thermal, 500.0))
            gained = emission[i] * growth
            gain_slope = emission[i] * (growth + 1) / thermal
            gain_bend = gain_slope / thermal


@compiled
def _first_current(jl: Array, j0: Array, a: Array, constants: Array, total: float, state: Array) -> float:
    """`series._start`; leaves no guess in state."""
    whole = 0.0
    for i in range(len(jl)):
        jl[i] = max(jl[i], 1e-12 * total)
        state[0, i] = _start(jl[i], j0[i], a[i])
        whole += state[0, i]
    current = 2 * total
    for i in range(len(jl)):
        own = jl[i] - jl[i] * a[i] / (whole + a[i]) - constants[i, _SHUNT] * state[0, i]
        current = min(current, max(own, 0.4 * jl[i]))
        state[0, i] = math.nan
    return current


@compiled
def _newton_step(state: Array, j0: Array, a: Array, back: float) -> tuple[float, float]:
    """`series._newton_step`: change of the current and move of the limiting junction."""
    limiting = 0
    for i in range(1, len(j0)):
        if state[1, i] > state[1, limiting]:
            limiting = i
    fall, slope, width = state[1, limiting], state[3, limiting], a[limiting]
    move = back * fall
    growing = j0[limiting] * math.exp(state[0, limiting] / width)
    grown = growing * _expm1(min(max(move / width, -50.0), 50.0))
    return -(grown + (slope - growing / width) * move) / (slope * fall), move


@compiled
def _resistance(constants: Array) -> float:
    total = 0.0
    for i in range(len(constants)):
        total += constants[i, _RS]
    return total


@compiled
def _sum(rows: Array, row: int) -> float:
    """Return the sum of a row; a loop compiles several times faster than an array expression."""
    total = 0.0
    for i in range(rows.shape[1]):
        total += rows[row, i]
    return total


@compiled
def _series(
    jl: Array, j0: Array, a: Array, constants: Array, emission: Array, thermal: float, total: float, state: Array
) -> float:
    """`series.maximum_power` of one hour in the light."""
    series_resistance = _resistance(constants)
    now = _first_current(jl, j0, a, constants, total, state)
    low, high = 0.0, 2 * total
    for _ in range(_SERIES_STEPS):
        _state(jl, j0, a, constants, emission, thermal, now, state)
        voltage = _sum(state, 0) - now * series_resistance
        resistance = _sum(state, 1) + series_resistance
        trial, move = math.nan, math.inf
        if voltage > 0:
            value = math.log(now * resistance / voltage)
            if value < 0:
                low = now
            else:
                high = now
            rise = 1 / now + _sum(state, 2) / resistance + resistance / voltage
            change, move = _newton_step(state, j0, a, value / rise)
            trial = now + change
        else:
            high = now
        if not low <= trial <= high:
            trial = (low + high) / 2
        for i in range(len(jl)):
            state[0, i] -= state[1, i] * (trial - now)
        now = trial
        if abs(move) <= _SERIES_SETTLED:
            break
    _state(jl, j0, a, constants, emission, thermal, now, state)
    return float(now * (_sum(state, 0) - now * series_resistance))


@compiled
def _separate(jl: Array, j0: Array, a: Array, constants: Array, emission: Array, thermal: float, state: Array) -> float:
    """`series.separate_power` of one hour; rows of state: voltage, earning per current."""
    n, coupled = len(jl), False
    for i in range(n):
        coupled = coupled or emission[i] > 0
    power = 0.0
    for turn in range(_SEPARATE_ROUNDS if coupled else 1):
        power, gained = 0.0, 0.0
        for i in range(n):
            light = jl[i] + gained
            gained = 0.0
            if not light > 0:
                state[0, i], state[1, i] = 0.0, 0.0
                continue
            plain = turn == 0 or emission[i] == 0 or i == n - 1
            start = _start(light, j0[i], a[i]) if plain else state[0, i]
            reward = 0.0 if plain else state[1, i + 1]
            vj = _point(light, j0[i], a[i], constants[i], start, reward, emission[i], thermal)
            current = _derivatives(light, j0[i], a[i], constants[i], vj)[0]
            power += current * (vj - current * constants[i, _RS])
            state[0, i], state[1, i] = vj, vj - 2 * current * constants[i, _RS]
            if emission[i] > 0:
                gained = emission[i] * _expm1(vj / thermal)
    return power


@compiled
def stack_power(
    photocurrent: Array,
    saturation: Array,
    thermal: Array,
    constants: Array,
    emission: Array,
    kt: Array,
    in_series: bool,
) -> Array:
    """Return the power of a stack in each hour; 0 in the dark, NaN where an input is NaN.

    Parameters
    ----------
    photocurrent, saturation, thermal : (n_junction, n) arrays [A m-2], [A m-2], [V]; what `diode.Diode` holds
    constants : (n_junction, 4) array, as in `points.single_power`
    emission : (n_junction, n) array [A m-2], as in `series.Link`
    kt : (n,) array [V], kT/q
    in_series : bool; else each junction is at its own power point

    Returns
    -------
    (n,) array [W m-2]
    """
    n_junction, n = photocurrent.shape
    power = np.full(n, np.nan)
    state = np.empty((4, n_junction))
    jl, j0, a, e = np.empty(n_junction), np.empty(n_junction), np.empty(n_junction), np.empty(n_junction)
    for h in range(n):
        total = 0.0
        for i in range(n_junction):
            jl[i], j0[i], a[i], e[i] = photocurrent[i, h], saturation[i, h], thermal[i, h], emission[i, h]
            total += jl[i] + 0 * j0[i]
        if total > 0:
            if in_series:
                power[h] = _series(jl, j0, a, constants, e, kt[h], total, state)
            else:
                power[h] = _separate(jl, j0, a, constants, e, kt[h], state)
        elif total == 0:
            power[h] = 0.0
    return power
