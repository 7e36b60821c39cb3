"""Absorbers whose properties are a little off: their responses and saturation currents from tables over the edge."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import STANDARD_CELL_TEMPERATURE, THERMAL_EV_PER_K
from yieldsim.device import kernel
from yieldsim.device.bank import FOLD_TEMPERATURES, Bank, over_inverse_temperature
from yieldsim.device.junction import LIMITS, constants, generated, moved_to_gap
from yieldsim.device.stack import Absorber
from yieldsim.study.chance_inputs import FARTHEST

Array = NDArray[np.float64]

_NODES = np.arange(-FARTHEST, FARTHEST + 0.25, 0.5)  # spreads of the edge at which responses are folded
_NODES_PER_SPREAD = 2.0


@dataclass(frozen=True, slots=True, eq=False)
class Device:
    """One absorber over the edges of its junctions.

    Parameters
    ----------
    bank : Bank of the absorber alone, as it is
    front, rear : per junction whose edge moves: (n_node, n_temperature, m, n_band) arrays [A W-1] of all junctions
    log_saturation : (m, n_node, n_step + 1) array [ln(A m-2)]
    collected_alone : (m, n_node) array [A m-2]
    steps : (m,) array [eV], spread of each junction's edge; 0 = it does not move
    """

    bank: Bank
    front: tuple[Array, ...]
    rear: tuple[Array, ...]
    log_saturation: Array
    collected_alone: Array
    steps: Array

    @classmethod
    def of(cls, absorber: Absorber, steps: tuple[float, ...]) -> Device:
        """Fold an absorber at every node of each junction's edge."""
        bank = Bank.of([absorber])
        front, rear, saturation, alone = [], [], [], []
        for i, step in enumerate(steps):
            nodes = [_with_edge(absorber, i, float(node) * step) for node in _NODES] if step > 0 else [absorber]
            banks = Bank.of(nodes)
            m = len(absorber.junctions)
            own = slice(i, None, m)
            front.append(_by_node(banks.yields, m))
            rear.append(_by_node(banks.rear_yields, m))
            count = len(_NODES)
            saturation.append(np.broadcast_to(banks.log_saturation[own], (count, banks.log_saturation.shape[1])))
            alone.append(np.broadcast_to(banks.collected_alone[own], count))
        return cls(bank, tuple(front), tuple(rear), np.array(saturation), np.array(alone), np.array(steps))


def _by_node(yields: Array, m: int) -> Array:
    n_temperature, _, n_band = yields.shape
    return np.ascontiguousarray(yields.reshape(n_temperature, -1, m, n_band).swapaxes(0, 1))


def _with_edge(absorber: Absorber, i: int, shift_ev: float) -> Absorber:
    """Return an absorber with the edge of one junction moved, as far as its neighbours' gaps let it."""
    junctions = list(absorber.junctions)
    lowest, highest = LIMITS["gap_ev"]
    low = junctions[i + 1].gap_ev if i + 1 < len(junctions) else lowest
    high = junctions[i - 1].gap_ev if i > 0 else highest
    junctions[i] = moved_to_gap(junctions[i], min(max(junctions[i].gap_ev + shift_ev, low), high))
    return replace(absorber, junctions=tuple(junctions))


@lru_cache(maxsize=256)
def device(absorber: Absorber, steps: tuple[float, ...]) -> Device:
    """Return a Device, made once for all sites and mountings of a run."""
    return Device.of(absorber, steps)


@dataclass(frozen=True, slots=True)
class Offsets:
    """How far an absorber's properties are off in one draw; arrays are per junction (m,).

    Parameters
    ----------
    edge : [1], in spreads of each edge
    response : [1], factor on the response
    radiative : [1], factor on the external radiative efficiency
    resistance : [1], factor on the series resistance and on the shunt conductance
    temperature_coefficient : float [K-1], added to that of power
    """

    edge: Array
    response: Array
    radiative: Array
    resistance: Array
    temperature_coefficient: float


