"""The ledger: where every kilowatt-hour of light on the cell plane went."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.device import account
from yieldsim.device.stack import Absorber
from yieldsim.study.plan import LossesPlan, Row

Array = NDArray[np.float64]

#: Fates of light before the losses behind the absorber, in the order in which it meets them.
FATES = (
    "reflected",
    "below_gap",
    "uncollected",
    "thermalised",
    "radiative_voltage",
    "nonradiative_voltage",
    "fill_factor",
    "resistance",
    "mismatch",
)
DELIVERED = "delivered"
SNOW = "snow"


@dataclass(frozen=True, slots=True)
class LightPaid:
    """A year's light by band and what its collected photons gave up, sums over the lit intervals.

    Parameters
    ----------
    incident : (n_absorber,) array [W m-2], front plus bifaciality times rear, before the glass
    front, rear : (n_absorber, n_band) arrays [W m-2], behind the glass; rear times bifaciality
    gap_power : (n_junction,) array [W m-2], photocurrent times gap
    radiative_power, actual_power : (n_junction,) arrays [W m-2], photocurrent times those open-circuit voltages
    bare_power, own_power : (n_junction,) arrays [W m-2], at each junction's power point without and with resistances
    terminals : (n_absorber, 12) array [W m-2], by month
    """

    incident: Array
    front: Array
    rear: Array
    gap_power: Array
    radiative_power: Array
    actual_power: Array
    bare_power: Array
    own_power: Array
    terminals: Array


def ledger_rows(
    site: str, mounting: str, absorbers: Sequence[Absorber], paid: LightPaid, losses: LossesPlan, interval_s: int
) -> list[Row]:
    """Return one row per absorber: each fate's energy [kWh m-2 of cell area a year]; together the light on the cells.

    Parameters
    ----------
    site, mounting : str
    absorbers : those of ``paid``
    paid : LightPaid
    losses : LossesPlan, in the order in which they are taken
    interval_s : int [s]

    Notes
    -----
    Reflected is what the glass turns away beyond normal incidence; what the cells reflect is uncollected, as a response
    holds both. Thermalised is the energy of collected photons less their gap, net of photons collected below it.
    Each following fate is the difference between two steps, so nothing can be left over.
    """
    hours = interval_s / 3600.0 / 1000.0
    owner = np.repeat(np.arange(len(absorbers)), [len(absorber.junctions) for absorber in absorbers])
    rows: list[Row] = []
    for i, absorber in enumerate(absorbers):
        mine = owner == i
        front, rear = account.front_shares(absorber), account.rear_shares(absorber)
        behind_glass = paid.front[i].sum() + paid.rear[i].sum()
        collected = paid.front[i] @ front.collected + paid.rear[i] @ rear.collected
        steps = [
            collected,
            paid.gap_power[mine].sum(),
            paid.radiative_power[mine].sum(),
            paid.actual_power[mine].sum(),
            paid.bare_power[mine].sum(),
            paid.own_power[mine].sum(),
            paid.terminals[i].sum(),
        ]
        fates = [
            paid.incident[i] - behind_glass,
            paid.front[i] @ front.below + paid.rear[i] @ rear.below,
            paid.front[i] @ front.missed + paid.rear[i] @ rear.missed,
            *(before - after for before, after in itertools.pairwise(steps)),
        ]
        row: Row = {"site": site, "mounting": mounting, "absorber": absorber.name}
        row |= {name: float(fate) * hours for name, fate in zip(FATES, fates, strict=True)}
        row |= {name: value * hours for name, value in _behind(paid.terminals[i], losses).items()}
        rows.append(row)
    return rows


def _behind(terminals: Array, losses: LossesPlan) -> dict[str, float]:
    """Return what each loss behind the absorber takes of monthly energies (12,), one after the other, and the rest."""
    left = terminals
    taken = {SNOW: 0.0}
    for name, monthly in losses.monthly.items():
        share = np.asarray(monthly)
        taken[name] = float((left * share).sum())
        left = left * (1 - share)
    return taken | {DELIVERED: float(left.sum())}
