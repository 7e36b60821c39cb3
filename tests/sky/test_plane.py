"""Light on a plane: sun, sky and ground against pvlib, and what the glass lets through."""

import numpy as np
import pytest
from pvlib import iam, irradiance

from yieldsim.sky import mounting, plane, sight, sun

DAY = np.arange(1_718_841_600, 1_718_841_600 + 86400, 3600, dtype=np.int64)  # 20 June 2024


@pytest.fixture(scope="module")
def course():
    whole = sun.course(DAY, 3600, 45.0, 7.0)
    return whole.only(whole.lit > 0)


def sky(course, beam=0.6, diffuse=0.2, around=0.5, rim=None):
    n = len(course.lit)
    rim = None if rim is None else np.full((n, 4), rim)
    return plane.sky_light(
        np.full((n, 4), beam), np.full((n, 4), diffuse), np.full((n, 4), around), course.cos_zenith, rim
    )


def front(course, tilt, azimuth):
    return sight.of_face(sight.FRONT, mounting.fixed(tilt, azimuth), course)


def on(course, tilt, azimuth, **light):
    return plane.on_plane(sky(course, **light), front(course, tilt, azimuth), np.full(len(course.lit), 0.2))


def test_level_plane_sees_the_horizontal(course):
    """Closed form: at tilt 0 the plane holds beam cos z + diffuse in every hour, to the horizon, and no ground."""
    parts = on(course, 0.0, 180.0, rim=0.3)
    np.testing.assert_allclose(parts.total(), (0.6 * course.cos_zenith + 0.2) * 4, rtol=1e-12)
    np.testing.assert_allclose(parts.bands().sum(axis=1), parts.total(), rtol=1e-12)
    assert np.all(parts.ground == 0)


def test_isotropic_limit_and_view_factors(course):
    """Closed form: without circumsolar light a plane sees (1 + cos)/2 of the sky and (1 - cos)/2 of the ground."""
    parts = on(course, 60.0, 180.0, beam=0.0, around=0.0)
    np.testing.assert_allclose(parts.sky, 0.75 * 0.2, rtol=1e-12)
    np.testing.assert_allclose(parts.ground, 0.25 * 0.2 * 0.2, rtol=1e-12)
    assert sum(plane.isotropic_parts(33.0)) == pytest.approx(1.0, rel=1e-15)


def test_against_pvlib_hay_davies():
    """Reference: pvlib.irradiance.haydavies with the same anisotropy; the equations are the same, so to rounding."""
    diffuse, beam, extra, cosine = np.array([[100.0]]), np.array([[600.0]]), 1360.0, np.array([0.6])
    light = plane.sky_light(beam, diffuse, beam / extra, cosine)
    ours = (light.direct - beam) * 0.9 + light.uniform * plane.isotropic_parts(30.0)[0]
    theirs = irradiance.haydavies(30.0, 180.0, 100.0, 600.0, extra, projection_ratio=0.9 / 0.6)
    assert ours[0, 0] == pytest.approx(float(theirs), rel=1e-12)


@pytest.mark.parametrize("low", [0.5, 0.1, 1e-4, 0.0])
def test_light_is_neither_made_nor_lost_on_the_horizontal(low):
    """Invariant: whatever the split, direct cos z + uniform = beam cos z + diffuse, also with the sun on the rim."""
    cosine = np.array([low])
    beam, diffuse = np.array([[0.3, 500.0]]), np.array([[40.0, 3.0]])
    light = plane.sky_light(beam, diffuse, np.array([[0.9, 0.2]]), cosine)
    np.testing.assert_allclose(light.direct * low + light.uniform, beam * low + diffuse, rtol=1e-12)
    assert np.all(light.uniform >= 0)


@pytest.mark.parametrize("level", [0.0, 0.1, 0.5, 0.95, 1.0])
def test_shares_are_brought_to_a_level(level):
    """Definition: the share of all light is the one wanted, every band's stays between 0 and 1."""
    rng = np.random.default_rng(1)
    around, diffuse = rng.random((20, 12)), rng.random((20, 12)) * 100
    found = plane.at_level(around, diffuse, np.full(20, level))
    np.testing.assert_allclose((found * diffuse).sum(axis=1), level * diffuse.sum(axis=1), rtol=1e-12, atol=1e-12)
    assert np.all((found >= 0) & (found <= 1))
    assert np.all(plane.at_level(around, 0 * diffuse, np.full(20, level)) >= 0)


def test_behind_the_plane_is_exactly_dark(course):
    """A wall facing north at noon in June gets no beam, to the bit, through glass or not."""
    parts = on(course, 90.0, 0.0)
    noon = int(np.argmax(course.cos_zenith))
    assert np.all(parts.beam[noon] == 0.0)
    assert np.all(parts.sight.cos_aoi[noon] == 0.0)
    bare, glazed = plane.entered(parts, course, None), plane.entered(parts, course, 0.16)
    np.testing.assert_allclose(bare, parts.bands(), rtol=1e-15)
    assert np.all((glazed[noon] > 0) & (glazed[noon] < bare[noon]))


def test_incidence_modifier_against_pvlib():
    """Reference: pvlib.iam.martin_ruiz; the same formula."""
    angle = np.array([0.0, 30.0, 60.0, 80.0, 89.0])
    ours = plane.incidence_modifier_beam(np.cos(np.radians(angle)), 0.16)
    np.testing.assert_allclose(ours, iam.martin_ruiz(angle, 0.16), rtol=1e-9)
    assert plane.incidence_modifier_beam(np.array(0.0), 0.16) == 0.0


@pytest.mark.parametrize(("tilt", "azimuth"), [(0, 180), (30, 180), (90, 90), (90, 0)])
def test_the_glass_takes_some_light_of_each_kind(course, tilt, azimuth):
    parts = on(course, tilt, azimuth)
    bare, glazed = plane.entered(parts, course, None), plane.entered(parts, course, 0.16)
    assert np.all((glazed <= bare) & (glazed >= 0.5 * bare - 1e-12))
    assert np.all(plane.entered(parts, course, 0.08) >= glazed)


@pytest.mark.parametrize("tilt", [20.0, 90.0])
def test_sky_and_ground_lose_at_the_glass_as_hemispheres_do(course, tilt):
    """Reference: pvlib.iam.martin_ruiz_diffuse on a uniform sky without sun; the same shares, to rounding."""
    parts = on(course, tilt, 180.0, beam=0.0, around=0.0)
    theirs = iam.martin_ruiz_diffuse(tilt, 0.16)
    expected = parts.sky * theirs["sky"] + parts.ground * theirs["ground"]
    np.testing.assert_allclose(plane.entered(parts, course, 0.16), expected, rtol=1e-12)


def test_diffuse_modifier_of_a_looking_down_face_is_that_of_its_mirror():
    """Reference: Martin & Ruiz (2013): sky and ground change places at 180 deg less the tilt."""
    sky_share, ground_share = plane.incidence_modifier_diffuse(30.0, 0.16)
    mirrored = plane.incidence_modifier_diffuse(150.0, 0.16)
    assert [float(sky_share), float(ground_share)] == pytest.approx([float(each) for each in mirrored[::-1]], rel=1e-9)
    assert 0.5 < ground_share < sky_share < 1.0
