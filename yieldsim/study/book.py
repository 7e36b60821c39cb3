"""What one mounting of a site adds up to: parts of a year into years, years into their mean."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

from yieldsim.study import annual
from yieldsim.study.annual import Sums
from yieldsim.study.plan import Row

_NAMES = ("site", "mounting", "absorber")
_SWEPT = ("poa_kwh_m2", "energy_kwh_m2")


@dataclass(slots=True)
class Book:
    """Sums of one mounting, a part of a year at a time.

    Parameters
    ----------
    years : Sums of each year so far
    rows : table -> its rows, measures summed over all years so far
    """

    years: list[Sums] = field(default_factory=list)
    rows: dict[str, list[Row]] = field(default_factory=dict)

    def add(self, sums: Sums, *, new_year: bool) -> None:
        """Add a part's sums to its year."""
        if new_year:
            self.years.append(sums)
        else:
            self.years[-1] = annual.added(self.years[-1], sums)

    def add_rows(self, table: str, rows: list[Row]) -> None:
        """Add a part's rows, whose measures are energies."""
        known = self.rows.get(table)
        self.rows[table] = rows if known is None else _summed(known, rows, _measures(table, known))

    def mean(self) -> Sums:
        """Return the mean year."""
        return annual.mean(self.years)

    def mean_rows(self, table: str) -> list[Row]:
        """Return the rows of the mean year; none of a table that was not kept."""
        rows = self.rows.get(table, [])
        count = len(self.years)
        if count == 1:
            return rows
        return [row | {name: float(row[name]) / count for name in _measures(table, rows)} for row in rows]


def _measures(table: str, rows: Sequence[Row]) -> list[str]:
    """Return the columns that are energies: all of a ledger and of what is sold, light and yield of a sweep."""
    if table in ("ledger", "sold"):
        return [name for name in rows[0] if name not in _NAMES] if rows else []
    return list(_SWEPT)


def _summed(first: Sequence[Row], second: Sequence[Row], measures: Sequence[str]) -> list[Row]:
    """Return rows of one order with their measures added."""
    return [
        one | {name: float(one[name]) + float(two[name]) for name in measures}
        for one, two in zip(first, second, strict=True)
    ]
