"""One mounting's year as a function of all that is drawn: what every table of `chance` asks."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.device.stack import Absorber
from yieldsim.study import chance_draws, head_to_head
from yieldsim.study.chance_inputs import (
    BY_NAME,
    FARTHEST,
    INPUTS,
    OF_ABSORBER,
    OF_ENERGY,
    OF_JUNCTION,
    is_limit,
)
from yieldsim.study.chance_light import ClassLight
from yieldsim.study.chance_shortcut import Dimension, Shortcut, Spreads, absorber_owner
from yieldsim.study.plan import ChancePlan, Row

Array = NDArray[np.float64]

MEASURES = ("specific_yield_kwh_kwp", "energy_kwh_m2")


def spreads_of(plan: ChancePlan, site: str, absorbers: Sequence[Absorber]) -> Spreads:
    """Return the standard deviations that hold at a site and for each absorber; a limit has none."""
    by_absorber = (*OF_JUNCTION, *OF_ABSORBER)
    everywhere = {each.name: plan.spreads.get(each.name, each.spread) for each in INPUTS}
    own = {name: value for name, value in everywhere.items() if name in by_absorber}
    here = {name: value for name, value in everywhere.items() if name not in by_absorber}
    return Spreads(
        here | dict(plan.sites.get(site, {})),
        tuple(
            dict.fromkeys(own, 0.0) if is_limit(absorber) else own | dict(plan.absorbers.get(absorber.name, {}))
            for absorber in absorbers
        ),
    )


def numbers(plan: ChancePlan, drawn: Sequence[Dimension], count: int, again: str = "") -> Array:
    """Return draws of every dimension, (count, n_dimension) [1], in spreads; ``again`` names an independent set."""
    found: Array = np.zeros((count, len(drawn)))
    for place, (name, owner, number) in enumerate(drawn):
        called = f"{again}{name} {number}" if number else again + name
        values = chance_draws.normal(plan.seed, called, owner, count)
        if BY_NAME[name].owner == "site" and name in plan.correlation:
            common = chance_draws.normal(plan.seed, called, "every site", count)
            values = chance_draws.tied(values, common, plan.correlation[name])
        found[:, place] = values
    return np.asarray(np.clip(found, -FARTHEST, FARTHEST))


@dataclass(frozen=True, slots=True, eq=False)
class YearOfChance:
    """A mounting's year; made by `YearOfChance.of`.

    Parameters
    ----------
    shortcut : Shortcut
    drawn : what the numbers of a draw are
    base : (2, n_absorber) array, the study's own measures
    years : (n_year, n_absorber) array [1] or None, each year's energy over the mean one, where years are drawn
    middle : (2, n_absorber) array, energy and standard power of the shortcut with all inputs in their middle
    places : (3, n_absorber) int array, of `OF_ENERGY` of each absorber among the numbers; the last + 1 = none
    """

    shortcut: Shortcut
    drawn: tuple[Dimension, ...]
    base: Array
    years: Array | None
    middle: Array
    places: NDArray[np.intp]

    @classmethod
    def of(
        cls,
        light: ClassLight,
        absorbers: Sequence[Absorber],
        spreads: Spreads,
        drawn: Sequence[Dimension],
        base: Array,
        years: Array | None,
    ) -> YearOfChance:
        """Make it; ``years`` as above, None = the year's spread is a number."""
        shortcut = Shortcut.of(light, absorbers, spreads, drawn)
        middle = np.array(shortcut.energies(np.zeros((1, len(drawn)))))[:, 0]
        column = {(name, owner): place for place, (name, owner, number) in enumerate(drawn) if number == 0}
        nowhere = len(drawn)
        year = next(place for (name, _), place in column.items() if name == "year")
        owners = [absorber_owner(absorber) for absorber in absorbers]
        rest = [[column.get((name, owner), nowhere) for owner in owners] for name in OF_ENERGY[1:]]
        places = np.array([[year] * len(owners), *rest], dtype=np.intp)
        return cls(shortcut, tuple(drawn), base, years, middle, places)

    def core(self, numbers: Array) -> Array:
        """Return energy and standard power over those in the middle, (2, n, n_absorber) [1], of draws (n, n_dim)."""
        return np.asarray(np.array(self.shortcut.energies(numbers)) / self.middle[:, None])

    def values(self, numbers: Array, core: Array | None = None) -> Array:
        """Return both measures of each absorber in each draw.

        Parameters
        ----------
        numbers : (n, n_dimension) array [1], in spreads
        core : what `core` gives for them, or for others that differ in `OF_ENERGY` alone, if known already

        Returns
        -------
        (2, n, n_absorber) array in the units of `MEASURES`

        Notes
        -----
        The energy of a draw is the study's times what the shortcut says of the ratio, so that with nothing drawn it is
        the study's to the last digit. Per rated power it is over the power the drawn absorber has at standard
        conditions, times how far that lies from its label.
        """
        energy, rating = self.core(numbers) if core is None else core
        spreads = self.shortcut.spreads
        more = np.concatenate([numbers, np.zeros((len(numbers), 1))], axis=1)
        factors = []
        for name, place in zip(OF_ENERGY, self.places, strict=True):
            own = [spreads.site[name]] * len(place) if name == "year" else [each[name] for each in spreads.absorbers]
            factors.append(BY_NAME[name].value(np.array(own) * more[:, place]))
        year, nameplate, ageing = factors
        if self.years is not None:
            year = self.years[chance_draws.picked(more[:, self.places[0][0]], len(self.years))]
        common = energy * year * ageing
        return np.array([self.base[0] * (common * nameplate / rating), self.base[1] * common])

    def slopes(self) -> Array:
        """Return how each measure answers to each number near the middle, (2, n_dimension, n_absorber) per spread."""
        steps = np.eye(len(self.drawn))
        return np.asarray((self.values(steps) - self.values(-steps)) / 2)

    def best_two(self, k: int) -> tuple[int, int]:
        """Return the absorbers that give most and next most of a measure in the study itself.

        Limits stand aside where there are two that can be made: nobody buys a limit. One that ties with the best is no
        second while there is another.
        """
        real = [i for i, absorber in enumerate(self.shortcut.absorbers) if not is_limit(absorber)]
        among = np.array(real if len(real) > 1 else range(len(self.shortcut.absorbers)))
        first, *rest = among[np.argsort(-self.base[k, among], kind="stable")].tolist()
        apart = [i for i in rest if head_to_head.leads(self.base[k, [first]], self.base[k, [i]])[0] != 0]
        return first, (apart or rest)[0]

    def active(self) -> list[str]:
        """Return the inputs with any spread, in their order."""
        spreads = self.shortcut.spreads
        found = []
        for each in INPUTS:
            name = each.name
            own = [by.get(name, 0.0) for by in (spreads.site, *spreads.absorbers)]
            if max(own) > 0 or (name == "year" and self.years is not None):
                found.append(name)
        return found

    def columns(self, name: str) -> NDArray[np.intp]:
        """Return the places of an input's numbers."""
        return np.array([place for place, (found, _, _) in enumerate(self.drawn) if found == name], dtype=np.intp)


def base_of(rows: Sequence[Row], mounting: str, absorbers: Sequence[Absorber]) -> Array:
    """Return the study's measures, (2, n_absorber), from rows of ``annual``."""
    found = {str(row["absorber"]): row for row in rows if row["mounting"] == mounting}
    return np.array([[float(found[absorber.name][measure]) for absorber in absorbers] for measure in MEASURES])


def years_of(
    plan: ChancePlan, site: str, rows: Sequence[Row], mounting: str, absorbers: Sequence[Absorber]
) -> Array | None:
    """Return each year's energy over the mean one (n_year, n_absorber) [1], where the study has several to draw from.

    A spread of the year that the study gives stands above the years.
    """
    given: Mapping[str, float] = dict(plan.spreads) | dict(plan.sites.get(site, {}))
    if "year" in given or not rows:
        return None
    by_year: dict[float, dict[str, float]] = {}
    for row in rows:
        if row["mounting"] == mounting:
            by_year.setdefault(float(row["year"]), {})[str(row["absorber"])] = float(row["energy_kwh_m2"])
    energy = np.array([[year[absorber.name] for absorber in absorbers] for year in by_year.values()])
    return np.asarray(energy / energy.mean(axis=0))
