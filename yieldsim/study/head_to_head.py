"""One absorber against another over all draws: by how much, how surely, and in which rank."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from yieldsim.study.plan import Row

Array = NDArray[np.float64]

SAME = 1e-12  # a lead below this share is rounding: a tie
#: Probability from which a lead is called so; the words of the IPCC's guidance note on uncertainty (Mastrandrea et al.
#: 2010, from memory), where "as likely as not" ends at two thirds.
VERDICTS = ((0.99, "virtually certain"), (0.9, "very likely"), (0.66, "likely"), (0.0, "as likely as not"))


def leads(one: Array, other: Array) -> Array:
    """Return how far one absorber is ahead in each draw, (n,) [1], as a share of the other; 0 for a tie."""
    lead = one / other - 1
    return np.asarray(np.where(np.abs(lead) < SAME, 0.0, lead))


def probability_above(lead: Array, margin: float) -> float:
    """Return the probability that a lead is above a margin; a tie with it counts one half."""
    off = np.where(np.abs(lead - margin) < SAME, 0.0, lead - margin)
    return float(np.mean(off > 0) + np.mean(off == 0) / 2)


def verdict(probability: float) -> str:
    """Return what a probability above one half is called."""
    return next(word for least, word in VERDICTS if probability >= least)


def rows(names: Sequence[str], values: Array, margin: float) -> list[Row]:
    """Return one row per pair of absorbers, the one with the higher median first, the best ones first.

    Parameters
    ----------
    names : sequence of str
    values : (n_draw, n_absorber) array, one measure
    margin : float [1], lead that the study asks about

    Returns
    -------
    rows of ``absorber, other, probability, probability_error, above, probability_above, margin_p90, margin_p50,
    margin_p10, verdict``; margins as shares of the other's, P90 exceeded with 90 % probability; the error of a
    probability is that of independent draws
    """
    order = np.argsort(-np.median(values, axis=0), kind="stable")
    found: list[Row] = []
    for i, j in combinations(order, 2):
        lead = leads(values[:, i], values[:, j])
        probability = probability_above(lead, 0.0)
        p90, p50, p10 = (float(value) for value in np.quantile(lead, (0.1, 0.5, 0.9)))
        found.append(
            {
                "absorber": names[i],
                "other": names[j],
                "probability": probability,
                "probability_error": float(np.sqrt(probability * (1 - probability) / len(lead))),
                "above": margin,
                "probability_above": probability_above(lead, margin),
                "margin_p90": p90,
                "margin_p50": p50,
                "margin_p10": p10,
                "verdict": verdict(max(probability, 1 - probability)),
            }
        )
    return found


def rank_rows(names: Sequence[str], values: Array) -> list[Row]:
    """Return one row per absorber and rank: how probable it is; those that tie share their ranks evenly."""
    chances = rank_chances(values)
    return [
        {"absorber": name, "rank": rank + 1, "probability": float(chances[i, rank])}
        for i, name in enumerate(names)
        for rank in range(len(names))
    ]


def rank_chances(values: Array) -> Array:
    """Return the probability of each rank of each absorber, (n_absorber, n_rank) [1], from (n_draw, n_absorber)."""
    n_draw, n = values.shape
    chances: Array = np.zeros((n, n))
    for i in range(n):
        lead = values / values[:, i : i + 1] - 1
        tied = np.abs(lead) < SAME
        above = ((lead > 0) & ~tied).sum(axis=1)
        shared = tied.sum(axis=1)  # itself among them
        for ranks in range(int(shared.max())):
            inside = shared > ranks
            np.add.at(chances[i], above[inside] + ranks, 1.0 / shared[inside])
    return np.asarray(chances / n_draw)
