"""Skylines: closed forms and what cannot be one."""

import numpy as np
import pytest

from yieldsim.sky.horizon import Horizon

UP = np.array([[0.0, 0.0, 1.0]])


def ring(elevation):
    return Horizon((0.0,), (elevation,))


@pytest.mark.parametrize("elevation", [0.0, 5.0, 20.0, 60.0, 90.0])
def test_a_level_face_loses_the_square_of_the_sine(elevation):
    """Closed form: an even skyline hides sin^2 h of a level face's sky."""
    assert ring(elevation).hidden_sky(UP)[0] == pytest.approx(np.sin(np.radians(elevation)) ** 2, abs=1e-6)


@pytest.mark.parametrize("tilt", [0.0, 30.0, 60.0, 90.0, 150.0])
def test_a_skyline_to_the_zenith_hides_all_sky(tilt):
    """Closed form: (1 + cos)/2. The 360 azimuths and 8 heights leave at most 1e-3 at the edge of the face's view."""
    angle = np.radians(tilt)
    hidden = ring(90.0).hidden_sky(np.array([[np.sin(angle), 0.0, np.cos(angle)]]))[0]
    assert hidden == pytest.approx((1 + np.cos(angle)) / 2, abs=1e-3)


def test_a_wall_hides_what_stands_before_it():
    """Closed form: half a ring of elevation h in front of a wall hides (h + sin h cos h)/pi of its view."""
    south = Horizon((90.0, 90.001, 269.999, 270.0), (0.0, 30.0, 30.0, 0.0))
    facing = south.hidden_sky(np.array([[0.0, -1.0, 0.0]]))[0]
    h = np.radians(30.0)
    assert facing == pytest.approx((h + np.sin(h) * np.cos(h)) / np.pi, abs=1e-4)
    assert south.hidden_sky(np.array([[0.0, 1.0, 0.0]]))[0] == pytest.approx(0.0, abs=1e-4)


def test_sun_above_and_behind():
    hill = Horizon((80.0, 100.0, 120.0), (0.0, 10.0, 0.0))
    assert hill.elevation_at(np.array([90.0, 110.0, 300.0])) == pytest.approx([5.0, 5.0, 0.0], abs=1e-9)
    azimuth, height = np.radians(100.0), np.radians([9.9, 10.1])
    toward = np.stack([np.cos(height) * np.sin(azimuth), np.cos(height) * np.cos(azimuth), np.sin(height)], axis=-1)
    assert list(hill.shows(toward)) == [False, True]


def test_skyline_runs_through_north():
    hill = Horizon((10.0, 350.0), (20.0, 0.0))
    assert hill.elevation_at(np.array([0.0, 360.0, 180.0])) == pytest.approx([10.0, 10.0, 10.0], abs=1e-9)


@pytest.mark.parametrize(
    ("azimuth", "elevation"),
    [((), ()), ((0.0,), (1.0, 2.0)), ((10.0, 10.0), (1.0, 2.0)), ((0.0, 360.0), (1.0, 1.0)), ((0.0,), (-1.0,)),
     ((0.0,), (float("nan"),)), ((float("nan"),), (1.0,))],
)  # fmt: skip
def test_what_is_no_skyline_is_refused(azimuth, elevation):
    with pytest.raises(ValueError, match=r"azimuth|elevation"):
        Horizon(azimuth, elevation)
