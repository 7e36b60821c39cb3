"""The current-voltage curve of one junction and its power point, on plain arrays.

One diode with series and shunt resistance, and the recombination of photo-generated carriers in the i-layer of
p-i-n cells (Merten et al. 1998), which is zero for all others. With Vj the voltage over the junction,

    J = JL [1 - chi/(Vbi - Vj)] - J0 [exp(Vj/a) - 1] - Vj/Rsh        (1)
    V = Vj - J Rs                                                    (2)

so current and voltage are explicit in Vj, and J(Vj) falls and is concave: every curve point and the power point are
found from Vj without solving an implicit equation.

References
----------
Merten, J., Asensi, J. M., Voz, C., Shah, A. V., Platz, R., Andreu, J. (1998), IEEE Trans. Electron Devices 45, 423.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: At most so many steps: a dozen bring nearly every curve to 1e-10 of its power, the others are those that the built-in
#: voltage of an i-layer cuts off sharply (tests/device/test_diode.py).
NEWTON_STEPS = 40
ROOT_STEPS = 60
NO_VOLTAGE = -1e3
#: A voltage is found once Newton's step is below this [V]; its square over kT/q is what is left.
VOLTAGE_SETTLED = 1e-8
#: Newton stops once all voltages moved by less than this share of the thermal voltage; squared, that is rounding.
SETTLED = 1e-7


@dataclass(frozen=True, slots=True)
class Diode:
    """The parameters of equations (1) and (2); floats or arrays that broadcast with each other.

    Parameters
    ----------
    photocurrent : [A m-2], JL; the current generated
    saturation_current : [A m-2], J0
    thermal_voltage : [V], a = n k T/q
    series_resistance : [ohm m2], Rs
    shunt_conductance : [ohm-1 m-2], 1/Rsh
    recombination_voltage : [V], chi = d^2/(mu tau) of an i-layer; 0 = none
    built_in_voltage : [V], Vbi
    """

    photocurrent: Any
    saturation_current: Any
    thermal_voltage: Any
    series_resistance: Any = 0.0
    shunt_conductance: Any = 0.0
    recombination_voltage: Any = 0.0
    built_in_voltage: Any = np.inf


def curve(diode: Diode, junction_voltage: Any) -> tuple[Any, Any]:
    """Return current density [A m-2] and terminal voltage [V] at a junction voltage [V], equations (1) and (2)."""
    current = derivatives(diode, junction_voltage)[0]
    return current, junction_voltage - current * diode.series_resistance


def derivatives(diode: Diode, vj: Any) -> tuple[Any, Any, Any]:
    """Return J [A m-2], -dJ/dVj [A m-2 V-1] and -d2J/dVj2 [A m-2 V-2] of equation (1); the last two are positive."""
    growth = np.expm1(vj / diode.thermal_voltage)
    current = diode.photocurrent - diode.saturation_current * growth - vj * diode.shunt_conductance
    diffusion = diode.saturation_current * (growth + 1) / diode.thermal_voltage
    slope, bend = diffusion + diode.shunt_conductance, diffusion / diode.thermal_voltage
    if np.any(np.asarray(diode.recombination_voltage) > 0):
        room = diode.built_in_voltage - vj
        lost = diode.photocurrent * diode.recombination_voltage / room
        current, slope, bend = current - lost, slope + lost / room, bend + 2 * lost / (room * room)
    return current, slope, bend


def _upper_bound(diode: Diode) -> Any:
    """Return a voltage [V] over the junction at which no current is left: each loss alone would take all of it."""
    by_diode = diode.thermal_voltage * np.log1p(np.asarray(diode.photocurrent) / diode.saturation_current)
    with np.errstate(divide="ignore", invalid="ignore"):
        by_shunt = np.divide(diode.photocurrent, diode.shunt_conductance)  # inf without a shunt
    return np.minimum(np.minimum(by_diode, by_shunt), diode.built_in_voltage - diode.recombination_voltage)


def power_point_start(photocurrent: Any, saturation_current: Any, thermal_voltage: Any) -> Any:
    """Return the junction voltage [V] at the power point of a diode without resistances.

    Notes
    -----
    (1 + u) exp(u) = 1 + JL/J0 with u = V/a, so u = W(e (1 + JL/J0)) - 1, Lambert's W from w + ln w = 1 + ln(1 + JL/J0)
    by two Newton steps from the first terms of its series; 1e-6 or better for JL/J0 from 0 to 1e60.
    """
    target = 1 + np.log1p(photocurrent / saturation_current)
    w = target - np.log(target) * (1 - 1 / (1 + target))
    for _ in range(2):
        w = w * (1 + target - np.log(w)) / (1 + w)
    return thermal_voltage * (w - 1)


def maximum_power(diode: Diode) -> tuple[Any, Any, Any]:
    """Return power [W m-2], current density [A m-2] and terminal voltage [V] at the power point.

    Parameters
    ----------
    diode : Diode, arrays of any shapes that broadcast

    Returns
    -------
    three (...) arrays; 0 where there is no photocurrent, NaN where an input is NaN

    Notes
    -----
    d(J V)/dVj = 0 reads s Vj = J (1 + 2 Rs s) with s = -dJ/dVj. Its logarithm F(Vj) = ln[s Vj / (J (1 + 2 Rs s))]
    rises from -inf at Vj = 0 to +inf at open circuit, for any parameters, so there is one root; far from both ends F
    is nearly Vj/a, so Newton's method on F converges from the closed form of the diode without resistances in few
    steps; a step that leaves the bracket is replaced by halving it.
    """
    with np.errstate(invalid="ignore"):
        lit = np.asarray(diode.photocurrent) > 0
        dark = np.asarray(diode.photocurrent) == 0
    jl = np.where(lit, diode.photocurrent, 1.0)
    diode = Diode(
        jl,
        diode.saturation_current,
        diode.thermal_voltage,
        diode.series_resistance,
        diode.shunt_conductance,
        diode.recombination_voltage,
        diode.built_in_voltage,
    )
    vj = _root(diode)
    current, voltage = curve(diode, vj)
    blank = np.where(dark, 0.0, np.nan)
    current = np.where(lit, current, blank)
    voltage = np.where(lit, voltage, blank)
    return (current * voltage)[()], current[()], voltage[()]


def _root(diode: Diode) -> Array:
    start = power_point_start(diode.photocurrent, diode.saturation_current, diode.thermal_voltage)
    return rewarded_point(diode, start, 0.0, 0.0, 1.0)


def rewarded_point(diode: Diode, start: Any, reward: Any, emission: Any, kt: Any) -> Array:
    """Return the junction voltage at which power plus what the emitted light earns elsewhere is greatest.

    Parameters
    ----------
    diode : Diode, in the light
    start : (...) array [V], a voltage near by
    reward : (...) array [V], power earned per current that emitted light makes elsewhere
    emission : (...) array [A m-2], that current per exp(Vj/kt) - 1; 0 = the plain power point
    kt : (...) array [V], kT/q

    Returns
    -------
    (...) array [V]

    Notes
    -----
    s Vj - reward dE/dVj = J (1 + 2 Rs s), solved as in `maximum_power`; as long as reward dE/dVj outweighs s Vj the
    voltage is too low.
    """
    high = _upper_bound(diode)
    low = np.zeros_like(high)
    vj = np.where(start < 0.99 * high, start, high / 2)
    earns = bool(np.any(np.asarray(emission) > 0))
    rs = diode.series_resistance
    for _ in range(NEWTON_STEPS):
        current, slope, bend = derivatives(diode, vj)
        brake = 1 + 2 * rs * slope
        flow = np.where(current > 0, current, np.nan)
        gain = reward * emission * np.exp(vj / kt) / kt if earns else 0.0
        push = slope * vj - gain
        pushed = np.where(push > 0, push, np.nan)
        value = np.log(pushed / (flow * brake))
        below = (value < 0) | ((current > 0) & ~(push > 0))
        low, high = np.where(below, vj, low), np.where(below, high, vj)
        rise = (bend * vj + slope - gain / kt) / pushed - 2 * rs * bend / brake + slope / flow
        trial = vj - value / rise
        trial = np.where((trial >= low) & (trial <= high), trial, (low + high) / 2)  # also where no current was left
        moved = np.abs(trial - vj)
        vj = trial
        if not np.any(moved > SETTLED * diode.thermal_voltage):
            break
    return np.asarray(vj)


def open_circuit(diode: Diode) -> Any:
    """Return the open-circuit voltage [V]; 0 without photocurrent, NaN where an input is NaN.

    Notes
    -----
    Newton's method on J(Vj) = 0 from an upper bound: J falls and is concave, so it converges from above without
    overshoot; steps that leave the bracket halve it.
    """
    high = _bound_or_dark(diode)
    return _falling_root(diode, high, to_current=True)[()]


def short_circuit(diode: Diode) -> Any:
    """Return the current density [A m-2] at zero terminal voltage; 0 without photocurrent, NaN where one is NaN."""
    return derivatives(diode, _falling_root(diode, _bound_or_dark(diode), to_current=False))[0][()]


def _bound_or_dark(diode: Diode) -> Array:
    bound = _upper_bound(diode)
    return np.where(np.asarray(diode.photocurrent) == 0, 0.0, bound)


def voltage_at(diode: Diode, current: Any, guess: Any = None) -> Any:
    """Return the voltage [V] over the junction at which it carries a current, the inverse of equation (1).

    Parameters
    ----------
    diode : Diode
    current : (...) array [A m-2]
    guess : (...) array [V], a voltage near by, or None

    Returns
    -------
    (...) array [V]; `NO_VOLTAGE` for a current that a junction without a shunt cannot carry backwards

    Notes
    -----
    The losses L(Vj) = JL - J(Vj) are to equal X = JL - J. L is convex and rises: for X <= 0 (driven backwards) Newton's
    method from Vj = 0 falls onto the root; for X > 0 ln L(Vj) = ln X is solved, nearly straight where the diode rules,
    from a voltage at which one loss alone would take all of X.
    """
    spare = np.asarray(diode.photocurrent - current)
    impossible = (np.asarray(diode.shunt_conductance) == 0) & (spare <= -diode.saturation_current)
    spare = np.where(impossible, 0.0, spare)
    forward = spare > 0
    room = np.where(forward, spare, 1.0)
    high = np.where(forward, _upper_bound(replace(diode, photocurrent=room)), 0.0)
    vj = high if guess is None else np.minimum(np.maximum(guess, -30 * diode.thermal_voltage), high)
    for _ in range(ROOT_STEPS):
        left, slope, _ = derivatives(diode, vj)
        used = diode.photocurrent - left
        by_logarithm = forward & (used > 0)
        ratio = np.where(by_logarithm, used / room, 1.0)
        step = np.where(by_logarithm, np.log(ratio) * used, used - spare) / slope
        vj = np.minimum(vj - step, high)
        if not np.any(np.abs(step) > VOLTAGE_SETTLED):
            break
    return np.where(impossible, NO_VOLTAGE, vj)[()]


def _falling_root(diode: Diode, high: Array, *, to_current: bool) -> Array:
    """Return Vj [V] at which J = 0 (open circuit) or V = 0 (short circuit); both fall with Vj and are concave."""
    low, vj = np.zeros_like(high), high
    rs = diode.series_resistance
    for _ in range(ROOT_STEPS):
        current, slope, _ = derivatives(diode, vj)
        value = current if to_current else current * rs - vj
        fall = slope if to_current else 1 + slope * rs
        low, high = np.where(value < 0, low, vj), np.where(value < 0, vj, high)
        trial = vj + value / fall
        vj = np.where((trial >= low) & (trial <= high), trial, (low + high) / 2)
    return np.asarray(vj)
