"""Several sites at once: which absorber, and which gap, serves all of them best, and what one choice gives away."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from yieldsim.study.plan import Row
from yieldsim.study.sweep import STANDARD_SITE

Array = NDArray[np.float64]
Columns = Mapping[str, Sequence[Any]]

MEASURES = ("energy_kwh_m2", "specific_yield_kwh_kwp")


def weights_of(sites: Sequence[str], given: Mapping[str, float] | None) -> dict[str, float]:
    """Return each site's share of the portfolio, summing to 1; all alike where none are given, 0 for those left out."""
    raw = {site: 1.0 if given is None else float(given.get(site, 0.0)) for site in sites}
    total = sum(raw.values())
    return {site: weight / total for site, weight in raw.items()}


def choices(absorbers: Sequence[str], ideal: Sequence[str]) -> set[str]:
    """Return the absorbers one can choose: without ideal ones, which no device is, where two others remain."""
    real = set(absorbers) - set(ideal)
    return real if len(real) > 1 else set(absorbers)


def regret_rows(annual: Columns, weights: Mapping[str, float], ideal: Sequence[str] = ()) -> list[Row]:
    """Return for every site, mounting, absorber and measure how far it stays behind the best one there.

    Parameters
    ----------
    annual : columns of the study's annual table
    weights : share of each site in the portfolio [1]
    ideal : absorbers that stand for a limit no device reaches: no choice, so they are left out where two others remain

    Returns
    -------
    rows of ``site, mounting, measure, absorber, value, best, regret, weight``; regret = 1 - value / best
    """
    chosen = choices(annual["absorber"], ideal)
    kept = [i for i, name in enumerate(annual["absorber"]) if name in chosen]
    annual = {name: [annual[name][i] for i in kept] for name in ("site", "mounting", "absorber", *MEASURES)}
    rows: list[Row] = []
    for measure in MEASURES:
        best: dict[tuple[str, str], float] = {}
        for site, mounting, value in zip(annual["site"], annual["mounting"], annual[measure], strict=True):
            best[site, mounting] = max(best.get((site, mounting), 0.0), float(value))
        for site, mounting, absorber, value in zip(
            annual["site"], annual["mounting"], annual["absorber"], annual[measure], strict=True
        ):
            top = best[site, mounting]
            rows.append(
                {
                    "site": site,
                    "mounting": mounting,
                    "measure": measure,
                    "absorber": absorber,
                    "value": float(value),
                    "best": top,
                    "regret": 1.0 - float(value) / top if top > 0 else 0.0,
                    "weight": weights[site],
                }
            )
    return rows


def portfolio_rows(regrets: Sequence[Row]) -> list[Row]:
    """Return for every mounting, measure and absorber what it does over the whole portfolio.

    Returns
    -------
    rows of ``mounting, measure, absorber, mean_value, mean_regret, worst_regret, worst_site, wins, best_on_average,
    smallest_worst_regret, wins_nowhere``; the last three are 1 or 0, ties share a 1; sites without weight do not count
    """
    groups: dict[tuple[str, str], dict[str, list[Row]]] = {}
    for row in regrets:
        if float(row["weight"]) > 0:
            group = groups.setdefault((str(row["mounting"]), str(row["measure"])), {})
            group.setdefault(str(row["absorber"]), []).append(row)
    found: list[Row] = []
    for (mounting, measure), by_absorber in groups.items():
        told: list[Row] = []
        for absorber, members in by_absorber.items():
            weight, value, regret = (
                np.array([float(row[key]) for row in members]) for key in ("weight", "value", "regret")
            )
            weight = weight / weight.sum()
            worst = int(np.argmax(regret))
            told.append(
                {
                    "mounting": mounting,
                    "measure": measure,
                    "absorber": absorber,
                    "mean_value": float(weight @ value),
                    "mean_regret": float(weight @ regret),
                    "worst_regret": float(regret[worst]),
                    "worst_site": str(members[worst]["site"]),
                    "wins": int(np.count_nonzero(regret == 0)),
                }
            )
        top = max(float(row["mean_value"]) for row in told)
        least = min(float(row["worst_regret"]) for row in told)
        for row in told:
            row["best_on_average"] = int(row["mean_value"] == top)
            row["smallest_worst_regret"] = int(row["worst_regret"] == least)
            row["wins_nowhere"] = int(row["wins"] == 0)
        found += told
    return found


def gap_rows(sweep: Columns, weights: Mapping[str, float]) -> list[Row]:
    """Return the best single gap for the portfolio, and what it costs each site against its own best.

    Returns
    -------
    rows of ``mounting, quality, site, gap_ev, own_gap_ev, energy_kwh_m2, own_energy_kwh_m2, cost``: the portfolio's
    gap, the site's own best gap, the energy of both, and the share given away
    """
    curves: dict[tuple[str, str], dict[str, dict[float, float]]] = {}
    keys = ("mounting", "quality", "site", "gap_ev", "energy_kwh_m2")
    for mounting, quality, site, gap, energy in zip(*(sweep[key] for key in keys), strict=True):
        if site != STANDARD_SITE:
            curves.setdefault((mounting, quality), {}).setdefault(site, {})[float(gap)] = float(energy)
    rows: list[Row] = []
    for (mounting, quality), by_site in curves.items():
        counted = [site for site in by_site if weights[site] > 0]
        if not counted:
            continue
        gaps = list(by_site[counted[0]])
        together = sum(weights[site] * np.array([by_site[site][gap] for gap in gaps]) for site in counted)
        best = gaps[int(np.argmax(together))]
        for site in by_site:
            own = max(by_site[site], key=by_site[site].__getitem__)
            energy, top = by_site[site][best], by_site[site][own]
            rows.append(
                {
                    "mounting": mounting,
                    "quality": quality,
                    "site": site,
                    "gap_ev": best,
                    "own_gap_ev": own,
                    "energy_kwh_m2": energy,
                    "own_energy_kwh_m2": top,
                    "cost": 1 - energy / top if top > 0 else 0.0,
                }
            )
    return rows
