"""Junctions in series: one current, the sum of the voltages, light handed down from junction to junction.

Written for all hours at once. At a current J each junction has the voltage V_i(J), the inverse of equations (1) and (2)
of `diode`; the stack's voltage V(J) = sum V_i(J) falls and is concave, so its power has one maximum. A junction that
gets too little light limits the current softly, by its shunt, and may be driven backwards.

Luminescent coupling: a junction at voltage V emits J0rad [exp(qV/kT) - 1] (Rau 2007), J0rad its radiative saturation
current; a share of that becomes photocurrent of the next junction down. A junction of low external radiative
efficiency has a low voltage and so emits little, without further assumptions. At ideal quality (efficiency 1) the share
is that of the recombination current in Friedman et al. (2013).

References
----------
Rau, U. (2007), Phys. Rev. B 76, 085303.
Friedman, D. J., Geisz, J. F., Steiner, M. A. (2013), IEEE J. Photovoltaics 3, 1429.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from yieldsim.device import diode as single
from yieldsim.device.diode import Diode

Array = NDArray[np.float64]

#: At most so many steps; six to eight are taken.
NEWTON_STEPS = 40
#: Rounds in which junctions with terminals of their own and coupled light settle: 1e-10 of the power.
SEPARATE_ROUNDS = 6
_SHORT_STEPS = 150  # to short circuit, where a junction without a shunt makes the curve fall sheer: halving
#: Newton stops once the limiting junction's voltage moves by less [V].
SETTLED = 1e-9


@dataclass(frozen=True, slots=True)
class Link:
    """A junction in a stack.

    Parameters
    ----------
    diode : Diode, floats or (n_time,) arrays; photocurrent from the sky alone
    emission : float or (n_time,) array [A m-2], photocurrent the next junction down gains per exp(qV/kT) - 1
    thermal_voltage : float or (n_time,) array [V], kT/q
    """

    diode: Diode
    emission: Any
    thermal_voltage: Any


@dataclass(frozen=True, slots=True)
class State:
    """A stack at one current: (n_junction, n_time) arrays.

    Parameters
    ----------
    voltage : [V], over each junction
    fall, bend : [V m2 A-1], [V m4 A-2], less the first and second derivative of that voltage by the stack's current
    slope : [A m-2 V-1], less the derivative of each junction's own current by its voltage
    """

    voltage: Array
    fall: Array
    bend: Array
    slope: Array


def state_at(links: Sequence[Link], current: Array, guess: Array | None = None) -> State:
    """Return the voltages over all junctions at a current (n_time,) [A m-2], from the top down."""
    shape = (len(links), len(current))
    voltage, fall, bend, slope = (np.empty(shape) for _ in range(4))
    gained: Any = 0.0
    gain_slope: Any = 0.0
    gain_bend: Any = 0.0
    for i, link in enumerate(links):
        diode = replace(link.diode, photocurrent=link.diode.photocurrent + gained)
        voltage[i] = single.voltage_at(diode, current, None if guess is None else guess[i])
        carried = np.where(voltage[i] == single.NO_VOLTAGE, -diode.thermal_voltage, voltage[i])
        _, slope[i], curved = single.derivatives(diode, carried)
        above_fall, above_bend = (fall[i - 1], bend[i - 1]) if i else (0.0, 0.0)
        fall[i] = (1 + gain_slope * above_fall) / slope[i]
        bend[i] = (curved * fall[i] ** 2 - gain_bend * above_fall**2 + gain_slope * above_bend) / slope[i]
        if not np.any(link.emission):
            gained = gain_slope = gain_bend = 0.0
            continue
        growth = np.expm1(np.minimum(voltage[i] / link.thermal_voltage, 500.0))
        gained = link.emission * growth
        gain_slope = link.emission * (growth + 1) / link.thermal_voltage
        gain_bend = gain_slope / link.thermal_voltage
    return State(voltage, fall, bend, slope)


def maximum_power(links: Sequence[Link]) -> tuple[Array, Array, Array]:
    """Return power [W m-2], current density [A m-2] and voltage [V] at the power point of junctions in series.

    Parameters
    ----------
    links : Links, top first, over n_time hours

    Returns
    -------
    three (n_time,) arrays; 0 where there is no light, NaN where an input is NaN

    Notes
    -----
    d(J V)/dJ = 0 reads J R = V with R = -dV/dJ. F(J) = ln(J R/V) rises with J from -inf to +inf. Newton's method on F,
    its step taken in the voltage of the junction that has the largest part of R (the one that limits), over which F is
    nearly straight, and turned into a step of J by that junction's own exponential; the bracket is halved where a step
    leaves it.
    """
    shape = np.broadcast_shapes(*(np.shape(link.diode.photocurrent) for link in links))
    total = np.zeros(shape)
    for link in links:
        total = total + link.diode.photocurrent + 0 * link.diode.saturation_current  # a NaN temperature shows
    out = np.where(total == 0, 0.0, np.full((3, *total.shape), np.nan))
    lit = np.flatnonzero(total > 0)
    if len(lit):
        out[:, lit] = _power_point([_lit(_at_hours(link, lit), total[lit]) for link in links], total[lit])
    return out[0], out[1], out[2]


def separate_power(links: Sequence[Link]) -> Array:
    """Return the greatest summed power (n_time,) [W m-2] of junctions that each have terminals of their own.

    Notes
    -----
    Without coupling each junction is at its own power point. With it the points are chosen together: a junction that
    backs off from its own lights the next one, which earns V - 2 J Rs there per current gained. In turn from the top
    down with the earnings of the round before, which hardly change: by kT/q over V a round.
    """
    shape = np.broadcast_shapes(*(np.shape(link.diode.photocurrent) for link in links))
    coupled = any(np.any(link.emission) for link in links)
    voltages: list[Any] = [None for _ in links]
    rewards: list[Any] = [0.0 for _ in links]
    power = np.zeros(shape)
    for _ in range(SEPARATE_ROUNDS if coupled else 1):
        power, gained = np.zeros(shape), np.zeros(shape)
        earned: list[Any] = []
        for i, link in enumerate(links):
            diode = replace(link.diode, photocurrent=link.diode.photocurrent + gained)
            own, current, voltages[i] = _separate_point(diode, link, voltages[i], rewards[i])
            power = power + own
            earned.append(voltages[i] - 2 * current * diode.series_resistance)
            gained = link.emission * np.expm1(voltages[i] / link.thermal_voltage)
        rewards = [*earned[1:], 0.0]
    return power


def _separate_point(diode: Diode, link: Link, start: Any, reward: Any) -> tuple[Array, Array, Array]:
    """Return power, current and voltage over a junction, 0 in the dark."""
    own, current, voltage = single.maximum_power(diode)
    inside = voltage + current * diode.series_resistance
    if start is None or not np.any(link.emission):
        return own, current, inside
    lit = diode.photocurrent > 0
    shone = replace(diode, photocurrent=np.where(lit, diode.photocurrent, 1.0))
    inside = np.where(lit, single.rewarded_point(shone, start, reward, link.emission, link.thermal_voltage), inside)
    current, voltage = single.curve(diode, inside)
    return np.where(lit, current * voltage, own), current, inside


def open_circuit(links: Sequence[Link]) -> Array:
    """Return the open-circuit voltage (n_time,) [V] of junctions in series, all in the light."""
    shape = np.broadcast_shapes(*(np.shape(link.diode.photocurrent) for link in links))
    return np.asarray(state_at(links, np.zeros(shape)).voltage.sum(axis=0))


def short_circuit(links: Sequence[Link]) -> Array:
    """Return the current (n_time,) [A m-2] at zero voltage of junctions in series, all in the light."""
    links = list(links)
    total = np.zeros(np.broadcast_shapes(*(np.shape(link.diode.photocurrent) for link in links)))
    total = sum((link.diode.photocurrent for link in links), start=total)
    links = [_lit(_at_hours(link, np.arange(len(total))), total) for link in links]
    current, low, high = _start(links), np.zeros_like(total), 2 * total
    for _ in range(_SHORT_STEPS):
        state = state_at(links, current)
        voltage = state.voltage.sum(axis=0) - current * _resistance(links)
        low, high = np.where(voltage > 0, current, low), np.where(voltage > 0, high, current)
        back = -voltage / (state.fall.sum(axis=0) + _resistance(links))
        trial, move = _newton_step(links, state, current, back)
        sheer = voltage < single.NO_VOLTAGE / 2  # no slope to follow there
        current = np.where((trial >= low) & (trial <= high) & ~sheer, trial, (low + high) / 2)
        if np.all((np.abs(move) <= SETTLED) | (high - low <= 1e-13 * high)):
            break
    return current


def joined(stacks: Sequence[Sequence[Link]]) -> list[Link]:
    """Return stacks of equally many junctions as one, their hours behind each other."""
    return [_joined_link(links) for links in zip(*stacks, strict=True)]


def _joined_link(links: tuple[Link, ...]) -> Link:
    lengths = [len(link.diode.photocurrent) for link in links]

    def together(values: list[Any]) -> Any:
        if all(np.ndim(value) == 0 and value == values[0] for value in values):
            return values[0]
        return np.concatenate([np.broadcast_to(value, n) for value, n in zip(values, lengths, strict=True)])

    diode = Diode(**{each.name: together([getattr(link.diode, each.name) for link in links]) for each in fields(Diode)})
    return Link(diode, together([link.emission for link in links]), together([link.thermal_voltage for link in links]))


def _power_point(links: list[Link], total: Array) -> Array:
    current = _start(links)
    guess = state_at(links, current).voltage
    _climb(links, current, guess, 2 * total)
    voltage = state_at(links, current, guess).voltage.sum(axis=0) - current * _resistance(links)
    return np.stack([current * voltage, current, voltage])


def _climb(links: list[Link], current: Array, guess: Array, high: Array) -> None:
    """Move currents (n_time,) [A m-2] and voltages (n_junction, n_time) [V] to the power point, in place."""
    low, hours = np.zeros_like(current), np.arange(len(current))
    now, volts = current, guess
    for _ in range(NEWTON_STEPS):
        series = _resistance(links)
        state = state_at(links, now, volts)
        voltage = state.voltage.sum(axis=0) - now * series
        voltage = np.where(voltage > 0, voltage, np.nan)  # beyond short circuit: the current is too high
        resistance = state.fall.sum(axis=0) + series
        value = np.log(now * resistance / voltage)
        below = value < 0
        low, high = np.where(below, now, low), np.where(below, high, now)
        rise = 1 / now + state.bend.sum(axis=0) / resistance + resistance / voltage
        trial, move = _newton_step(links, state, now, value / rise)
        trial = np.where((trial >= low) & (trial <= high), trial, (low + high) / 2)
        volts = state.voltage - state.fall * (trial - now)
        now = trial
        current[hours], guess[:, hours] = now, volts
        going = np.flatnonzero(~(np.abs(move) <= SETTLED))
        if not len(going):
            break
        if len(going) < len(hours) / 2:  # a few hours with odd parameters must not hold up the rest
            links = [_at_hours(link, going) for link in links]
            hours, now, volts, low, high = hours[going], now[going], volts[:, going], low[going], high[going]


def _resistance(links: list[Link]) -> Any:
    return sum(link.diode.series_resistance for link in links)


def _newton_step(links: list[Link], state: State, current: Array, back: Array) -> tuple[Array, Array]:
    """Return the next current [A m-2] and the limiting junction's move [V], to go back by so much current.

    The move of its voltage follows from the local slope; the current that goes with it from its own exponential, so
    that a move over several kT is still right.
    """
    limiting = np.argmax(state.fall, axis=0)
    trial, move = np.empty_like(current), np.empty_like(current)
    for i, link in enumerate(links):
        here = np.flatnonzero(limiting == i)
        if not len(here):
            continue
        each = _hours_of(link.diode, here)
        fall, slope = state.fall[i, here], state.slope[i, here]
        step = back[here] * fall
        u = state.voltage[i, here] / each.thermal_voltage
        growing = each.saturation_current * np.exp(u)
        grown = growing * np.expm1(np.clip(step / each.thermal_voltage, -50.0, 50.0))
        steady = (slope - growing / each.thermal_voltage) * step
        trial[here] = current[here] - (grown + steady) / (slope * fall)
        move[here] = step
    return trial, move


def _start(links: list[Link]) -> Array:
    """Return a current near the power point: the smallest of the junctions' own, left a little to the others."""
    voltages = [
        single.power_point_start(link.diode.photocurrent, link.diode.saturation_current, link.diode.thermal_voltage)
        for link in links
    ]
    whole = sum(voltages)
    currents = []
    for link, voltage in zip(links, voltages, strict=True):
        collected = link.diode.photocurrent
        by_diode = collected * link.diode.thermal_voltage / (whole + link.diode.thermal_voltage)
        by_shunt = link.diode.shunt_conductance * voltage
        currents.append(np.maximum(collected - by_diode - by_shunt, 0.4 * collected))
    return np.asarray(np.minimum.reduce(np.broadcast_arrays(*currents)))


def _lit(link: Link, total: Array) -> Link:
    """Return a link in which a junction in the dark within a lit stack keeps a trace of light."""
    return replace(link, diode=replace(link.diode, photocurrent=np.maximum(link.diode.photocurrent, 1e-12 * total)))


def _at_hours(link: Link, hours: NDArray[np.intp]) -> Link:
    return Link(
        _hours_of(link.diode, hours), _hour_values(link.emission, hours), _hour_values(link.thermal_voltage, hours)
    )


def _hours_of(diode: Diode, hours: NDArray[np.intp]) -> Diode:
    return Diode(**{field.name: _hour_values(getattr(diode, field.name), hours) for field in fields(Diode)})


def _hour_values(values: Any, hours: NDArray[np.intp]) -> Any:
    return values if np.ndim(values) == 0 else values[hours]
