"""Cell temperature."""

import numpy as np
import pytest
from pvlib.temperature import faiman as pvlib_faiman

from yieldsim.constants import CELSIUS_ZERO
from yieldsim.device.thermal import faiman


def test_against_pvlib():
    light, air, wind = np.array([0.0, 300.0, 1100.0]), np.array([-10.0, 15.0, 40.0]), np.array([0.0, 3.0, 12.0])
    expected = pvlib_faiman(light, air, wind, 25.0, 6.84) + CELSIUS_ZERO
    assert faiman(light, air + CELSIUS_ZERO, wind, 25.0, 6.84) == pytest.approx(expected, abs=1e-10)  # same formula


def test_dark_is_air_and_wind_cools():
    assert faiman(0.0, 283.15, 1.0, 25.0, 6.84) == 283.15
    assert faiman(800.0, 283.15, 1.0, 25.0, 6.84) > faiman(800.0, 283.15, 5.0, 25.0, 6.84) > 283.15
    assert np.isnan(faiman(np.nan, 283.15, 1.0, 25.0, 6.84))
