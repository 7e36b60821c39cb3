"""The answer of a study in three sentences, and where its order departs from the datasheets' order."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import pandas as pd

from yieldsim.study.portfolio import choices
from yieldsim.study.result import StudyResult, ideal_names, records

#: Two absorbers closer than this are not told apart without a chance calculation: the residue of clear and cloudy
#: spectra against independent radiative transfer is 0.3-1.6 % (see the method's list of checks).
DOUBT = 0.01
_MOST_NAMED = 4  # places or pairs named in a sentence; the table holds all


@dataclass(frozen=True, slots=True)
class Answer:
    """The three sentences (each plain text, to be escaped) that a page and a terminal open with.

    Parameters
    ----------
    winner : which absorber, by how much
    certainty : how sure
    ranking : against the datasheet ranking
    """

    winner: str
    certainty: str
    ranking: str


@dataclass(frozen=True, slots=True)
class Place:
    """One site and mounting: its absorbers ordered by energy per area.

    Parameters
    ----------
    name : str, as shown
    site, mounting : str
    rows : rows of ``annual.csv`` of this place, column -> cell, most energy first
    """

    name: str
    site: str
    mounting: str
    rows: Sequence[dict[str, Any]]

    @property
    def best(self) -> str:
        """Name of the absorber with the most energy per area."""
        return str(self.rows[0]["absorber"])

    @property
    def lead(self) -> float:
        """Energy of the best over that of the next, less one; NaN where there is only one."""
        energy = [float(row["energy_kwh_m2"]) for row in self.rows]
        return energy[0] / energy[1] - 1 if len(energy) > 1 and energy[1] > 0 else float("nan")

    def overtakings(self) -> list[tuple[str, str, float]]:
        """Return (ahead, behind, margin) of each pair whose order here reverses that at standard conditions."""
        found = []
        for i, ahead in enumerate(self.rows):
            for behind in self.rows[i + 1 :]:
                energies = float(ahead["energy_kwh_m2"]), float(behind["energy_kwh_m2"])
                if ahead["rank_at_stc"] > behind["rank_at_stc"] and energies[0] > energies[1] > 0:
                    found.append((str(ahead["absorber"]), str(behind["absorber"]), energies[0] / energies[1] - 1))
        return sorted(found, key=lambda pair: -pair[2])


def places(annual: pd.DataFrame) -> list[Place]:
    """Return every site and mounting in the study's order; the mounting is part of the name where there are several."""
    several = annual["mounting"].nunique() > 1
    found = []
    for (site, mounting), rows in annual.groupby(["site", "mounting"], sort=False):
        ordered = rows.sort_values("energy_kwh_m2", ascending=False, kind="stable")
        found.append(
            Place(f"{site} ({mounting})" if several else str(site), str(site), str(mounting), records(ordered))
        )
    return found


def answer(result: StudyResult) -> Answer:
    """Return the three sentences of a study.

    Absorbers of ideal quality are left out where two others remain: a limit no device reaches is no choice.
    """
    ideal = ideal_names(result.resolved)
    chosen = choices(list(result.annual["absorber"]), ideal)
    all_places = places(result.annual[result.annual["absorber"].isin(chosen)])
    out = [name for name in ideal if name not in chosen]
    left_out = f" Left out as ideal, which no device is: {listed(out)}." if out else ""
    return Answer(
        _winner(all_places) + left_out,
        _certainty(all_places, duels(result)),
        _ranking(all_places) + _moved(all_places, result.reference),
    )


def duels(result: StudyResult) -> pd.DataFrame | None:
    """Return the pairs there is a choice between, by energy per area; None where the study drew nothing."""
    table = result.head_to_head
    if table is None or table.empty:
        return None
    left_out = set(result.annual["absorber"]) - choices(list(result.annual["absorber"]), ideal_names(result.resolved))
    kept = ~(table["absorber"].isin(left_out) | table["other"].isin(left_out))
    return table[kept & (table["measure"] == "energy_kwh_m2")] if "measure" in table else table[kept]


def _moved(all_places: Sequence[Place], reference: str) -> str:
    """Return by how much places move absorbers from what their rating promises against the reference."""
    found = []
    for place in all_places:
        yields = {str(row["absorber"]): float(row["specific_yield_kwh_kwp"]) for row in place.rows}
        base = yields.pop(reference, 0.0)
        found += [(value / base - 1, name, place.name) for name, value in yields.items() if base > 0]
    if not found:
        return ""
    low, high = min(found), max(found)
    if low == high:
        return f" Per rated power, {low[1]} yields {signed(low[0])} against {reference}."
    return (
        f" Per rated power, the yield against {reference} lies between {signed(low[0])} ({low[1]} at {low[2]}) "
        f"and {signed(high[0])} ({high[1]} at {high[2]})."
    )


def signed(share: float) -> str:
    """Return a share as a percentage with its sign and one digit."""
    return f"{round(100 * share, 1) + 0.0:+.1f} %".replace("-", "−")


def percent(share: float) -> str:
    """Return a share as a percentage with one digit, never a negative zero."""
    return f"{round(100 * share, 1) + 0.0:.1f} %"


def listed(names: Sequence[str], most: int = _MOST_NAMED) -> str:
    """Return names as a list in words; those beyond ``most`` are counted."""
    shown = list(names[:most])
    if len(names) > most:
        shown.append(f"{len(names) - most} more")
    return shown[0] if len(shown) == 1 else ", ".join(shown[:-1]) + " and " + shown[-1]


