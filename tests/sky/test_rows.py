"""Rows: view factors and shade against pvlib, against rays, and what must hold of any rows."""

import numpy as np
import pytest
from hypothesis import given, settings
from pvlib import shading
from pvlib.bifacial import utils

from tests.strategies import row_scenes
from yieldsim.sky import rows
from yieldsim.sky.rows import Rows

FIELD = Rows(2.0, 1.5, 5.0)


@pytest.mark.parametrize("tilt", [0.0, 10.0, 30.0, 60.0, 90.0, 150.0])
@pytest.mark.parametrize("coverage", [0.05, 0.3, 0.5, 0.9])
def test_sky_view_against_pvlib(tilt, coverage):
    """Reference: pvlib.bifacial.utils.vf_row_sky_2d_integ, the integral over the row: to rounding."""
    ours = rows.sky_view(np.cos(np.radians(tilt)), coverage)
    assert ours == pytest.approx(utils.vf_row_sky_2d_integ(tilt, coverage), abs=1e-9)


def test_alone_is_the_limit_of_wide_rows():
    """Closed form: a plane alone sees (1 + cos)/2; rows a million widths apart the same within 1e-6."""
    cosine = np.linspace(-1, 1, 21)
    np.testing.assert_allclose(rows.sky_view(cosine, 0.0), (1 + cosine) / 2, atol=1e-15)
    np.testing.assert_allclose(rows.sky_view(cosine, 1e-6), (1 + cosine) / 2, atol=1e-6)


SUN_BEFORE_ROWS = [
    (tilt, zenith) for tilt in (5.0, 30.0, 60.0, 90.0) for zenith in (20.0, 60.0, 80.0, 88.0) if zenith - tilt > -90
]


@pytest.mark.parametrize(("tilt", "zenith"), SUN_BEFORE_ROWS)
def test_shade_against_pvlib(tilt, zenith):
    """Reference: pvlib.shading.shaded_fraction1d (Martinez-Moreno et al. 2024), sun due south, rows facing it."""
    aoi = np.cos(np.radians(zenith - tilt))
    left = rows.shaded_cosine(np.array(aoi), np.array(np.cos(np.radians(zenith))), 0.4)
    theirs = shading.shaded_fraction1d(
        zenith, 180.0, axis_azimuth=90.0, shaded_row_rotation=tilt, collector_width=2.0, pitch=5.0
    )
    assert 1 - left / aoi == pytest.approx(float(theirs), abs=1e-9)


class TestGroundPattern:
    @pytest.mark.parametrize("tilt", [0.0, 20.0, 45.0, 90.0])
    def test_views_against_pvlib(self, tilt):
        """Reference: pvlib.bifacial.utils.vf_row_ground_2d_integ, whole and for segments of ground: 1e-3, as asked.

        pvlib's fronts face the other way; its rear is its front at 180 deg less the tilt.
        """
        pattern = rows.ground_pattern(FIELD, (float(np.radians(tilt)),))
        edges = np.linspace(-0.5, 0.5, pattern.seen.shape[-1])
        for low, high in ((-0.5, 0.5), (-0.5, -0.2), (-0.2, 0.1), (0.1, 0.5)):
            ours = [np.diff(np.interp([low, high], edges, pattern.seen[face, 0]))[0] for face in (0, 1)]
            rear = utils.vf_row_ground_2d_integ(180 - tilt, 0.4, 1.5, 5.0, g0=low, g1=high, max_rows=60)
            front = utils.vf_row_ground_2d_integ(tilt, 0.4, 1.5, 5.0, g0=-high, g1=-low, max_rows=60)
            assert ours[1] == pytest.approx(float(rear), abs=1e-3)
            assert ours[0] == pytest.approx(float(front), abs=1e-3)

    @pytest.mark.parametrize("tilt", [0.0, 20.0, 45.0, 90.0])
    @pytest.mark.parametrize("field", [FIELD, Rows(2.0, 1.2, 2.6), Rows(3.0, 4.0, 12.0)])
    def test_whole_ground_is_the_closed_form(self, tilt, field):
        """Closed form: the cells add up to the crossed-strings view of ground; 1e-3 for rows beyond the last."""
        pattern = rows.ground_pattern(field, (float(np.radians(tilt)),))
        cosine = np.cos(np.radians(tilt))
        for face, side in ((0, 1), (1, -1)):
            whole = rows.sky_view(-side * cosine, field.coverage)
            assert pattern.seen[face, 0, -1] == pytest.approx(float(whole), abs=1e-3)

    @pytest.mark.parametrize("tilt", [0.0, 30.0, 60.0])
    def test_sky_of_the_ground_against_pvlib(self, tilt):
        """Reference: pvlib.bifacial.utils.vf_ground_sky_2d_integ for the mean over a pitch: by reciprocity it is
        1 - coverage (front + rear view of ground)."""
        theirs = utils.vf_ground_sky_2d_integ(tilt, 0.4, 1.5, 5.0, max_rows=60)
        cosine = np.cos(np.radians(tilt))
        ours = 1 - 0.4 * (rows.sky_view(cosine, 0.4) + rows.sky_view(-cosine, 0.4))
        assert float(ours) == pytest.approx(float(theirs), abs=1e-3)
        pattern = rows.ground_pattern(FIELD, (float(np.radians(tilt)),))
        assert 1 - 0.4 * pattern.seen[:, 0, -1].sum() == pytest.approx(float(theirs), abs=1e-3)


