"""The compiled power points of single junctions against the plain numpy form they were made from."""

import math
from dataclasses import astuple

import numpy as np
import pytest
from hypothesis import given, settings

from tests.strategies import diodes
from yieldsim.device import diode, points


def constants(one):
    return np.array(
        [one.series_resistance, one.shunt_conductance, one.recombination_voltage, one.built_in_voltage], dtype=float
    )


def many(n, seed=1):
    """Light, saturation current and thermal voltage of hours from dusk to concentrated sun, frost to heat."""
    rng = np.random.default_rng(seed)
    thermal = 8.617e-5 * rng.uniform(230.0, 370.0, n) * rng.uniform(1.0, 2.0, n)
    return np.exp(rng.uniform(np.log(1e-3), np.log(2e3), n)), np.exp(rng.uniform(-70.0, 2.0, n)), thermal


@given(diodes())
@settings(max_examples=60, deadline=None)
def test_single_power_is_that_of_the_plain_form(one):
    """1e-10: the same top of the same curve, each found to the square of its last step."""
    light = one.photocurrent * np.array([1.0, 0.3, 1e-3])
    row = np.ones(3)
    power = points.single_power(light, one.saturation_current * row, one.thermal_voltage * row, constants(one))
    plain = diode.maximum_power(diode.Diode(light, *astuple(one)[1:]))[0]
    assert power == pytest.approx(plain, rel=1e-10, abs=1e-12)


@pytest.mark.parametrize(
    "each",
    [(0.0, 0.0, 0.0, math.inf), (1e-4, 10.0, 0.0, math.inf), (5e-4, 100.0, 0.02, 1.0), (1e-2, 1.0, 0.0, math.inf)],
)
def test_hours_of_every_kind(each):
    """1e-9 relative, or of a nanowatt where next to no light is left after the shunt: rounding of exp(x) - 1."""
    light, saturation, thermal = many(3000)
    plain = diode.maximum_power(diode.Diode(light, saturation, thermal, *each))[0]
    found = points.single_power(light, saturation, thermal, np.array(each))
    np.testing.assert_allclose(found, plain, rtol=1e-9, atol=1e-9)


def test_hours_do_not_know_of_each_other():
    """Bit for bit the same alone, in any chunk and in any order."""
    rows, each = many(500), np.array([2e-4, 5.0, 0.0, math.inf])
    whole = points.single_power(*rows, each)
    for chosen in (slice(3, 4), slice(100, 300), slice(None, None, -1)):
        part = points.single_power(*(np.ascontiguousarray(row[chosen]) for row in rows), each)
        np.testing.assert_array_equal(part, whole[chosen])


def test_dark_is_zero_and_nan_stays_nan():
    light = np.array([0.0, np.nan, 200.0, 200.0, 200.0])
    saturation = np.array([1e-12, 1e-12, np.nan, 1e-12, 1e-12])
    thermal = np.array([0.0257, 0.0257, 0.0257, np.nan, 0.0257])
    power = points.single_power(light, saturation, thermal, np.array([0.0, 0.0, 0.0, math.inf]))
    assert power[0] == 0.0
    assert np.isnan(power[1:4]).all()
    assert power[4] > 0


def test_exponential_and_logarithm():
    """numpy's own, which are good to the last place: what the steps need."""
    x = np.concatenate([-np.geomspace(1e-12, 600.0, 2000), np.geomspace(1e-12, 600.0, 2000)])
    np.testing.assert_allclose([points._expm1(value) for value in x], np.expm1(x), rtol=2e-12)
    np.testing.assert_allclose([points._exp(value) for value in x], np.exp(x), rtol=1e-12)
    y = np.geomspace(1e-300, 1e300, 2000)
    np.testing.assert_allclose([points._log(value) for value in y], np.log(y), rtol=3e-9, atol=3e-9)
    near = 1 + np.linspace(-1e-3, 1e-3, 1000)  # where steps end
    np.testing.assert_allclose([points._log(value) for value in near], np.log(near), rtol=1e-12)


@pytest.mark.parametrize("gap_ev", [0.4, 1.3, 2.0, 3.0])
@pytest.mark.parametrize("each", [(0.0, 0.0, 0.0, math.inf), (3e-4, 20.0, 0.02, 4.0)])
def test_power_from_a_table_of_saturation_currents(each, gap_ev):
    """The same as with the currents interpolated in numpy; beyond its ends too, NaN without temperature."""
    hot, cold, steps = 1 / 398.15, 1 / 218.15, 256
    inverse = np.linspace(hot, cold, steps + 1)
    table = 20.0 - gap_ev / 8.617e-5 * inverse
    heat = np.random.default_rng(4).uniform(210.0, 400.0, 700)
    light = many(700)[0]
    thermal = 1.2 * 8.617e-5
    saturation = np.exp(20.0 - gap_ev / 8.617e-5 / heat)  # a straight table: interpolated without error
    expected = points.single_power(light, saturation, thermal * heat, np.array(each))
    heat[3] = np.nan
    found = points.junction_power(light, heat, table, hot, (cold - hot) / steps, thermal, np.array(each))
    assert np.isnan(found[3])
    np.testing.assert_allclose(np.delete(found, 3), np.delete(expected, 3), rtol=1e-9)
