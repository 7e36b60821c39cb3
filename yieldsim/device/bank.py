"""All junctions of a study at once: currents and powers for every hour without a loop over hours or bands."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.polynomial import chebyshev
from numpy.typing import NDArray

from yieldsim.constants import STANDARD_CELL_TEMPERATURE, STANDARD_IRRADIANCE, THERMAL_EV_PER_K
from yieldsim.device import kernel, points, series
from yieldsim.device.fold import folded
from yieldsim.device.junction import (
    Junction,
    constants,
    diode_at,
    external_radiative_efficiency_at,
    generated,
    reference_photocurrent,
    response_at,
    saturation_current,
)
from yieldsim.device.stack import Absorber, responses_at
from yieldsim.spectrum import reference_bands

Array = NDArray[np.float64]

#: Cell temperatures [K] at which responses are folded; between them currents are interpolated linearly.
FOLD_TEMPERATURES = STANDARD_CELL_TEMPERATURE + 20.0 * np.arange(-4, 5)
#: Inverse temperatures [K-1] at which saturation currents are tabulated, evenly spaced, -55 to 125 degC.
_INVERSE_HOT, _INVERSE_COLD, _INVERSE_STEPS = 1 / 398.15, 1 / 218.15, 256
#: Temperatures [K] at which saturation currents are tabulated, the hottest first.
TABLE_TEMPERATURES = 1 / np.linspace(_INVERSE_HOT, _INVERSE_COLD, _INVERSE_STEPS + 1)
_BLOCK = 2048  # hours at once: intermediate arrays stay in the processor's cache


@dataclass(frozen=True, slots=True, eq=False)
class Standard:
    """What the absorbers do under the reference spectrum at exactly 1000 W/m2 and 25 degC, per collecting area.

    Parameters
    ----------
    photocurrent, power : (n_junction,) arrays [A m-2], [W m-2], each junction at its own power point
    terminal_power : (n_absorber,) array [W m-2]
    short_circuit, open_circuit, fill_factor : (n_absorber,) arrays [A m-2], [V], [1]; NaN for 4 terminals
    efficiency : (n_absorber,) array [1]
    power_temperature_coefficient : (n_absorber,) array [K-1], relative, around 25 degC
    """

    photocurrent: Array
    power: Array
    terminal_power: Array
    short_circuit: Array
    open_circuit: Array
    fill_factor: Array
    efficiency: Array
    power_temperature_coefficient: Array


@dataclass(frozen=True, slots=True, eq=False)
class Bank:
    """Junctions of many absorbers in one row, folded onto the bands; made by `Bank.of`.

    Parameters
    ----------
    absorbers : tuple of Absorber
    junctions : tuple of Junction, of all absorbers one after the other
    absorber_of : (n_junction,) int array, the absorber each belongs to
    yields : (n_temperature, n_junction, n_band) array [A W-1], at `FOLD_TEMPERATURES`
    log_saturation : (n_junction, n_steps + 1) array [ln(A m-2)], over evenly spaced inverse temperature
    rear_yields : (n_temperature, n_junction, n_band) array [A W-1], for rear light, which enters at the bottom
    collected_alone : (n_junction,) array [A m-2], each junction's standard photocurrent outside its stack
    """

    absorbers: tuple[Absorber, ...]
    junctions: tuple[Junction, ...]
    absorber_of: NDArray[np.intp]
    yields: Array
    log_saturation: Array
    rear_yields: Array
    collected_alone: Array

    @classmethod
    def of(cls, absorbers: Iterable[Absorber]) -> Bank:
        """Fold absorbers onto the bands and tabulate their saturation currents."""
        absorbers = tuple(absorbers)
        junctions = tuple(junction for absorber in absorbers for junction in absorber.junctions)
        absorber_of = np.repeat(np.arange(len(absorbers)), [len(absorber.junctions) for absorber in absorbers])
        folds = [_fold(absorber) for absorber in absorbers]
        return cls(
            absorbers=absorbers,
            junctions=junctions,
            absorber_of=absorber_of,
            yields=np.concatenate([front for front, _ in folds], axis=1),
            rear_yields=np.concatenate([rear for _, rear in folds], axis=1),
            log_saturation=_saturation_table(junctions),
            collected_alone=np.array([reference_photocurrent(junction) for junction in junctions]),
        )

    @property
    def first_of(self) -> NDArray[np.intp]:
        """The top junction of each absorber, (n_absorber,)."""
        return np.searchsorted(self.absorber_of, np.arange(len(self.absorbers)))

    def currents(self, light: Array, temperature: Array, rear: Array | None = None) -> Array:
        """Return the photocurrent of each junction.

        Parameters
        ----------
        light : (n_time, n_band) array [W m-2], energy in each band on the cells' plane, after incidence losses
        temperature : (n_time,) or (n_absorber, n_time) array [K], of the cells
        rear : (n_time, n_band) array [W m-2] or None, light on the rear, after its incidence losses, before bifaciality

        Returns
        -------
        (n_junction, n_time) array [A m-2]

        Notes
        -----
        The edge drifts with temperature, so responses are folded at nodes 20 K apart and the currents interpolated
        linearly between them, exact at 25 degC. Linear on purpose: a current follows the photons under the moving
        edge, whose water bands make higher-order interpolation overshoot.
        """
        temperature = self._per_absorber(temperature)
        front = self._collected(self.yields, np.asarray(light), temperature)
        if rear is None:
            return front
        gain = np.array([absorber.bifaciality for absorber in self.absorbers])[self.absorber_of]
        return np.asarray(front + gain[:, None] * self._collected(self.rear_yields, np.asarray(rear), temperature))

    def power(self, currents: Array, temperature: Array) -> Array:
        """Return each junction's power at its own power point.

        Parameters
        ----------
        currents : (n_junction, n_time) array [A m-2]
        temperature : (n_time,) or (n_absorber, n_time) array [K]

        Returns
        -------
        (n_junction, n_time) array [W m-2]
        """
        temperature = self._per_absorber(temperature)
        currents = np.asarray(currents)
        return np.array([self._own_power(j, currents[j], temperature) for j in range(len(self.junctions))])

    def terminal_power(self, currents: Array, temperature: Array, own: Array | None = None) -> Array:
        """Return the power of each absorber at its terminals.

        Parameters
        ----------
        currents : (n_junction, n_time) array [A m-2]
        temperature : (n_time,) or (n_absorber, n_time) array [K]
        own : (n_junction, n_time) array [W m-2] or None, what `power` gives for the same, if known already

        Returns
        -------
        (n_absorber, n_time) array [W m-2]

        Notes
        -----
        One junction: its own power. Two terminals: all in series. Four: each junction at its own power point; where
        they are coupled by the light they emit the points are chosen together, see `series.separate_power`.
        """
        temperature = self._per_absorber(temperature)
        out = np.empty((len(self.absorbers), currents.shape[1]))
        for a, absorber in enumerate(self.absorbers):
            first = int(self.first_of[a])
            members = range(first, first + len(absorber.junctions))
            if len(members) > 1 and (absorber.terminals == 2 or absorber.coupling > 0):
                out[a] = self._stack_power(a, currents, temperature[a])
            elif own is None:
                out[a] = sum(self._own_power(j, currents[j], temperature) for j in members)
            else:
                out[a] = own[first : first + len(members)].sum(axis=0)
        return out

    def standard(self) -> Standard:
        """Return what the absorbers do at standard conditions, by the code that computes the hours; computed once."""
        return _standard(self)

    def _at_standard(self) -> Standard:
        bands = reference_bands()
        light = (bands * (STANDARD_IRRADIANCE / bands.sum()))[None]
        temperature = np.array(
            [STANDARD_CELL_TEMPERATURE - 1, STANDARD_CELL_TEMPERATURE, STANDARD_CELL_TEMPERATURE + 1]
        )
        currents = self.currents(np.repeat(light, 3, axis=0), temperature)
        cold, mid, hot = self.terminal_power(currents, temperature).T
        single = self.power(currents[:, 1:2], temperature[1:2])[:, 0]
        short, opened = self._ends(currents[:, 1:2])
        return Standard(
            photocurrent=currents[:, 1],
            power=single,
            terminal_power=mid,
            short_circuit=short,
            open_circuit=opened,
            fill_factor=mid / (short * opened),
            efficiency=mid / STANDARD_IRRADIANCE,
            power_temperature_coefficient=(hot - cold) / 2 / mid,
        )

    def saturation(self, temperature: Array) -> Array:
        """Return the saturation current of each junction, (n_junction, n_time) [A m-2], at (..., n_time) [K]."""
        temperature = self._per_absorber(temperature)
        return np.array([self._saturation(j, temperature[self.absorber_of[j]]) for j in range(len(self.junctions))])

    def _saturation(self, j: int, temperature: Array) -> Array:
        return np.asarray(np.exp(over_inverse_temperature(self.log_saturation[j], temperature)))

    def _own_power(self, j: int, currents: Array, temperature: Array) -> Array:
        junction = self.junctions[j]
        made, heat = generated(junction, currents), temperature[self.absorber_of[j]]
        return own_power(made, heat, self.log_saturation[j], junction.ideality, np.array(constants(junction)))

    def _stack_power(self, a: int, currents: Array, temperature: Array) -> Array:
        absorber, thermal = self.absorbers[a], THERMAL_EV_PER_K * temperature
        members = range(int(self.first_of[a]), int(self.first_of[a]) + len(absorber.junctions))
        saturation = np.array([self._saturation(j, temperature) for j in members])
        emission = np.zeros_like(saturation)
        if absorber.coupling > 0:  # the lowest junction emits into nothing that collects
            for i, j in enumerate(members[:-1]):
                emission[i] = absorber.coupling * self.radiative_saturation(j, saturation[i], temperature)
        return kernel.stack_power(
            np.array([generated(self.junctions[j], currents[j]) for j in members]),
            saturation,
            np.array([self.junctions[j].ideality * thermal for j in members]),
            np.array([constants(self.junctions[j]) for j in members]),
            emission,
            thermal,
            absorber.terminals == 2,
        )

    def _ends(self, currents: Array) -> tuple[Array, Array]:
        """Return short-circuit current and open-circuit voltage (n_absorber,) [A m-2], [V] at 25 degC."""
        temperature = np.full((len(self.absorbers), 1), STANDARD_CELL_TEMPERATURE)
        ends = np.full((2, len(self.absorbers)), np.nan)
        for size, in_series, members in self._kinds():
            if size == 1 or in_series:
                links = series.joined([self._links(a, currents, temperature) for a in members])
                ends[:, members] = series.short_circuit(links), series.open_circuit(links)
        return ends[0], ends[1]

    def _kinds(self) -> list[tuple[int, bool, NDArray[np.intp]]]:
        """Return (junctions, in series?, members) of absorbers that are computed alike."""
        kinds: dict[tuple[int, bool], list[int]] = {}
        for a, absorber in enumerate(self.absorbers):
            kinds.setdefault((len(absorber.junctions), absorber.terminals == 2), []).append(a)
        return [(size, in_series, np.array(members)) for (size, in_series), members in kinds.items()]

    def _links(self, a: int, currents: Array, temperature: Array) -> list[series.Link]:
        """Return an absorber's junctions, linked by the light they emit; currents and temperature are of some hours."""
        absorber, heat, links = self.absorbers[a], temperature[a], []
        for i, junction in enumerate(absorber.junctions):
            j = int(self.first_of[a]) + i
            saturation = self._saturation(j, heat)
            lowest = i == len(absorber.junctions) - 1
            coupling = 0.0 if lowest else absorber.coupling
            emission = coupling * self.radiative_saturation(j, saturation, heat) if coupling > 0 else 0.0
            links.append(
                series.Link(diode_at(junction, currents[j], heat, saturation), emission, THERMAL_EV_PER_K * heat)
            )
        return links

    def radiative_saturation(self, j: int, saturation: Array, temperature: Array) -> Array:
        """Return the radiative saturation current that belongs to a junction's saturation current [A m-2]."""
        junction, collected = self.junctions[j], self.collected_alone[j]
        reduced = (saturation / collected) ** junction.ideality
        return np.asarray(external_radiative_efficiency_at(junction, temperature) * collected * reduced)

    def _per_absorber(self, temperature: Array) -> Array:
        temperature = np.atleast_1d(np.asarray(temperature, dtype=np.float64))
        return np.broadcast_to(temperature, (len(self.absorbers), temperature.shape[-1]))

    def _collected(self, yields: Array, light: Array, temperature: Array) -> Array:
        """Return currents (n_junction, n_time) [A m-2] of light (n_time, n_band), interpolated between fold nodes."""
        n_node, _, n_band = yields.shape
        middle = n_node // 2
        out = np.ascontiguousarray((light @ yields[middle].T).T)
        moving = np.flatnonzero(np.any(yields != yields[middle], axis=(0, 2)))
        if not len(moving):
            return out
        place = (temperature - FOLD_TEMPERATURES[0]) / (FOLD_TEMPERATURES[1] - FOLD_TEMPERATURES[0])
        at = np.clip(np.nan_to_num(place), 0, n_node - 2).astype(np.intp)
        weight = place - at
        first, last = int(at.min(initial=n_node)), int(at.max(initial=-1)) + 1  # nodes that some hour needs
        matrix = np.ascontiguousarray(yields[first : last + 1, moving]).reshape(-1, n_band).T
        at -= first
        for block in _blocks(len(light)):
            nodes = (light[block] @ matrix).reshape(-1, last + 1 - first, len(moving))
            rows = np.arange(len(nodes))
            for column, j in enumerate(moving):
                a = self.absorber_of[j]
                low = nodes[rows, at[a, block], column]
                high = nodes[rows, at[a, block] + 1, column]
                out[j, block] = low + weight[a, block] * (high - low)
        return out


