"""What would have to be true for a ranking to flip: the value of each input at which the two best absorbers tie."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from yieldsim.device.stack import Absorber
from yieldsim.study import head_to_head
from yieldsim.study.chance_inputs import BY_NAME, FARTHEST
from yieldsim.study.chance_shortcut import absorber_owner, junction_owner, owners
from yieldsim.study.chance_year import MEASURES, YearOfChance
from yieldsim.study.plan import Row

Array = NDArray[np.float64]

BEYOND = f"none within {FARTHEST:g} spreads"
_HOPELESS = 3.0  # times beyond reach for a straight line: not worth the search


def rows(year: YearOfChance, site: str, absorbers: Sequence[Absorber], slopes: Array) -> Iterator[Row]:
    """Yield, for each input, the value at which the best and the second absorber tie, all else in its middle.

    Parameters
    ----------
    year : YearOfChance
    site : str
    absorbers : of the study
    slopes : from `YearOfChance.slopes`

    Yields
    ------
    rows of ``measure, absorber, other, input, of, unit, value, spreads, found``: whose input; its value as a factor or
    as what is added; how many spreads that is; ``tie`` or that there is none within `FARTHEST` spreads. An error by
    band has many shapes: the one taken is that which moves the lead most.
    """
    if len(absorbers) < 2:
        return
    for k, measure in enumerate(MEASURES):
        i, j = year.best_two(k)
        if head_to_head.leads(year.base[k, [i]], year.base[k, [j]])[0] == 0:
            continue  # they tie as it is
        line = slopes[k, :, i] / year.base[k, i] - slopes[k, :, j] / year.base[k, j]
        about: Row = {"measure": measure, "absorber": absorbers[i].name, "other": absorbers[j].name}
        for name in year.active():
            for owner, said in owners(name, site, (absorbers[i], absorbers[j])):
                at = _tie_along(year, k, (i, j), (name, owner), line)
                yield about | _row(name, said, at, _spread(year, name, owner, absorbers))


def _tie_along(year: YearOfChance, k: int, two: tuple[int, int], whose: tuple[str, str], line: Array) -> float | None:
    """Return how many spreads of an input away two absorbers tie; None = not within reach."""
    places = [place for place, (name, owner, _) in enumerate(year.drawn) if (name, owner) == whose]
    direction: Array = np.zeros(len(year.drawn))
    direction[places] = line[places] if len(places) > 1 else 1.0
    size = float(np.linalg.norm(direction))
    if size == 0:
        return None
    direction /= size
    i, j = two

    def lead(spreads: float) -> float:
        values = year.values((spreads * direction)[None])[k, 0]
        return float(values[i] / values[j] - 1)

    here = float(year.base[k, i] / year.base[k, j] - 1)
    if abs(float(line @ direction)) * _HOPELESS * FARTHEST < abs(here):
        return None
    ties = [float(brentq(lead, 0.0, end, xtol=1e-6)) for end in (-FARTHEST, FARTHEST) if lead(end) * here <= 0]
    return min(ties, key=abs) if ties else None


def _spread(year: YearOfChance, name: str, owner: str, absorbers: Sequence[Absorber]) -> float:
    """Return the standard deviation of an owner's input."""
    spreads = year.shortcut.spreads
    if name in spreads.site:
        return spreads.site[name]
    for absorber, own in zip(absorbers, spreads.absorbers, strict=True):
        if owner in (absorber_owner(absorber), *(junction_owner(absorber, i) for i in range(len(absorber.junctions)))):
            return own[name]
    return 0.0


def _row(name: str, said: str, spreads: float | None, spread: float) -> Row:
    each = BY_NAME[name]
    of_model = name.startswith("model")
    unit = "spreads" if of_model else f"{each.unit}, added" if each.kind == "step" else "times"
    value = at = float("nan")
    if spreads is not None:
        at = spreads
        value = spreads if of_model else float(each.value(spread * spreads))
    found = BEYOND if spreads is None else "tie"
    return {"input": name, "of": said, "unit": unit, "value": value, "spreads": at, "found": found}
