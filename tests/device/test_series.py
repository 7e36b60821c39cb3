"""Junctions in series: power points against a plain search, limits, coupling, properties."""

from dataclasses import fields, replace

import numpy as np
import pytest
from hypothesis import given, settings
from scipy.optimize import brentq, minimize_scalar

from tests.strategies import stacks
from yieldsim.constants import THERMAL_EV_PER_K
from yieldsim.device import diode, series
from yieldsim.device.diode import Diode
from yieldsim.device.series import Link

THERMAL = THERMAL_EV_PER_K * 298.15


def hourly(links):
    """Return links of one hour as links over (1,) arrays."""
    return [
        Link(replace(link.diode, photocurrent=np.array([link.diode.photocurrent])), link.emission, link.thermal_voltage)
        for link in links
    ]


def plain_voltage(links, current):
    """Return a stack's voltage at a current, junction by junction with a bracketing root finder."""
    total, gained = 0.0, 0.0
    for link in links:
        one = replace(link.diode, photocurrent=link.diode.photocurrent + gained)

        def missing(voltage, one=one):
            return diode.curve(one, voltage)[0] - current

        low, high = -1.0, one.thermal_voltage * np.log1p(one.photocurrent / one.saturation_current) + 1e-9
        while missing(low) < 0:
            low *= 4
            if low < -1e4:
                return -1e4
        voltage = brentq(missing, low, high, xtol=1e-14)
        total += voltage - current * one.series_resistance
        gained = link.emission * np.expm1(min(voltage / link.thermal_voltage, 500.0))
    return total


def plain_power(links):
    """Return a stack's greatest power by a bounded search over the current."""
    low, high = 0.0, 2 * sum(link.diode.photocurrent for link in links)
    for _ in range(100):
        middle = (low + high) / 2
        low, high = (middle, high) if plain_voltage(links, middle) > 0 else (low, middle)
    found = minimize_scalar(
        lambda current: -current * plain_voltage(links, current),
        bounds=(0, low),
        method="bounded",
        options={"xatol": 1e-12},
    )
    return -found.fun


@given(stacks())
@settings(max_examples=15, deadline=None)
def test_power_point_against_a_plain_search(links):
    # the search's own 1e-9 of the power: the top is flat, and its steps are 1e-12 of the current
    assert series.maximum_power(hourly(links))[0][0] == pytest.approx(plain_power(links), rel=1e-8)


@given(stacks())
@settings(max_examples=40, deadline=None)
def test_curve_falls_from_open_to_short_circuit(links):
    several = hourly(links)
    power, current, voltage = (each[0] for each in series.maximum_power(several))
    opened, short = series.open_circuit(several)[0], series.short_circuit(several)[0]
    assert 0 < current < short
    assert 0 < voltage < opened
    assert power == pytest.approx(current * voltage, rel=1e-12, abs=0)
    steps = np.linspace(0, short, 60)
    wide = [
        replace(link, diode=replace(link.diode, photocurrent=np.full(60, link.diode.photocurrent))) for link in links
    ]
    resistance = sum(link.diode.series_resistance for link in links)
    steps[-2:] = short * (1 - 1e-9), short * (1 + 1e-9)  # either side: without a shunt the fall there is sheer
    curve = series.state_at(wide, steps).voltage.sum(axis=0) - steps * resistance
    assert np.all(np.diff(curve) < 0)
    assert curve[-2] > 0 > curve[-1]
    assert np.all(curve * steps <= power * (1 + 1e-10))


@given(stacks())
@settings(max_examples=60, deadline=None)
def test_four_terminals_are_never_below_series(links):
    for several in (hourly(links), hourly([replace(link, emission=0.0) for link in links])):
        # coupled points settle to 1e-9 of the power in their rounds
        assert series.separate_power(several)[0] >= series.maximum_power(several)[0][0] * (1 - 2e-9)


def test_coupled_points_chosen_together_beat_each_for_itself():
    top, bottom = pair(255.0, 180.0, 1.0)
    alone, _, voltage = diode.maximum_power(top.diode)
    lit = bottom.diode.photocurrent + top.emission * np.expm1(voltage / THERMAL)
    each = alone + diode.maximum_power(replace(bottom.diode, photocurrent=lit))[0]
    together = series.separate_power([top, bottom])
    assert 0 < together[0] - each[0] < 0.02 * each[0]

    def total(inside):
        current, voltage = diode.curve(top.diode, inside)
        lit = bottom.diode.photocurrent + top.emission * np.expm1(inside / THERMAL)
        return current * voltage + diode.maximum_power(replace(bottom.diode, photocurrent=lit))[0]

    searched = total(np.linspace(voltage[0] - 0.06, voltage[0] + 0.06, 4001)).max()
    assert together[0] == pytest.approx(searched, rel=1e-7)  # steps of 0.03 mV, a thousandth of kT/q, squared


@given(stacks())
@settings(max_examples=40, deadline=None)
def test_coupling_never_lowers_power(links):
    dark = hourly([replace(link, emission=0.0) for link in links])
    coupled = hourly(links)
    # a top driven backwards emits less than in the dark; at 0.1 W/m2 that takes 1e-10 of the bottom's current
    assert series.maximum_power(coupled)[0][0] >= series.maximum_power(dark)[0][0] * (1 - 1e-9)
    assert series.separate_power(coupled)[0] >= series.separate_power(dark)[0] * (1 - 1e-9)


