"""The sun's course against pvlib's solar position, and its averages."""

import numpy as np
import pandas as pd
import pytest
from pvlib import solarposition

from yieldsim.sky import sun

YEAR = np.arange(1_704_067_200, 1_704_067_200 + 366 * 86400, 3600, dtype=np.int64)  # 2024


@pytest.mark.parametrize(("latitude", "longitude"), [(36.1, -80.0), (-33.0, 151.0), (70.0, 25.0), (0.0, 0.0)])
def test_sub_steps_follow_the_accurate_position(latitude, longitude):
    """Reference: pvlib's position (Reda & Andreas 2004) at every sub-step, not only at the middle.

    0.02 deg: the hour angle turns at its mean rate and declination stands still within the hour; refraction at 12 degC.
    """
    course = sun.course(YEAR[::7], 3600, latitude, longitude)
    for step in (0, 5, 11):
        moments = pd.to_datetime(YEAR[::7] + 150 + 300 * step, unit="s", utc=True)
        expected = solarposition.get_solarposition(moments, latitude, longitude)
        up = expected["apparent_elevation"].to_numpy() > 0.1
        east, north, height = course.direction[up, step].T
        elevation = np.degrees(np.arcsin(height))
        assert np.max(np.abs(elevation - expected["apparent_elevation"].to_numpy()[up])) < 0.02
        azimuth = np.degrees(np.arctan2(east, north))
        off = (azimuth - expected["azimuth"].to_numpy()[up] + 180) % 360 - 180
        assert np.max(np.abs(off) * np.cos(np.radians(elevation))) < 0.02


@pytest.mark.parametrize("elevation_m", [0.0, 4000.0])
def test_middle_of_the_interval_by_the_full_series(elevation_m):
    """Reference: pvlib's algorithm at every moment, where ours sums its series once a day: 1e-6 deg."""
    minute = YEAR[5::37] + 1234
    course = sun.course(minute, 60, 48.0, 11.0, elevation_m, 1013.25)
    moments = pd.to_datetime(minute + 30, unit="s", utc=True)
    expected = solarposition.spa_python(
        moments, 48.0, 11.0, elevation_m, 101325.0, 12.0, delta_t=69.0, atmos_refract=0.5667
    )
    up = expected["apparent_elevation"].to_numpy() > 1.0
    elevation, azimuth = (np.radians(expected[name].to_numpy()[up]) for name in ("apparent_elevation", "azimuth"))
    level = np.cos(elevation)
    direction = np.stack([level * np.sin(azimuth), level * np.cos(azimuth), np.sin(elevation)], axis=-1)
    assert np.max(np.abs(course.direction[up, 0] - direction)) < np.radians(1e-6)


def test_moments_far_apart():
    """Hours of many years, none next to another, are each what they are alone."""
    scattered = YEAR[0] + np.arange(-30, 30, dtype=np.int64) * 86400 * 211 + 43200
    whole = sun.course(scattered, 3600, 40.0, 0.0)
    for i in (0, 17, 59):
        alone = sun.course(scattered[i : i + 1], 3600, 40.0, 0.0)
        np.testing.assert_allclose(alone.direction[0], whole.direction[i], atol=1e-12)


def test_directions_have_unit_length():
    course = sun.course(YEAR[:48], 3600, 45.0, 7.0)
    np.testing.assert_allclose(np.linalg.norm(course.direction, axis=-1), 1.0, rtol=1e-9)  # rounding of the refraction


def test_lit_share_and_mean_over_the_lit_part():
    course = sun.course(YEAR[:240], 3600, 45.0, 7.0)
    partly = (course.lit > 0) & (course.lit < 1)
    assert partly.any()
    heights = np.where(course.up, course.direction[..., 2], 0).sum(axis=1)
    lit = course.lit > 0
    np.testing.assert_allclose(course.cos_zenith[lit] * course.up.sum(axis=1)[lit], heights[lit], rtol=1e-12)
    assert np.all(course.cos_zenith[~lit] == 0)


def test_hours_equal_the_mean_of_their_quarters():
    """Invariant: an hour's light is that of its parts; the same sub-steps are taken, so only rounding remains."""
    hours = sun.course(YEAR[:24], 3600, 52.0, 5.0)
    quarters = sun.course(np.arange(YEAR[0], YEAR[0] + 86400, 900), 900, 52.0, 5.0)
    whole = hours.lit * hours.cos_zenith
    parts = (quarters.lit * quarters.cos_zenith).reshape(-1, 4).mean(axis=1)
    np.testing.assert_allclose(parts, whole, atol=5e-5)  # the turning axis is set once an hour or once a quarter


def test_polar_night_and_day():
    december = sun.course(YEAR[-240:], 3600, 78.0, 15.0)
    june = sun.course(YEAR[24 * 160 : 24 * 170], 3600, 78.0, 15.0)
    assert not december.up.any()
    assert june.up.all()


def test_earth_sun_distance_swings_by_three_percent():
    """Common practice, no source: 1.034 in early January, 0.967 in early July."""
    course = sun.course(YEAR[::24], 3600, 0.0, 0.0)
    assert course.earth_sun.max() == pytest.approx(1.034, abs=0.001)
    assert course.earth_sun.min() == pytest.approx(0.967, abs=0.001)
    assert course.earth_sun.argmax() < 10


def test_air_mass_of_the_published_table():
    """Kasten & Young (1989), table: 1.00 overhead, 1.5 at 48.2 deg, 5.6 at 80 deg, 38 at the horizon; its last
    digits."""
    mass = sun.relative_air_mass(np.cos(np.radians([0.0, 48.236, 80.0, 90.0])))
    np.testing.assert_allclose(mass, [1.0, 1.5, 5.58, 38.0], rtol=3e-3)
    assert np.all(np.diff(mass) > 0)


def test_ozone_air_mass_is_below_the_air_mass_at_low_sun():
    low = np.cos(np.radians(85.0))
    assert 1 < sun.ozone_air_mass(low) < sun.relative_air_mass(low)
