"""Water, haze, ozone and pressure against pvlib and published values."""

import numpy as np
import pandas as pd
import pytest
from pvlib import atmosphere as pvlib_atmosphere
from pvlib import clearsky

from yieldsim.sky import atmosphere


@pytest.mark.parametrize(("latitude", "longitude"), [(36.1, -79.95), (-33.9, 18.4), (89.9, 179.9), (-60.0, -179.9)])
def test_turbidity_is_read_from_the_same_pixel_as_pvlib_does(latitude, longitude):
    """Reference: pvlib.clearsky.lookup_linke_turbidity; the same number to the byte it is stored in."""
    months = pd.DatetimeIndex([f"2021-{month:02d}-15" for month in range(1, 13)])
    expected = clearsky.lookup_linke_turbidity(months, latitude, longitude, interp_turbidity=False)
    np.testing.assert_array_equal(atmosphere.turbidity_climatology(latitude, longitude), expected.to_numpy())


def test_turbidity_three_is_a_slightly_hazy_sky():
    """physics of Kasten (1996): a Linke turbidity of 3 with 2 cm of water is an AOD500 of about 0.085 (prototype
    figure)."""
    found = atmosphere.aod500_from_turbidity(np.array([3.0]), np.array([2.0]), np.array([1.14]))
    assert found[0] == pytest.approx(0.085, abs=0.002)


def test_turbidity_is_inverted():
    """Closed form: the turbidity of the depth found is the one given, by pvlib's forward formulas."""
    given = np.array([2.5, 4.0, 6.0])
    aod500 = atmosphere.aod500_from_turbidity(given, np.full(3, 2.0), np.full(3, 1.3))
    aod380 = aod500 * (380 / 500) ** -1.3
    broadband = pvlib_atmosphere.bird_hulstrom80_aod_bb(aod380, aod500)
    back = pvlib_atmosphere.kasten96_lt(2.0, 2.0, broadband)
    np.testing.assert_allclose(back, given, rtol=1e-3)  # the table's step of 0.005 in depth


def test_ozone_has_the_known_shape():
    """van Heuklon (1979): about 0.235 atm-cm at the equator all year; northern spring above autumn, south reversed."""
    days = np.arange(1, 366)
    np.testing.assert_allclose(atmosphere.ozone_van_heuklon(0.0, 10.0, days), 0.235, atol=1e-9)
    north = atmosphere.ozone_van_heuklon(50.0, 10.0, days)
    south = atmosphere.ozone_van_heuklon(-50.0, 10.0, days)
    assert 80 < days[north.argmax()] < 150
    assert 260 < days[south.argmax()] < 330
    assert np.all((north > 0.25) & (north < 0.45) & (south > 0.2) & (south < 0.45))


def test_pressure_falls_with_height():
    """ISO 2533:1975 table: 101325 Pa at 0 m, 79495 at 2000 m, 57728 at 4500 m; its last digits."""
    found = [atmosphere.pressure_at(height) for height in (0.0, 2000.0, 4500.0)]
    np.testing.assert_allclose(found, [101325.0, 79495.0, 57728.0], rtol=2e-4)


def test_water_rises_with_humidity_and_stays_in_bounds():
    water = atmosphere.water_from_humidity(np.array([20.0, 20.0, -60.0, 45.0]), np.array([30.0, 90.0, 1.0, 100.0]))
    assert water[0] < water[1]
    assert np.all((water >= 0.05) & (water <= 8.0))
    assert np.isnan(atmosphere.water_from_humidity(np.array([np.nan]), np.array([50.0])))[0]


def test_broadband_depth_is_inverted():
    aod500 = np.array([0.05, 0.4])
    broadband = pvlib_atmosphere.bird_hulstrom80_aod_bb(aod500 * (380 / 500) ** -1.14, aod500)
    np.testing.assert_allclose(atmosphere.aod500_from_broadband(broadband, 1.14), aod500, rtol=1e-12)