def cast(field, tilt, slope, side, rays=3000):
    """View factor of ground in shade, and of ground weighted with hidden sky, by rays from the row."""
    rng = np.random.default_rng(3)
    along = (rng.random(rays) - 0.5) * field.width_m
    t, n = np.array([np.cos(tilt), -np.sin(tilt)]), side * np.array([np.sin(tilt), np.cos(tilt)])
    sine = rng.random(rays) * 2 - 1  # rays by the cosine law in the plane: uniform in the sine
    ray = sine[:, None] * t + np.sqrt(1 - sine**2)[:, None] * n
    start = along[:, None] * t + np.array([0.0, field.height_m])
    down = ray[:, 1] < -1e-9
    reach = np.where(down, -start[:, 1] / np.where(down, ray[:, 1], -1.0), 0.0)
    hit = start[:, 0] + reach * ray[:, 0]
    free = down.copy()
    for k in range(-12, 13):
        if k:
            free &= ~_crosses(start, ray, reach, field, tilt, k)
    shaded = np.zeros(rays, dtype=bool)
    sun = np.array([slope, 1.0])
    ground = np.stack([hit, np.zeros(rays)], axis=1)
    for k in range(-16, 17):
        shaded |= _crosses(ground, np.broadcast_to(sun, ray.shape), np.full(rays, 1e9), field, tilt, k)
    return float(np.mean(free & shaded)), float(np.mean(free))


def _crosses(start, ray, reach, field, tilt, k):
    """Whether rays cross row k within their reach."""
    t, n = np.array([np.cos(tilt), -np.sin(tilt)]), np.array([np.sin(tilt), np.cos(tilt)])
    away = np.array([k * field.pitch_m, field.height_m]) - start
    toward = ray @ n
    with np.errstate(divide="ignore", invalid="ignore"):
        length = (away @ n) / toward
        place = (start + length[:, None] * ray - np.array([k * field.pitch_m, field.height_m])) @ t
    return (
        (np.abs(toward) > 1e-12) & (length > 1e-9) & (length < reach * (1 - 1e-9)) & (np.abs(place) < field.width_m / 2)
    )