def power(found: Device, off: Offsets, front: Array, rear: Array | None, temperature: Array) -> Array:
    """Return the power of an absorber whose properties are off.

    Parameters
    ----------
    found : Device
    off : Offsets
    front, rear : (n, n_band) arrays [W m-2], behind the glass; rear before bifaciality
    temperature : (n,) array [K]

    Returns
    -------
    (n,) array [W m-2]

    Notes
    -----
    Between nodes of the edge responses are interpolated linearly; edges of several junctions move responses
    independently, since each moves another part of the spectrum. A saturation current is in proportion to the response
    (`balance.saturation_current`) and falls with the external radiative efficiency to the power 1/ideality.
    """
    absorber = found.bank.absorbers[0]
    m = len(absorber.junctions)
    at, share = _places(off.edge)
    current = _collected(_yields(found.front, at, share), front, temperature)
    if rear is not None and absorber.bifaciality > 0:
        current = current + absorber.bifaciality * _collected(_yields(found.rear, at, share), rear, temperature)
    current = current * off.response[:, None]
    saturation, radiative = _saturations(found, off, at, share, temperature)
    thermal = THERMAL_EV_PER_K * temperature
    numbers = np.array([constants(junction) for junction in absorber.junctions])
    numbers[:, 0] *= off.resistance
    numbers[:, 1] *= off.resistance
    made = np.array([generated(junction, current[j]) for j, junction in enumerate(absorber.junctions)])
    diode = np.array([junction.ideality * thermal for junction in absorber.junctions])
    if m == 1:
        gives = kernel.single_power(made[0], saturation[0], diode[0], numbers[0])
    else:
        emission = np.zeros_like(saturation)
        emission[:-1] = absorber.coupling * radiative[:-1]  # the lowest emits into nothing that collects
        gives = kernel.stack_power(made, saturation, diode, numbers, emission, thermal, absorber.terminals == 2)
    return np.asarray(gives * (1 + off.temperature_coefficient * (temperature - STANDARD_CELL_TEMPERATURE)))


def _places(edge: Array) -> tuple[NDArray[np.intp], Array]:
    """Return the node below each edge (m,) and the share of the next one."""
    place = (np.clip(edge, -FARTHEST, FARTHEST) + FARTHEST) * _NODES_PER_SPREAD
    at = np.minimum(place.astype(np.intp), len(_NODES) - 2)
    return at, place - at


def _yields(tables: Sequence[Array], at: NDArray[np.intp], share: Array) -> Array:
    """Return responses (n_temperature, m, n_band) [A W-1] with every edge moved."""
    middle = len(_NODES) // 2
    total: Array | None = None
    for i, table in enumerate(tables):
        if len(table) == 1:
            base, here = table[0], table[0]
        else:
            low = table[at[i]]
            base, here = table[middle], low + share[i] * (table[at[i] + 1] - low)
        total = here if total is None else total + (here - base)
    assert total is not None  # an absorber has a junction
    return total


def _collected(yields: Array, light: Array, temperature: Array) -> Array:
    """Return currents (m, n) [A m-2], linear between the fold's temperatures as in `Bank.currents`."""
    middle = len(FOLD_TEMPERATURES) // 2
    n_temperature, m, n_band = yields.shape
    if np.array_equal(yields[0], yields[middle]):
        return np.ascontiguousarray((light @ yields[middle].T).T)
    place = (temperature - FOLD_TEMPERATURES[0]) / (FOLD_TEMPERATURES[1] - FOLD_TEMPERATURES[0])
    at = np.clip(place, 0, n_temperature - 2).astype(np.intp)
    nodes = (light @ yields.reshape(-1, n_band).T).reshape(-1, n_temperature, m)
    rows = np.arange(len(light))
    low = nodes[rows, at]
    return np.ascontiguousarray((low + (place - at)[:, None] * (nodes[rows, at + 1] - low)).T)


def _saturations(
    found: Device, off: Offsets, at: NDArray[np.intp], share: Array, temperature: Array
) -> tuple[Array, Array]:
    """Return saturation currents and their radiative parts, (m, n) [A m-2]."""
    absorber = found.bank.absorbers[0]
    saturation, radiative = np.empty((2, len(at), len(temperature)))
    for j, junction in enumerate(absorber.junctions):
        table, alone = found.log_saturation[j], found.collected_alone[j]
        here = table[at[j]] + share[j] * (table[at[j] + 1] - table[at[j]])
        collected = (alone[at[j]] + share[j] * (alone[at[j] + 1] - alone[at[j]])) * off.response[j]
        growth = np.exp(junction.nonradiative_drift_per_k * (temperature - STANDARD_CELL_TEMPERATURE))
        loss = 1 / junction.external_radiative_efficiency - 1
        lost = 1 / min(junction.external_radiative_efficiency * float(off.radiative[j]), 1.0) - 1
        worse = ((1 + lost * growth) / (1 + loss * growth)) ** (1 / junction.ideality)
        saturation[j] = np.exp(over_inverse_temperature(here, temperature)) * (off.response[j] * worse)
        radiative[j] = collected * (saturation[j] / collected) ** junction.ideality / (1 + lost * growth)
    return saturation, radiative