def pair(top, bottom, coupling=0.0, **rest):
    emission = coupling * 1e-22
    return [
        Link(Diode(np.atleast_1d(top), 1e-22, THERMAL, **rest), emission, THERMAL),
        Link(Diode(np.atleast_1d(bottom), 1e-13, THERMAL, **rest), 0.0, THERMAL),
    ]


def test_one_junction_is_the_junction():
    one = Diode(np.array([50.0, 200.0, 300.0]), 1e-12, THERMAL, 1e-4, 0.5)
    expected = diode.maximum_power(one)
    got = series.maximum_power([Link(one, 0.0, THERMAL)])
    for left, right in zip(got, expected, strict=True):
        assert left == pytest.approx(right, rel=1e-10)  # the power point's promise; current and voltage trade there


def test_equal_junctions_double_the_voltage():
    one = Diode(np.array([50.0, 200.0, 300.0]), 1e-12, THERMAL, 1e-4, 0.5)
    twins = [Link(one, 0.0, THERMAL)] * 2
    # identical power-point currents: series and separate agree to the 1e-9
    assert series.maximum_power(twins)[0] == pytest.approx(2 * diode.maximum_power(one)[0], rel=1e-9)
    assert series.maximum_power(twins)[0] == pytest.approx(series.separate_power(twins), rel=1e-9)


def test_matched_short_circuit_currents_cost_less_than_a_thousandth():
    twins = pair([200.0, 20.0], [200.0, 20.0])
    series_power, separate = series.maximum_power(twins)[0], series.separate_power(twins)
    assert np.all(series_power <= separate)
    assert series_power == pytest.approx(separate, rel=1e-3)  # the limit


@pytest.mark.parametrize("coupling", [0.3, 1.0])
def test_coupling_does_nothing_while_the_top_limits(coupling):
    plain, coupled = pair(150.0, 200.0), pair(150.0, 200.0, coupling)
    # at the power point the top emits a few per cent of its current into a bottom that has more than enough: only the
    # bottom's voltage rises, by kT/q ln(1 + a tenth), 2 mV of 2 V
    assert series.maximum_power(coupled)[0] == pytest.approx(series.maximum_power(plain)[0], rel=2e-3)
    assert series.short_circuit(coupled) == pytest.approx(series.short_circuit(plain), rel=1e-6)


def test_full_coupling_shares_the_surplus_of_an_ideal_top():
    # all of an ideal top's recombination reaches the bottom: J = J_bottom + (J_top - J), as in Friedman et al. (2013)
    assert series.short_circuit(pair(260.0, 180.0, 1.0)) == pytest.approx(220.0, rel=1e-6)
    assert series.short_circuit(pair(260.0, 180.0, 0.5)) == pytest.approx((180 + 0.5 * 260) / 1.5, rel=1e-6)


def test_a_shunt_makes_the_limit_soft():
    hard = series.short_circuit(pair(260.0, 180.0))
    soft = series.short_circuit(pair(260.0, 180.0, shunt_conductance=20.0))
    assert hard == pytest.approx(180.0, rel=1e-9)
    assert 181 < soft[0] < 260


def test_dark_is_zero_and_nan_stays_nan():
    links = pair([0.0, np.nan, 200.0, 200.0], [0.0, 200.0, np.nan, 200.0], 0.5)
    for each in series.maximum_power(links):
        assert each[0] == 0.0
        assert np.isnan(each[1:3]).all()
        assert each[3] > 0
    assert np.isnan(series.separate_power(links)).tolist() == [False, True, True, False]


def test_a_dark_junction_in_a_lit_stack_leaves_almost_nothing():
    links = pair([0.0, 200.0], [200.0, 0.0])
    assert np.all(series.maximum_power(links)[0] < 1e-6)


def test_neighbours_do_not_matter():
    rng = np.random.default_rng(11)
    links = pair(rng.uniform(0.01, 300, 500), rng.uniform(0.01, 300, 500), 0.7, shunt_conductance=0.4)
    together = series.maximum_power(links)[0]
    for at in (0, 17, 499):
        alone = [
            replace(link, diode=replace(link.diode, photocurrent=link.diode.photocurrent[at : at + 1]))
            for link in links
        ]
        assert series.maximum_power(alone)[0][0] == pytest.approx(together[at], rel=1e-11)  # settled to 1e-9 V


def test_joined_stacks_are_computed_as_apart():
    first, second = pair([200.0, 100.0], [180.0, 120.0]), pair([50.0], [60.0], 0.5, series_resistance=1e-4)
    apart = np.concatenate([series.maximum_power(first)[0], series.maximum_power(second)[0]])
    assert series.maximum_power(series.joined([first, second]))[0] == pytest.approx(apart, rel=1e-11)
    assert {field.name for field in fields(Link)} == {"diode", "emission", "thermal_voltage"}  # all of them joined


def test_stacks_of_other_sizes_cannot_be_joined():
    one = pair(np.full(2, 200.0), np.full(2, 210.0))
    with pytest.raises(ValueError, match="shorter"):
        series.joined([one, one[:1]])
