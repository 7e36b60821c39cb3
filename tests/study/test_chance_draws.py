"""Streams of draws: even, nested, and nothing to do with each other."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from yieldsim.study import chance_draws

COUNT = 400


@pytest.mark.parametrize("count", [25, 50, 100, 200, 400, 800])
def test_each_stratum_holds_one_draw(count):
    values = chance_draws.stream(7, "water_cm", "site A", count)
    assert sorted((values * count).astype(int)) == list(range(count))


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 2**53), st.text(max_size=20), st.text(max_size=20), st.integers(1, 900), st.integers(1, 900))
def test_draws_nest(seed, name, owner, one, other):
    """For any seed, names and numbers of draws: the longer stream begins with the shorter one, inside 0 to 1."""
    fewer, more = sorted((one, other))
    short, long = (chance_draws.stream(seed, name, owner, count) for count in (fewer, more))
    np.testing.assert_array_equal(short, long[:fewer])
    assert np.all((long > 0) & (long < 1))


def test_streams_know_nothing_of_each_other():
    """Independent values have correlations of sd 1/sqrt(n); 4.5 sd is passed once in 147,000, here by 780 pairs."""
    names = [("water_cm", f"site {i}") for i in range(20)] + [(f"input {i}", "all") for i in range(20)]
    values = np.array([chance_draws.normal(7, *each, COUNT) for each in names])
    found = np.corrcoef(values)[np.triu_indices(len(names), 1)]
    assert np.abs(found).max() < 4.5 / np.sqrt(COUNT)
    assert found.std() * np.sqrt(COUNT) == pytest.approx(1.0, abs=0.1)  # 780 values: 0.025 is one sd


def test_neighbours_are_not_tied_as_digits_of_a_counter_tie_them():
    """In scrambled digit reversals draws 2k and 2k + 1 lie in opposite halves in every stream; here that is chance."""
    halves = np.array([chance_draws.stream(3, "albedo", f"site {i}", COUNT) < 0.5 for i in range(30)])
    apart = (halves[:, 0::2] != halves[:, 1::2]).mean()
    assert apart == pytest.approx(0.5, abs=0.02)  # 6000 pairs: 0.0065 is one sd
    together = np.mean(halves[:15] == halves[15:])
    assert together == pytest.approx(0.5, abs=0.02)


def test_another_seed_name_or_owner_is_another_stream():
    first = chance_draws.stream(1, "a", "b", COUNT)
    for other in ((2, "a", "b"), (1, "c", "b"), (1, "a", "c"), (1, "ab", "")):
        assert not np.array_equal(first, chance_draws.stream(*other, COUNT))
    assert not first.flags.writeable


def test_normal_values_have_the_moments_of_the_distribution():
    """The mean lies a tenth of what independent draws would leave (0.05) from 0, the spread within 1 % of 1."""
    values = chance_draws.normal(0, "year", "site A", COUNT)
    assert values.mean() == pytest.approx(0.0, abs=5e-3)
    assert values.std() == pytest.approx(1.0, abs=0.01)


def test_sites_are_tied_as_far_as_the_study_says():
    own = [chance_draws.normal(0, "year", f"site {name}", 6400) for name in "AB"]
    common = chance_draws.normal(0, "year", "every site", 6400)
    for correlation in (0.0, 0.3, 1.0):
        one, other = (chance_draws.tied(values, common, correlation) for values in own)
        assert np.corrcoef(one, other)[0, 1] == pytest.approx(correlation, abs=4 / np.sqrt(6400))
        assert one.std() == pytest.approx(1.0, abs=0.04)
    assert chance_draws.tied(own[0], common, 0.0) is own[0]


def test_things_are_picked_alike_often():
    picked = chance_draws.picked(chance_draws.normal(0, "year", "site A", COUNT), 4)
    assert np.bincount(picked).tolist() == [100, 100, 100, 100]
