"""Perez's shares of sky light against pvlib's form of the same model."""

import numpy as np
import pytest
from pvlib import irradiance

from yieldsim.sky import perez_1990, plane, sun

SKIES = [
    (dni, dhi, zenith) for dni in (0.0, 30.0, 200.0, 600.0, 950.0) for dhi in (5.0, 60.0, 180.0, 400.0)
    for zenith in (5.0, 40.0, 65.0, 80.0)
]  # fmt: skip


@pytest.mark.parametrize(("tilt", "azimuth"), [(30.0, 180.0), (60.0, 120.0), (90.0, 0.0)])
def test_sky_on_a_plane_against_pvlib(tilt, azimuth):
    """Reference: pvlib.irradiance.perez with the coefficients of 1990 for all sites, skies of most classes: the same
    equations, so to rounding, where the sun stands higher than 5 deg and neither side stops at 0."""
    dni, dhi, zenith = np.array(SKIES).T
    extra = np.full_like(dni, 1361.0)
    cosine = np.cos(np.radians(zenith))
    mass = sun.relative_air_mass(cosine)
    theirs = irradiance.perez(tilt, azimuth, dhi, dni, extra, zenith, 180.0, mass, return_components=True)
    near, rim = perez_1990.shares(dni, dhi, extra, cosine)
    light = plane.sky_light(dni[:, None], dhi[:, None], near[:, None], cosine, rim[:, None], np.cos(np.radians(85)))
    incidence = np.maximum(irradiance.aoi_projection(tilt, azimuth, zenith, np.full_like(zenith, 180.0)), 0.0)
    around = (light.direct[:, 0] - dni) * incidence
    usual = (theirs["poa_sky_diffuse"] > 0) & (near < 1)
    assert usual.sum() > 60
    np.testing.assert_allclose(around[usual], theirs["poa_circumsolar"][usual], rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(
        light.rim[usual, 0] * np.sin(np.radians(tilt)), theirs["poa_horizon"][usual], rtol=1e-9, atol=1e-9
    )
    uniform = light.uniform[usual, 0] * plane.isotropic_parts(tilt)[0]
    np.testing.assert_allclose(uniform, theirs["poa_isotropic"][usual], rtol=1e-9, atol=1e-9)
    classes = np.unique(np.searchsorted(perez_1990.CLEARNESS, ((dhi + dni) / dhi)))
    assert len(classes) >= 6


def test_no_light_is_no_error():
    near, rim = perez_1990.shares(np.zeros(3), np.zeros(3), np.full(3, 1361.0), np.array([1.0, 0.5, 0.0]))
    assert np.all(np.isfinite(near) & np.isfinite(rim))
    assert np.all((near >= 0) & (near <= 1))
