"""Sums of stretches of time, and their means."""

import numpy as np
import pytest

from yieldsim.study import annual


def sums(seed):
    rng = np.random.default_rng(seed)
    shapes = {"light": (12,), "hours": (12,)}
    return annual.Sums(**{name: rng.uniform(1, 2, shapes.get(name, (3, 12))) for name in annual.Sums.__slots__})


@pytest.mark.parametrize("name", annual.Sums.__slots__)
def test_stretches_add_and_years_average(name):
    """Definition, field by field: two stretches of a year together, two years on average, months as a year."""
    one, two = sums(1), sums(2)
    first, second = getattr(one, name), getattr(two, name)
    np.testing.assert_allclose(getattr(annual.added(one, two), name), first + second)
    np.testing.assert_allclose(getattr(annual.mean([one, two]), name), (first + second) / 2)
    np.testing.assert_allclose(getattr(one.year(), name)[..., 0], first.sum(axis=-1))
    assert annual.mean([one]) is one
