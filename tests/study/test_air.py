"""Where each input of the air comes from, and what is made of it."""

import numpy as np
import pytest

from yieldsim.study import air


@pytest.mark.parametrize(("temp", "dew", "humidity"), [(20.0, 20.0, 100.0), (20.0, 9.27, 50.0), (30.0, 18.44, 50.0)])
def test_humidity_from_the_dew_point(temp, dew, humidity):
    """Psychrometric tables over water, to their last digit: half a percent of humidity."""

    weather = {"temp_air": np.array([temp]), "temp_dew": np.array([dew])}
    assert air._humidity(weather)[0] == pytest.approx(humidity, abs=0.5)


def test_humidity_of_the_file_stands_above_the_dew_point():
    weather = {"relative_humidity": np.array([40.0]), "temp_dew": np.array([20.0]), "temp_air": np.array([20.0])}
    assert air._humidity(weather) is weather["relative_humidity"]
    assert air._humidity({"temp_air": np.array([20.0])}) is None
