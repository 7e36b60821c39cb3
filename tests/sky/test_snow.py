"""Snow on the modules against pvlib's form of the same model."""

import numpy as np
import pandas as pd
import pytest
from pvlib import snow as published

from yieldsim.sky import snow

HOURS = 24 * 60


@pytest.fixture(scope="module")
def winter():
    """Two invented months: bursts of snow that settles and melts, light, and air around freezing."""
    rng = np.random.default_rng(5)
    burst = np.where(rng.random(HOURS) < 0.02, rng.uniform(0.5, 12, HOURS), 0.0)
    depth, found = 0.0, []
    for fallen in burst:
        depth = max(depth * 0.995 - 0.02, 0.0) + fallen
        found.append(depth)
    hour = np.arange(HOURS) % 24
    light = np.maximum(np.sin((hour - 6) / 12 * np.pi), 0.0) * rng.uniform(50, 700, HOURS)
    temp = -4 + 8 * np.sin(np.arange(HOURS) / 90) + rng.normal(0, 1, HOURS)
    return np.array(found), light, temp


@pytest.mark.filterwarnings("ignore:.*infer_freq")  # pvlib's own call of pandas
@pytest.mark.parametrize("tilt", [10.0, 35.0, 60.0])
def test_against_pvlib(winter, tilt):
    """Reference: pvlib.snow.coverage_nrel with the depth on the ground: the same rules, so to rounding."""
    depth, light, temp = winter
    index = pd.date_range("2021-01-01", periods=HOURS, freq="h")
    series = [pd.Series(values, index) for values in (snow.snowfall(depth), light, temp, depth)]
    theirs = published.coverage_nrel(series[0], series[1], series[2], tilt, snow_depth=series[3])
    ours = snow.coverage(depth, light, temp, np.full(HOURS, tilt), 1.0)
    np.testing.assert_allclose(ours, theirs.to_numpy(), atol=1e-9)
    assert 0.05 < ours.mean() < 0.95


def test_steeper_planes_are_free_sooner(winter):
    depth, light, temp = winter
    mean = [snow.coverage(depth, light, temp, np.full(HOURS, tilt), 1.0).mean() for tilt in (5, 20, 45, 70)]
    assert np.all(np.diff(mean) < 0)
    assert np.all(snow.coverage(depth, light, temp, np.full(HOURS, 90.0), 1.0) == 0.0)


def test_no_snow_no_cover(winter):
    _, light, temp = winter
    assert np.all(snow.coverage(np.zeros(HOURS), light, temp, np.full(HOURS, 30.0), 1.0) == 0)
    assert np.all(snow.coverage(np.full(HOURS, np.nan), light, temp, np.full(HOURS, 30.0), 1.0) == 0)


def test_it_is_gone_with_the_snow_on_the_ground():
    """A level row sheds nothing; it is free once less than 1 cm lies on the ground, until snow falls again."""
    depth = np.array([0.0, 4.0, 3.0, 0.9, 1.5, 1.2, 8.0, 8.0])
    found = snow.coverage(depth, np.full(8, 100.0), np.full(8, 5.0), np.zeros(8), 1.0)
    assert list(found) == [0.0, 1.0, 1.0, 0.0, 0.0, 0.0, 1.0, 1.0]


def test_gaps_in_depth_are_no_snowfall():
    """A depth that is given once a day is held in between; its return is not taken for new snow."""
    depth = np.array([5.0, np.nan, np.nan, 5.0, np.nan, 9.0, np.nan])
    assert list(snow.held(depth)) == [5.0, 5.0, 5.0, 5.0, 5.0, 9.0, 9.0]
    assert list(snow.snowfall(snow.held(depth))) == [0.0, 0.0, 0.0, 0.0, 0.0, 4.0, 0.0]
    assert list(snow.held(np.array([np.nan, 3.0]))) == [0.0, 3.0]
