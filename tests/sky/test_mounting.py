"""How planes stand: against pvlib's tracker, and what must hold of any stance."""

import numpy as np
import pytest
from pvlib import irradiance, temperature, tracking

from yieldsim.sky import mounting, rows, sun

DAY = np.arange(1_718_841_600, 1_718_841_600 + 86400, 3600, dtype=np.int64)  # 20 June 2024


@pytest.fixture(scope="module")
def course():
    whole = sun.course(DAY, 3600, 35.0, -80.0)
    return whole.only(whole.lit > 0)


def angles(course):
    """Apparent zenith and azimuth of every sub-step [deg]."""
    d = course.direction
    return np.degrees(np.arccos(d[..., 2])), np.degrees(np.arctan2(d[..., 0], d[..., 1])) % 360


@pytest.mark.parametrize("axis", [(180.0, 0.0), (180.0, 12.0), (205.0, 0.0), (20.0, 7.0)])
@pytest.mark.parametrize(("coverage", "most"), [(0.0, 90.0), (0.4, 90.0), (0.5, 55.0)])
def test_against_pvlib_tracker(course, axis, coverage, most):
    """Reference: pvlib.tracking.singleaxis (Anderson & Mikofski 2020): the same equations from angles, to 1e-6 deg."""
    zenith, azimuth = angles(course)
    theirs = tracking.singleaxis(
        zenith.ravel(), azimuth.ravel(), axis_tilt=axis[1], axis_azimuth=axis[0], max_angle=most,
        backtrack=coverage > 0, gcr=coverage or 1.0,
    )  # fmt: skip
    ours = mounting.tracking(course, *axis, most, coverage)
    up = course.up.ravel()
    np.testing.assert_allclose(np.degrees(ours.rotation).ravel()[up], theirs["tracker_theta"][up], atol=1e-6)
    incidence = np.degrees(np.arccos(np.clip(ours.cos_incidence(course.direction), -1, 1))).ravel()
    np.testing.assert_allclose(incidence[up], theirs["aoi"][up], atol=1e-5)
    tilt = np.degrees(np.arccos(ours.cos_tilt())).ravel()
    np.testing.assert_allclose(tilt[up], theirs["surface_tilt"][up], atol=1e-5)


@pytest.mark.parametrize("tilt", [0.0, 30.0, 90.0])
@pytest.mark.parametrize("azimuth", [90.0, 180.0, 317.0])
def test_fixed_against_pvlib(course, tilt, azimuth):
    """Reference: pvlib.irradiance.aoi_projection; the same dot product, to rounding."""
    zenith, sun_azimuth = angles(course)
    ours = mounting.fixed(tilt, azimuth).cos_incidence(course.direction)
    np.testing.assert_allclose(ours, irradiance.aoi_projection(tilt, azimuth, zenith, sun_azimuth), atol=1e-12)


def test_turned_back_rows_do_not_shade_each_other(course):
    """Closed form: backtracking stops where a shadow would begin; while no stop holds it back none falls on a row."""
    stance = mounting.tracking(course, 180.0, 0.0, 90.0, 0.45)
    cosine = stance.cos_incidence(course.direction)
    left = rows.shaded_cosine(cosine, course.direction[..., 2], 0.45)
    np.testing.assert_allclose(left[course.up], cosine[course.up], atol=1e-12)
    straight = mounting.tracking(course, 180.0, 0.0, 90.0, 0.0).cos_incidence(course.direction)
    assert np.any(rows.shaded_cosine(straight, course.direction[..., 2], 0.45)[course.up] < straight[course.up] - 0.1)


def test_level_while_the_sun_is_down(course):
    assert np.all(mounting.tracking(course, 180.0, 0.0, 60.0, 0.3).rotation[~course.up] == 0.0)
    assert np.any(~course.up)


def test_a_tracker_meets_the_sun_more_squarely_than_any_fixed_plane(course):
    best = mounting.tracking(course, 180.0, 0.0, 90.0, 0.0).cos_incidence(course.direction)
    for tilt, azimuth in ((0, 180), (45, 90), (45, 270)):
        fixed = mounting.fixed(tilt, azimuth).cos_incidence(course.direction)
        assert np.all(best[course.up] >= fixed[course.up] - 1e-12)


def test_a_roof_sheds_less_heat():
    """Reference: King et al. (2004) through pvlib's table of coefficients: loss of a close roof mount over that of an
    open rack, W m-2 K-1 from cell to air, glass on both sides; 0.63 to 0.66 from still air to 5 m/s."""
    table = temperature.TEMPERATURE_MODEL_PARAMETERS["sapm"]
    for wind in (0.0, 1.0, 5.0):
        rise = {
            name: float(temperature.sapm_cell(1000.0, 0.0, wind, **table[name]))
            for name in ("open_rack_glass_glass", "close_mount_glass_glass")
        }
        assert rise["open_rack_glass_glass"] / rise["close_mount_glass_glass"] == pytest.approx(
            mounting.ROOF_HEAT_LOSS, abs=0.02
        )