def own_power(made: Array, temperature: Array, log_saturation: Array, ideality: float, numbers: Array) -> Array:
    """Return the power of one junction at its own power point, (n_time,) [W m-2].

    Parameters
    ----------
    made : (n_time,) array [A m-2], current generated
    temperature : (n_time,) array [K]
    log_saturation : (n_step + 1,) array [ln(A m-2)], at `TABLE_TEMPERATURES`
    ideality : float [1]
    numbers : (4,) array, as `junction.constants` gives them
    """
    return points.junction_power(
        np.require(made, requirements=("C", "W")),
        np.require(temperature, requirements=("C", "W")),
        log_saturation,
        _INVERSE_HOT,
        (_INVERSE_COLD - _INVERSE_HOT) / _INVERSE_STEPS,
        ideality * THERMAL_EV_PER_K,
        numbers,
    )


def over_inverse_temperature(table: Array, temperature: Array) -> Array:
    """Return a table of ln J0 (n_steps + 1,) at cell temperatures (...) [K].

    Linear in 1/T, in which ln J0 is nearly straight: 3e-6 off at most over -55 to 125 degC.
    """
    place = (1 / temperature - _INVERSE_HOT) * (_INVERSE_STEPS / (_INVERSE_COLD - _INVERSE_HOT))
    at = np.clip(np.nan_to_num(place), 0, _INVERSE_STEPS - 1).astype(np.intp)
    low = table[at]
    return np.asarray(low + (place - at) * (table[at + 1] - low))


