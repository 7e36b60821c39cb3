"""Light on a plane: view factors, circumsolar light, incidence."""

import numpy as np
import pytest
from pvlib import iam, irradiance

from yieldsim.sky import plane, sun

DAY = np.arange(1_718_841_600, 1_718_841_600 + 86400, 3600, dtype=np.int64)  # 20 June 2024


@pytest.fixture(scope="module")
def course():
    whole = sun.course(DAY, 3600, 45.0, 7.0)
    return whole.only(whole.lit > 0)


def light(course, beam=0.6, diffuse=0.2):
    n = len(course.lit)
    return np.full((n, 4), beam), np.full((n, 4), diffuse), np.full((n, 4), 0.5), np.full(n, 0.2)


def test_level_plane_sees_the_horizontal(course):
    """Closed form: at tilt 0 the plane holds beam cos z + diffuse, and no ground."""
    beam, diffuse, share, albedo = light(course)
    parts = plane.on_plane(beam, diffuse, share, course, albedo, 0.0, 180.0)
    high = course.cos_zenith > 0.02
    np.testing.assert_allclose(
        parts.total()[high], (beam[:, 0] * course.cos_zenith + diffuse[:, 0])[high] * 4, rtol=1e-12
    )
    assert np.all(parts.ground == 0)


def test_isotropic_limit_and_view_factors(course):
    """Closed form: without circumsolar light a plane sees (1 + cos)/2 of the sky and (1 - cos)/2 of the ground."""
    beam, diffuse, _, albedo = light(course, beam=0.0)
    parts = plane.on_plane(beam, diffuse, 0 * diffuse, course, albedo, 60.0, 180.0)
    np.testing.assert_allclose(parts.sky, 0.75 * diffuse)
    np.testing.assert_allclose(parts.ground, 0.25 * 0.2 * diffuse)
    assert sum(plane.isotropic_parts(33.0)) == pytest.approx(1.0)


def test_against_pvlib_hay_davies():
    """Reference: pvlib.irradiance.haydavies with the same anisotropy; the equations are the same, so to rounding."""
    diffuse, beam, extra = np.array([[100.0]]), np.array([[600.0]]), 1360.0
    ours, isotropic = plane.sky_on_plane(diffuse, beam / extra, np.array([0.9 / 0.6]))
    whole = ours + isotropic * plane.isotropic_parts(30.0)[0]
    theirs = irradiance.haydavies(30.0, 180.0, 100.0, 600.0, extra, projection_ratio=0.9 / 0.6)
    assert whole[0, 0] == pytest.approx(float(theirs), rel=1e-12)


def test_behind_the_plane_is_exactly_dark(course):
    """A wall facing north at noon in June gets no beam, to the bit."""
    beam, diffuse, share, albedo = light(course)
    parts = plane.on_plane(beam, diffuse, share, course, albedo, 90.0, 0.0)
    noon = int(np.argmax(course.cos_zenith))
    assert np.all(parts.beam[noon] == 0.0)
    assert parts.cos_aoi[noon] == 0.0


def test_incidence_modifier_against_pvlib():
    """Reference: pvlib.iam.martin_ruiz; the same formula."""
    angle = np.array([0.0, 30.0, 60.0, 80.0, 89.0])
    ours = plane.incidence_modifier_beam(np.cos(np.radians(angle)), 0.16)
    np.testing.assert_allclose(ours, iam.martin_ruiz(angle, 0.16), rtol=1e-9)
    assert plane.incidence_modifier_beam(np.array(0.0), 0.16) == 0.0


def test_entered_beam_lies_between_none_and_all(course):
    share = plane.entered_beam(course, 30.0, 180.0, 0.16)
    assert np.all((share >= 0) & (share <= 1))
    assert share.max() > 0.95


def test_diffuse_modifier_is_below_one():
    sky, ground = plane.incidence_modifier_diffuse(30.0, 0.16)
    assert 0.5 < ground < sky < 1.0
