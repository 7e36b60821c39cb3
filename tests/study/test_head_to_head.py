"""Probabilities, leads and ranks, against what can be counted."""

import numpy as np
import pytest

from yieldsim.study import head_to_head


def test_leads_and_ties_are_counted():
    """Of four draws one is won, one lost, two tie: 1/4 + 2/8 = 1/2."""
    values = np.array([[102.0, 100.0], [98.0, 100.0], [100.0, 100.0], [100.0 * (1 + 1e-14), 100.0]])
    row = head_to_head.rows(["one", "two"], values, 0.01)[0]
    assert row["probability"] == 0.5
    assert row["probability_above"] == 0.25
    assert (row["margin_p50"], row["verdict"]) == (0.0, "as likely as not")


def test_a_lead_of_just_the_margin_counts_one_half():
    lead = np.array([0.01, 0.02, 0.0, 0.01])
    assert head_to_head.probability_above(lead, 0.01) == 0.5


def test_the_better_one_stands_first_and_margins_are_ordered():
    random = np.random.default_rng(1)
    values = random.normal([100.0, 103.0, 101.0], 1.0, (4000, 3))
    found = head_to_head.rows(["a", "b", "c"], values, 0.01)
    assert [(row["absorber"], row["other"]) for row in found] == [("b", "c"), ("b", "a"), ("c", "a")]
    for row in found:
        assert row["margin_p90"] <= row["margin_p50"] <= row["margin_p10"]
        assert row["probability"] >= row["probability_above"]
        assert row["probability"] >= 0.5
    # two normal values of sd 1 that lie 2 apart: the normal distribution at 2/sqrt(2); 4 standard errors
    assert found[0]["probability"] == pytest.approx(0.92135, abs=4 * found[0]["probability_error"])
    assert found[0]["verdict"] == "very likely"


def test_independent_equals_are_even():
    values = np.random.default_rng(2).normal(100.0, 1.0, (4000, 2))
    row = head_to_head.rows(["a", "b"], values, 0.0)[0]
    assert row["probability"] == pytest.approx(0.5, abs=4 * 0.5 / np.sqrt(4000))


def test_ranks_are_shared_by_those_that_tie():
    values = np.array([[3.0, 1.0, 1.0], [1.0, 1.0, 1.0]])
    chances = head_to_head.rank_chances(values)
    np.testing.assert_allclose(chances, [[2 / 3, 1 / 6, 1 / 6], [1 / 6, 5 / 12, 5 / 12], [1 / 6, 5 / 12, 5 / 12]])


def test_every_rank_and_every_absorber_sum_to_one():
    values = np.random.default_rng(3).normal(100.0, 1.0, (500, 7)).round(1)  # rounded: many ties
    chances = head_to_head.rank_chances(values)
    np.testing.assert_allclose(chances.sum(axis=0), 1.0, rtol=1e-12)
    np.testing.assert_allclose(chances.sum(axis=1), 1.0, rtol=1e-12)
    rows = head_to_head.rank_rows([str(i) for i in range(7)], values)
    assert len(rows) == 49


@pytest.mark.parametrize(
    ("probability", "word"),
    [(1.0, "virtually certain"), (0.95, "very likely"), (0.7, "likely"), (0.6, "as likely as not")],
)
def test_words(probability, word):
    assert head_to_head.verdict(probability) == word