@pytest.mark.parametrize("side", [1, -1])
@pytest.mark.parametrize(
    ("tilt", "slope"), [(30.0, 0.8), (30.0, -0.6), (-50.0, 2.5), (90.0, 1.0), (5.0, 0.0), (20.0, 7.0)]
)
def test_shaded_ground_against_rays(side, tilt, slope):
    """Independent: 3000 rays from the row to the ground, each asking whether its ground is in the sun. The scatter of
    as many rays is 0.009 (one standard deviation at a share of one half), so 0.025."""
    angle = np.radians(tilt)
    lost, whole = cast(FIELD, angle, slope, side)
    face = 0 if side == 1 else 1
    pattern = rows.ground_pattern(FIELD, (float(angle),))
    view = rows.sky_view(np.array(-side * np.cos(angle)), FIELD.coverage)
    ratio = np.abs(np.cos(angle) + np.sin(angle) * slope)
    ours = rows.ground_lost(pattern, face, FIELD, np.array(angle), np.array(slope), np.array(ratio), view)
    assert float(view) == pytest.approx(whole, abs=0.025)
    assert float(ours) == pytest.approx(lost, abs=0.025)


def test_a_turning_row_finds_its_ground_between_nodes():
    """Between two rotations 2 deg apart the ground is interpolated: within 2e-3 of working it out there."""
    nodes = tuple(float(x) for x in np.radians(np.arange(-60.0, 61.0, 2.0)))
    table = rows.ground_pattern(FIELD, nodes)
    for degrees, slope in ((13.0, 0.4), (-27.3, 1.3), (58.9, -0.2)):
        angle = np.radians(degrees)
        alone = rows.ground_pattern(FIELD, (float(angle),))
        ratio = np.array(np.abs(np.cos(angle) + np.sin(angle) * slope))
        view = np.array(1.0)
        args = (1, FIELD, np.array(angle), np.array(slope), ratio, view)
        assert float(rows.ground_lost(table, *args)) == pytest.approx(float(rows.ground_lost(alone, *args)), abs=2e-3)


def test_low_rows_see_more_of_their_own_shadow():
    """Direction: the nearer the ground, the more of it is in the row's own shade; a row far up sees almost none."""
    lost = []
    for height in (1.1, 2.0, 5.0, 20.0):
        alone = Rows(2.0, height)
        angle = np.radians(30.0)
        pattern = rows.ground_pattern(alone, (float(angle),))
        view = rows.sky_view(np.array(np.cos(angle)), 0.0)
        ratio = np.array(np.cos(angle))
        lost.append(float(rows.ground_lost(pattern, 1, alone, np.array(angle), np.array(0.0), ratio, view) / view))
    assert np.all(np.diff(lost) < 0)
    assert lost[-1] < 0.05
    assert lost[0] > 0.4


@settings(max_examples=60, deadline=None)
@given(row_scenes())
def test_rows_share_sky_and_sun_with_the_ground(scene):
    """Invariant: fronts, rears and ground together receive one pitch of uniform sky, and at most one pitch of sun."""
    field, tilt, slope = scene
    cosine = np.cos(tilt)
    view = [rows.sky_view(np.array(side * cosine), field.coverage) for side in (1, -1)]
    assert np.all(np.array(view) >= 0)
    assert field.coverage * sum(view) <= 1 + 1e-12
    length = np.hypot(slope, 1.0)
    incidence, above = (np.sin(tilt) * slope + np.cos(tilt)) / length, 1 / length
    taken = rows.shaded_cosine(np.array(np.abs(incidence)), np.array(above), field.coverage)
    assert field.coverage * taken <= above + 1e-12
    pattern = rows.ground_pattern(field, (float(tilt),))
    for face, other in ((0, view[1]), (1, view[0])):
        lost = rows.ground_lost(
            pattern, face, field, np.array(tilt), np.array(slope), np.array(abs(incidence) / above), other
        )
        assert 0 <= lost <= other + 1e-12
        assert 0 <= pattern.sky_lost[face, 0] <= other + 1e-3


@pytest.mark.parametrize("lengths", [(0.0, 1.0, 5.0), (2.0, 0.0, 5.0), (2.0, 1.5, 1.9), (float("nan"), 1.0, None)])
def test_rows_that_cannot_stand_are_refused(lengths):
    with pytest.raises(ValueError, match="m wide"):
        Rows(*lengths)
