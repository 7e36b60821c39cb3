"""Energy over two gaps: a year's light met by many pairs of junctions, with two terminals or four."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim import spectrum
from yieldsim.device.stack import Absorber
from yieldsim.study import annual
from yieldsim.study.annual import Ratings
from yieldsim.study.hourly import FacesOfYear, SiteSky, bank_of
from yieldsim.study.plan import GapPairsPlan, LossesPlan, MountingPlan, Row
from yieldsim.study.sweep import STANDARD_LIGHT_KWH_M2, STANDARD_SITE

Array = NDArray[np.float64]

SHAPES, LEVELS, WARMTHS = 24, 12, 3  # classes of colour, irradiance and cell temperature
_RED_NM = 700.0  # between the gaps that matter for a pair: light on either side of it feeds one of the two junctions


@dataclass(frozen=True, slots=True)
class Classes:
    """A year's hours drawn together into classes of alike light and temperature.

    Parameters
    ----------
    front, rear : (n_class, n_band) arrays [W m-2], mean light behind the glass; rear None where there is none
    temperature : (n_class,) array [K], mean, weighted with the light
    weight : (n_class,) array [1], intervals in each class, each times what the losses leave of it
    """

    front: Array
    rear: Array | None
    temperature: Array
    weight: Array


def classes(front: Array, rear: Array | None, temperature: Array, kept: Array) -> Classes:
    """Draw hours together by colour, irradiance and temperature, a class of each kind holding a like share of energy.

    Parameters
    ----------
    front : (n, n_band) array [W m-2], behind the glass
    rear : (n, n_band) array [W m-2] or None
    temperature : (n,) array [K], of the cells
    kept : (n,) array [1], what the losses behind the absorber leave

    Returns
    -------
    Classes

    Notes
    -----
    Currents are linear in light, so a class keeps its charge; what a class blurs is which junction limits and the bend
    of power over light. Against all hours a series pair's year moves by less than 0.1 % (tests).
    """
    light = front.sum(axis=1)
    lit = np.flatnonzero(light > 0)
    light = light[lit]
    blue = front[lit][:, spectrum.band_wavelengths() < _RED_NM].sum(axis=1) / light
    number = np.zeros(len(lit), dtype=np.intp)
    # Power bends most over weak light: levels are shared out by the root of the light, colours and warmths by light.
    kinds = ((blue, light, SHAPES), (light, np.sqrt(light), LEVELS), (temperature[lit], light, WARMTHS))
    for values, share, count in kinds:
        number = number * count + shared_out(np.asarray(values), share, count)
    _, number = np.unique(number, return_inverse=True)
    n_class = int(number.max(initial=-1)) + 1
    weight = np.asarray(np.bincount(number, kept[lit], minlength=n_class), dtype=np.float64)

    def mean(values: Array) -> Array:
        total: Array = np.zeros((n_class, values.shape[1]))
        np.add.at(total, number, values[lit] * kept[lit, None])
        return total / weight[:, None]

    heat, whole = (np.bincount(number, each, minlength=n_class) for each in (temperature[lit] * light, light))
    return Classes(mean(front), None if rear is None else mean(rear), np.asarray(heat / whole), weight)


def shared_out(values: Array, weight: Array, count: int) -> NDArray[np.intp]:
    """Return the class (n,) of each value, classes in rising order holding a like share of the weight."""
    order = np.argsort(values, kind="stable")
    share = np.cumsum(weight[order]) / weight.sum()
    number = np.empty(len(values), dtype=np.intp)
    number[order] = np.minimum((share * count).astype(np.intp), count - 1)
    return number


def pair_rows(
    site: str, sky: SiteSky, mounting: MountingPlan, faces: FacesOfYear, plan: GapPairsPlan, losses: LossesPlan
) -> list[Row]:
    """Return one row per quality, terminals and pair: the year's energy and the efficiency at standard conditions.

    Parameters
    ----------
    site : str
    sky : SiteSky
    mounting : MountingPlan
    faces : FacesOfYear, the light on both faces of the mounting
    plan : GapPairsPlan
    losses : LossesPlan
    """
    rows: list[Row] = []
    step_h = sky.weather.interval_s / 3600.0
    light = float(faces.front.total().sum() * step_h) / 1000.0
    kept = annual.kept_share(losses)[sky.month]
    for (quality, terminals), absorbers in plan.absorbers.items():
        # Pairs of one quality differ in their gaps alone: one glass, one heat loss, one cell temperature.
        first = absorbers[0]
        front, rear = faces.entered(first.incidence_modifier)
        temperature = faces.temperatures(mounting, absorbers[:1])[0]
        drawn = classes(front, rear if first.bifaciality > 0 else None, temperature, kept)
        bank = bank_of(absorbers)
        power = bank.terminal_power(bank.currents(drawn.front, drawn.temperature, drawn.rear), drawn.temperature)
        energy = power @ drawn.weight * (step_h / 1000.0) * first.area_fraction
        rows += _rows(site, mounting.name, quality, terminals, plan, absorbers, light, energy)
    return rows


def standard_rows(plan: GapPairsPlan) -> list[Row]:
    """Return the same rows for 1000 kWh/m2 of the standard spectrum on cells at 25 degC, nothing lost."""
    rows: list[Row] = []
    for (quality, terminals), absorbers in plan.absorbers.items():
        energy = Ratings.of(absorbers).module_efficiency(absorbers) * STANDARD_LIGHT_KWH_M2
        rows += _rows(STANDARD_SITE, "", quality, terminals, plan, absorbers, STANDARD_LIGHT_KWH_M2, energy)
    return rows


def material_rows(rows: Sequence[Row], materials: Sequence[tuple[str, float, float]]) -> list[Row]:
    """Return how far pairs of today's materials stay behind the best pair, one row per place, kind and material.

    Parameters
    ----------
    rows : those of `pair_rows` and `standard_rows`
    materials : (name, top gap [eV], bottom gap [eV]) each

    Returns
    -------
    rows with the best pair of the place and kind, and the share of its energy that two junctions with the material's
    gaps and the *same quality as the rest* would lose; materials beyond the pairs computed have none

    Notes
    -----
    Linear between the pairs computed; a material's own quality is not in it: it is the gaps that are compared.
    """
    found: list[Row] = []
    for kind, members in _by_kind(rows).items():
        top, bottom = (np.unique([float(row[name]) for row in members]) for name in ("top_gap_ev", "bottom_gap_ev"))
        energy = np.full((len(top), len(bottom)), np.nan)
        for row in members:
            at = np.searchsorted(top, float(row["top_gap_ev"])), np.searchsorted(bottom, float(row["bottom_gap_ev"]))
            energy[at] = float(row["energy_kwh_m2"])
        best = np.unravel_index(np.nanargmax(energy), energy.shape)
        for name, upper, lower in materials:
            at_gaps = _between(top, bottom, energy, upper, lower)
            if np.isfinite(at_gaps):
                row = dict(zip(_KIND, kind, strict=True)) | {"material": name}
                row |= {"top_gap_ev": upper, "bottom_gap_ev": lower, "energy_kwh_m2": at_gaps}
                row |= {"best_top_gap_ev": float(top[best[0]]), "best_bottom_gap_ev": float(bottom[best[1]])}
                found.append(row | {"behind_best": 1 - at_gaps / float(energy[best])})
    return found


_KIND = ("site", "mounting", "quality", "terminals")


def _by_kind(rows: Sequence[Row]) -> dict[tuple[str | int | float, ...], list[Row]]:
    kinds: dict[tuple[str | int | float, ...], list[Row]] = {}
    for row in rows:
        kinds.setdefault(tuple(row[name] for name in _KIND), []).append(row)
    return kinds


def _between(top: Array, bottom: Array, energy: Array, upper: float, lower: float) -> float:
    """Return the energy at a pair of gaps, linear in both; NaN beyond the grid."""
    if not (top[0] <= upper <= top[-1] and bottom[0] <= lower <= bottom[-1]):
        return float("nan")
    along = np.array([np.interp(lower, bottom, row) for row in energy])
    return float(np.interp(upper, top, along))


def _rows(
    site: str,
    mounting: str,
    quality: str,
    terminals: int,
    plan: GapPairsPlan,
    absorbers: tuple[Absorber, ...],
    light: float,
    energy: Array,
) -> list[Row]:
    efficiency = Ratings.of(absorbers).module_efficiency(absorbers)
    return [
        {
            "site": site,
            "mounting": mounting,
            "quality": quality,
            "terminals": terminals,
            "top_gap_ev": top,
            "bottom_gap_ev": bottom,
            "poa_kwh_m2": light,
            "energy_kwh_m2": float(energy[i]),
            "standard_efficiency": float(efficiency[i]),
        }
        for i, (top, bottom) in enumerate(plan.pairs_ev)
    ]
