"""The compiled power points against the plain numpy forms they were made from."""

import math
from dataclasses import astuple

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.strategies import stacks
from yieldsim.device import diode, kernel, series


def constants(one):
    return np.array(
        [one.series_resistance, one.shunt_conductance, one.recombination_voltage, one.built_in_voltage], dtype=float
    )


@given(stacks(), st.booleans())
@settings(max_examples=60, deadline=None)
def test_stack_power_is_that_of_the_plain_form(links, in_series):
    share = np.array([1.0, 0.2, 0.01])
    hourly = [
        series.Link(
            diode.Diode(link.diode.photocurrent * share, *astuple(link.diode)[1:]), link.emission, link.thermal_voltage
        )
        for link in links
    ]
    plain = series.maximum_power(hourly)[0] if in_series else series.separate_power(hourly)
    assert compiled(hourly, in_series) == pytest.approx(plain, rel=1e-10, abs=0)  # each stops within 1e-9 V of the top


def compiled(links, in_series):
    n = len(links[0].diode.photocurrent)

    def rows(values):
        return np.array([np.broadcast_to(value, n) for value in values], dtype=float)

    return kernel.stack_power(
        rows([link.diode.photocurrent for link in links]),
        rows([link.diode.saturation_current for link in links]),
        rows([link.diode.thermal_voltage for link in links]),
        np.array([constants(link.diode) for link in links]),
        rows([link.emission for link in links]),
        np.broadcast_to(links[0].thermal_voltage, n).astype(float),
        in_series,
    )


def test_dark_is_zero_and_nan_stays_nan():
    light = np.array([0.0, np.nan, 200.0, 200.0])
    saturation = np.array([1e-12, 1e-12, np.nan, 1e-12])
    thermal, plain = np.full(4, 0.0257), np.array([0.0, 0.0, 0.0, math.inf])
    for in_series in (True, False):
        power = kernel.stack_power(
            np.array([light, light]),
            np.array([saturation, saturation]),
            np.array([thermal, thermal]),
            np.array([plain, plain]),
            np.zeros((2, 4)),
            thermal,
            in_series,
        )
        assert power[0] == 0.0
        assert np.isnan(power[1:3]).all()
        assert power[3] > 0


@pytest.mark.parametrize("x", [-40.0, -1.5, -1.0, -1e-9, 0.0, 1e-9, 0.7, 1.0, 1.0001, 30.0, 300.0])
def test_short_cuts_of_the_library_functions(x):
    assert kernel._expm1(x) == pytest.approx(math.expm1(x), rel=1e-15, abs=0)
    if x > -1:
        assert kernel._log1p(x) == pytest.approx(math.log1p(x), rel=1e-15, abs=0)