@lru_cache(maxsize=64)  # every site and mounting asks for the same
def _standard(bank: Bank) -> Standard:
    return bank._at_standard()


def _fold(absorber: Absorber) -> tuple[Array, Array]:
    """Return front and rear fold, (n_temperature, n_junction, n_band) [A W-1]."""
    drifts = any(junction.gap_shift_ev_per_k != 0 for junction in absorber.junctions)
    temperatures = FOLD_TEMPERATURES if drifts else FOLD_TEMPERATURES[:1]
    front = np.array([[folded(r) for r in responses_at(absorber, float(t))] for t in temperatures])
    rear = np.zeros_like(front)
    if absorber.bifaciality > 0:
        rear[:, -1] = [folded(response_at(absorber.junctions[-1], float(t))) for t in temperatures]
    shape = (len(FOLD_TEMPERATURES), *front.shape[1:])
    return np.broadcast_to(front, shape), np.broadcast_to(rear, shape)


def _saturation_table(junctions: tuple[Junction, ...]) -> Array:
    """Return ln J0, (n_junction, n_steps + 1), over evenly spaced inverse temperature.

    ln J0 is so smooth over 1/T that a polynomial through 12 Chebyshev points gives it to 1e-8; a detailed balance at
    every temperature of the table would take twenty times as long.
    """
    middle, half = (_INVERSE_HOT + _INVERSE_COLD) / 2, (_INVERSE_COLD - _INVERSE_HOT) / 2
    nodes = chebyshev.chebpts1(12)
    at_nodes = np.array([np.log(saturation_current(junction, 1 / (middle + half * nodes))) for junction in junctions])
    coefficients = chebyshev.chebfit(nodes, at_nodes.T, len(nodes) - 1)
    return np.asarray(chebyshev.chebval(np.linspace(-1, 1, _INVERSE_STEPS + 1), coefficients))


def _blocks(n: int) -> list[slice]:
    return [slice(start, min(start + _BLOCK, n)) for start in range(0, n, _BLOCK)]
