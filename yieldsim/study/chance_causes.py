"""Which input causes how much of the spread of each yield, and of the lead of the best."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.study import head_to_head
from yieldsim.study.chance_indices import Index, Samples, indices
from yieldsim.study.chance_inputs import OF_ENERGY
from yieldsim.study.chance_year import MEASURES, YearOfChance
from yieldsim.study.plan import Row

Array = NDArray[np.float64]

TOO_FEW = "too few draws"
LEAST_ROWS = 50  # of the design that tells causes
DRAWS_PER_ROW = 8


@dataclass(frozen=True, slots=True, eq=False)
class _Design:
    """Two independent sets of draws, and the first with one input after the other from the second.

    Parameters
    ----------
    points_a, points_b : (n, n_dimension) arrays
    points_mixed : input -> (n, n_dimension) array
    a, b : (2, n, n_absorber) arrays, the measures there
    mixed : input -> (2, n, n_absorber) array
    """

    points_a: Array
    points_b: Array
    points_mixed: Mapping[str, Array]
    a: Array
    b: Array
    mixed: Mapping[str, Array]

    @classmethod
    def of(cls, year: YearOfChance, first: Array, second: Array, core: Array) -> _Design:
        """Compute the design; inputs that only multiply a finished energy need no new one."""
        count = min(max(len(first) // DRAWS_PER_ROW, LEAST_ROWS), len(first))
        a, b, core_a = first[:count], second[:count], core[:, :count]
        points, mixed = {}, {}
        for name in year.active():
            columns = year.columns(name)
            points[name] = a.copy()
            points[name][:, columns] = b[:, columns]
            mixed[name] = year.values(points[name], core_a if name in OF_ENERGY else None)
        return cls(a, b, points, year.values(a, core_a), year.values(b), mixed)

    def samples(self, year: YearOfChance, k: int, i: int, j: int | None, slopes: Array) -> Samples:
        """Return what the design says of one measure of an absorber, or of its lead over another."""
        base = year.base[k]
        line = slopes[k, :, i] / base[i]
        if j is not None:
            line = base[i] / base[j] * (line - slopes[k, :, j] / base[j])

        def result(values: Array) -> Array:
            return values[k, :, i] / base[i] if j is None else head_to_head.leads(values[k, :, i], values[k, :, j])

        return Samples(
            result(self.a),
            result(self.b),
            {name: result(values) for name, values in self.mixed.items()},
            self.points_a @ line,
            self.points_b @ line,
            {name: points @ line for name, points in self.points_mixed.items()},
            {name: float(np.sum(line[year.columns(name)] ** 2)) for name in self.mixed},
        )


def rows(
    year: YearOfChance, names: Sequence[str], first: Array, second: Array, core: Array, slopes: Array
) -> Iterator[Row]:
    """Yield each input's share of the variance of every absorber's measures, and of the lead of the best.

    Parameters
    ----------
    year : YearOfChance
    names : of its absorbers
    first, second : (n_draw, n_dimension) arrays, independent draws
    core : what `YearOfChance.core` gives for the first
    slopes : from `YearOfChance.slopes`

    Yields
    ------
    rows of ``measure, absorber, other, input, first_order, first_order_low, first_order_high, total, total_low,
    total_high, note``; ``other`` empty = of the absorber's measure, else of its lead over the other
    """
    design = _Design.of(year, first, second, core)
    for k, measure in enumerate(MEASURES):
        subjects: list[tuple[int, int | None]] = [(i, None) for i in range(len(names))]
        if len(names) > 1:
            subjects.append(year.best_two(k))
        for i, j in subjects:
            about: Row = {"measure": measure, "absorber": names[i], "other": "" if j is None else names[j]}
            found = indices(design.samples(year, k, i, j, slopes))
            yield from (about | _row(name, index) for name, index in found.items())


def _row(name: str, index: Index) -> Row:
    return {
        "input": name,
        "first_order": index.first,
        "first_order_low": index.first_low,
        "first_order_high": index.first_high,
        "total": index.total,
        "total_low": index.total_low,
        "total_high": index.total_high,
        "note": "" if index.told else TOO_FEW,
    }
