"""Absorbers whose properties are a little off: their responses and saturation currents from tables over the edge."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import STANDARD_CELL_TEMPERATURE, THERMAL_EV_PER_K
from yieldsim.device import kernel
from yieldsim.device.bank import (
    FOLD_TEMPERATURES,
    TABLE_TEMPERATURES,
    Bank,
    over_inverse_temperature,
    own_power,
)
from yieldsim.device.junction import LIMITS, constants, generated, moved_to_gap
from yieldsim.device.stack import Absorber
from yieldsim.study import store
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
    gain : (m,) array [1], current generated over current collected
    numbers : (m, 4) array, as `junction.constants` gives them
    drifts : bool, edges drift with temperature
    """

    bank: Bank
    front: tuple[Array, ...]
    rear: tuple[Array, ...]
    log_saturation: Array
    collected_alone: Array
    gain: Array
    numbers: Array
    drifts: bool

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
        return cls(
            bank,
            tuple(front),
            tuple(rear),
            np.array(saturation),
            np.array(alone),
            np.array([generated(junction, 1.0) for junction in absorber.junctions]),
            np.array([constants(junction) for junction in absorber.junctions]),
            any(junction.gap_shift_ev_per_k != 0 for junction in absorber.junctions),
        )


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


@dataclass(frozen=True, slots=True)
class _Known:
    """An absorber told from others by what it is made of: each site's work brings records of its own."""

    made_of: str
    absorber: Absorber = field(compare=False)


def device(absorber: Absorber, steps: tuple[float, ...]) -> Device:
    """Return a Device, made once for all sites and mountings of a process."""
    made_of = store.fingerprint(absorber.junctions, absorber.terminals, absorber.coupling, absorber.bifaciality)
    return _device(_Known(made_of, absorber), steps)


@lru_cache(maxsize=128)
def _device(known: _Known, steps: tuple[float, ...]) -> Device:
    return Device.of(known.absorber, steps)


@dataclass(frozen=True, slots=True)
class Offsets:
    """How far an absorber's properties are off: arrays (m,) per junction, or (n, m) of many draws.

    Parameters
    ----------
    edge : [1], in spreads of each edge
    response : [1], factor on the response
    radiative : [1], factor on the external radiative efficiency
    resistance : [1], factor on the series resistance and on the shunt conductance
    temperature_coefficient : float or (n,) array [K-1], added to that of power
    """

    edge: Array
    response: Array
    radiative: Array
    resistance: Array
    temperature_coefficient: Any

    def of(self, k: int) -> Offsets:
        """Return those of one draw."""
        coefficient = float(self.temperature_coefficient[k])
        return Offsets(self.edge[k], self.response[k], self.radiative[k], self.resistance[k], coefficient)


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
    at, share = _places(off.edge)
    current = _collected(_yields(found.front, at, share), front, temperature, found.drifts)
    if rear is not None and absorber.bifaciality > 0:
        behind = _collected(_yields(found.rear, at, share), rear, temperature, found.drifts)
        current = current + absorber.bifaciality * behind
    made = current * (off.response * found.gain)[:, None]
    numbers = found.numbers.copy()
    numbers[:, :2] *= off.resistance[:, None]
    tables = [_saturation_table(found, off, at, share, j) for j in range(len(at))]
    if len(tables) == 1:
        gives = own_power(made[0], temperature, tables[0], absorber.junctions[0].ideality, numbers[0])
    else:
        gives = _stack_power(found, off, (at, share), made, temperature, tables, numbers)
    return np.asarray(gives * (1 + off.temperature_coefficient * (temperature - STANDARD_CELL_TEMPERATURE)))


def _places(edge: Array) -> tuple[NDArray[np.intp], Array]:
    """Return the node below each edge (m,) and the share of the next one."""
    place = (np.minimum(np.maximum(edge, -FARTHEST), FARTHEST) + FARTHEST) * _NODES_PER_SPREAD
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


def _collected(yields: Array, light: Array, temperature: Array, drifts: bool) -> Array:
    """Return currents (m, n) [A m-2], linear between the fold's temperatures as in `Bank.currents`."""
    n_temperature, m, n_band = yields.shape
    if not drifts:
        return np.ascontiguousarray((light @ yields[n_temperature // 2].T).T)
    place = (temperature - FOLD_TEMPERATURES[0]) / (FOLD_TEMPERATURES[1] - FOLD_TEMPERATURES[0])
    at = np.minimum(np.maximum(place, 0), n_temperature - 2).astype(np.intp)
    nodes = (light @ yields.reshape(-1, n_band).T).reshape(-1, n_temperature, m)
    rows = np.arange(len(light))
    low = nodes[rows, at]
    return np.ascontiguousarray((low + (place - at)[:, None] * (nodes[rows, at + 1] - low)).T)


def _saturation_table(found: Device, off: Offsets, at: NDArray[np.intp], share: Array, j: int) -> Array:
    """Return the logarithm of a junction's saturation current at `TABLE_TEMPERATURES`."""
    low = found.log_saturation[j][at[j]]
    here = low + share[j] * (found.log_saturation[j][at[j] + 1] - low)
    ideality = found.bank.junctions[j].ideality
    growth, loss, lost = _losses(found, off, j, TABLE_TEMPERATURES)
    return np.asarray(here + (np.log(off.response[j]) + np.log((1 + lost * growth) / (1 + loss * growth)) / ideality))


def _losses(found: Device, off: Offsets, j: int, temperature: Array) -> tuple[Array | float, float, float]:
    """Return the growth of what is lost besides light with temperature, and the share lost before and after."""
    junction = found.bank.junctions[j]
    drift = junction.nonradiative_drift_per_k
    growth = np.exp(drift * (temperature - STANDARD_CELL_TEMPERATURE)) if drift else 1.0
    better = min(junction.external_radiative_efficiency * float(off.radiative[j]), 1.0)
    return growth, 1 / junction.external_radiative_efficiency - 1, 1 / better - 1


def _stack_power(
    found: Device,
    off: Offsets,
    place: tuple[NDArray[np.intp], Array],
    made: Array,
    temperature: Array,
    tables: Sequence[Array],
    numbers: Array,
) -> Array:
    """Return the power of a stack, its junctions coupled as in `Bank.terminal_power`."""
    absorber, thermal = found.bank.absorbers[0], THERMAL_EV_PER_K * temperature
    saturation = np.array([np.exp(over_inverse_temperature(table, temperature)) for table in tables])
    emission = np.zeros_like(saturation)
    for j, junction in enumerate(absorber.junctions[:-1]):  # the lowest emits into nothing that collects
        alone, at, share = found.collected_alone[j], place[0][j], place[1][j]
        collected = (alone[at] + share * (alone[at + 1] - alone[at])) * off.response[j]
        growth, _, lost = _losses(found, off, j, temperature)
        radiative = collected * (saturation[j] / collected) ** junction.ideality / (1 + lost * growth)
        emission[j] = absorber.coupling * radiative
    diode = np.array([junction.ideality * thermal for junction in absorber.junctions])
    in_series = absorber.terminals == 2
    return np.asarray(kernel.stack_power(made, saturation, diode, numbers, emission, thermal, in_series))