def _winner(all_places: Sequence[Place]) -> str:
    by_best: dict[str, list[Place]] = {}
    for place in all_places:
        by_best.setdefault(place.best, []).append(place)
    if len(all_places[0].rows) < 2:
        return f"The study holds one absorber, {all_places[0].best}: there is nothing to compare it with."
    if len(all_places) == 1:
        place = all_places[0]
        return (
            f"At {place.name}, {place.best} yields the most per module area: {_energy(place)} kWh/m² a year, "
            f"{percent(place.lead)} more than the next best, {place.rows[1]['absorber']}."
        )
    if len(by_best) == 1:
        leads = sorted(all_places, key=lambda place: place.lead)
        return (
            f"Per module area, {all_places[0].best} yields the most at every one of the {len(all_places)} places, "
            f"by {percent(leads[0].lead)} ({leads[0].name}) to {percent(leads[-1].lead)} ({leads[-1].name}) "
            "over the next best."
        )
    parts = [
        f"{best} at {listed([f'{place.name} (by {percent(place.lead)})' for place in won])}"
        for best, won in sorted(by_best.items(), key=lambda item: -len(item[1]))
    ]
    return (
        f"Per module area, the best absorber depends on the place: {'; '.join(parts)}; each over the next best there."
    )


def _energy(place: Place) -> str:
    return f"{place.rows[0]['energy_kwh_m2']:,.1f}"


def _certainty(all_places: Sequence[Place], pairs: pd.DataFrame | None) -> str:
    if len(all_places[0].rows) < 2:
        return (
            "Without a second absorber no comparison can be in doubt; the yields themselves can, see the limits below."
        )
    if pairs is not None and not pairs.empty:
        return _chances(all_places, pairs)
    close = [place.name for place in all_places if place.lead < DOUBT]
    base = f"The study holds no chance calculation, so leads below {percent(DOUBT)} should count as a draw"
    if not close:
        return f"{base}; every lead named here is larger."
    if len(close) == len(all_places):
        return f"{base}, and every lead named here is that small."
    return f"{base}: that is so at {listed(close)}."


def _chances(all_places: Sequence[Place], pairs: pd.DataFrame) -> str:
    """Return how probable it is that the best beats the next, from the head-to-head table read either way round."""
    found: dict[str, float] = {}
    for place in all_places:
        best, second = place.best, str(place.rows[1]["absorber"])
        here = pairs[(pairs["site"] == place.site) & (pairs["mounting"] == place.mounting)]
        straight = here[(here["absorber"] == best) & (here["other"] == second)]
        reverse = here[(here["absorber"] == second) & (here["other"] == best)]
        if not straight.empty:
            found[place.name] = float(straight["probability"].iloc[0])
        elif not reverse.empty:
            found[place.name] = 1 - float(reverse["probability"].iloc[0])
    if not found:
        return (
            "How sure each lead over the reference is stands under Chance; the two leaders were not set head to head."
        )
    low, high = min(found, key=lambda name: found[name]), max(found, key=lambda name: found[name])
    said = f"The best beats the next best with a probability of {percent(found[low])}"
    if found[low] != found[high]:
        said += f" ({low}) to {percent(found[high])} ({high})"
    return f"{said}.{_least_sure(next(place for place in all_places if place.name == low), pairs)}"


def _least_sure(place: Place, pairs: pd.DataFrame) -> str:
    """Return in words how far and how surely the best leads at the place where that is least sure."""
    if "verdict" not in pairs:
        return ""
    best, second = place.best, str(place.rows[1]["absorber"])
    at = (pairs["site"] == place.site) & (pairs["mounting"] == place.mounting)
    for row in records(pairs[at & pairs["absorber"].isin([best, second]) & pairs["other"].isin([best, second])]):
        return (
            f" At {place.name}, where it is least sure, {row['absorber']} ahead of {row['other']} is {row['verdict']}: "
            f"by {percent(row['margin_p50'])}, with a probability of 80 % between {percent(row['margin_p90'])} and "
            f"{percent(row['margin_p10'])}; by more than {percent(row['above'])} with "
            f"{percent(row['probability_above'])}."
        )
    return ""


def _ranking(all_places: Sequence[Place]) -> str:
    flips = [(place, pair) for place in all_places for pair in place.overtakings()]
    if not flips:
        where = "At no place" if len(all_places) > 1 else f"At {all_places[0].name} nowhere"
        return f"{where} does the order by energy per area depart from the order of the datasheet efficiencies."
    departing = list(dict.fromkeys(place.name for place, _ in flips))
    share = "every place" if len(departing) == len(all_places) else f"{len(departing)} of {len(all_places)} places"
    share = f"at {share} ({listed(departing)})" if len(all_places) > 1 else f"at {all_places[0].name}"
    place, (ahead, behind, margin) = max(flips, key=lambda flip: flip[1][2])
    ranks = {row["absorber"]: row["rank_at_stc"] for row in place.rows}
    return (
        f"The order by energy per area departs from the order of the datasheet efficiencies {share}; most of all, "
        f"{ahead} (datasheet rank {ranks[ahead]}) comes out {percent(margin)} ahead of {behind} "
        f"(datasheet rank {ranks[behind]}) at {place.name}."
    )
