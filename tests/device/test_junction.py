"""Junctions: what is refused, temperature, quality, moved gaps."""

import math
from dataclasses import replace

import numpy as np
import pytest

from yieldsim.config import library
from yieldsim.constants import STANDARD_CELL_TEMPERATURE, THERMAL_EV_PER_K
from yieldsim.device import diode
from yieldsim.device.gap import steepest_edge_ev
from yieldsim.device.junction import (
    LIMITS,
    Junction,
    constants,
    diode_at,
    moved_to_gap,
    response_at,
    saturation_current,
    standard_photocurrent,
)
from yieldsim.device.response import step

IDEAL = Junction(1.34, step(1.34))


@pytest.mark.parametrize("name", LIMITS)
def test_every_field_is_held_to_its_limits(name):
    low, high = LIMITS[name]
    values = {"gap_ev": 1.34, "response": step(1.34), "built_in_v": 2.0}
    wrong = [low - 1.0, math.nan] + ([high + 1.0] if math.isfinite(high) else [])
    for value in wrong:
        with pytest.raises(ValueError, match=f"{name} is"):
            Junction(**(values | {name: value}))


def test_all_faults_are_named_at_once():
    with pytest.raises(ValueError, match=r"ideality.*series_resistance"):
        Junction(1.34, step(1.34), ideality=0.5, series_resistance_ohm_cm2=-1)


@pytest.mark.parametrize(("recombination", "built_in"), [(0.05, math.inf), (0.4, 1.0), (1e-9, 1.0), (7.7e-73, 0.94)])
def test_an_i_layer_needs_a_field(recombination, built_in):
    with pytest.raises(ValueError, match="recombination_v"):
        Junction(1.7, step(1.7), recombination_v=recombination, built_in_v=built_in)


def test_an_i_layer_keeps_the_measured_current_at_short_circuit():
    junction = Junction(1.7, step(1.7), recombination_v=0.06, built_in_v=1.2)
    at = diode_at(junction, 200.0, STANDARD_CELL_TEMPERATURE)
    assert diode.short_circuit(at) == pytest.approx(200.0, rel=1e-12)  # rounding
    plain = diode_at(Junction(1.7, step(1.7)), 200.0, STANDARD_CELL_TEMPERATURE)
    assert diode.maximum_power(at)[0] < 0.95 * diode.maximum_power(plain)[0]


@pytest.mark.parametrize("ideality", [1.0, 1.4, 2.0])
def test_open_circuit_voltage_is_the_radiative_one_less_the_efficiency(ideality):
    collected = standard_photocurrent(IDEAL.response)
    junction = Junction(1.34, step(1.34), 1e-4, ideality)
    voltage = diode.open_circuit(diode_at(junction, collected, STANDARD_CELL_TEMPERATURE))
    radiative = diode.open_circuit(diode_at(IDEAL, collected, STANDARD_CELL_TEMPERATURE))
    lost = THERMAL_EV_PER_K * STANDARD_CELL_TEMPERATURE * math.log(1e4)
    # the one beside exp(V/a), left out of the definition, is 1e-9 V at ideality 2
    assert radiative - voltage == pytest.approx(lost, abs=1e-8)


def test_hot_edges_move_and_the_saturation_current_rises():
    silicon = library.entry("c-si").absorber.junctions[0]
    cold, hot = response_at(silicon, 278.15), response_at(silicon, 318.15)
    moved = steepest_edge_ev(cold.wavelength_nm, cold.quantum_efficiency) - steepest_edge_ev(
        hot.wavelength_nm, hot.quantum_efficiency
    )
    # weighted pieces of the edge above the gap move a little less than the gap itself, see `response.shifted`
    assert moved == pytest.approx(-40 * silicon.gap_shift_ev_per_k, rel=0.05)
    levels = saturation_current(silicon, np.array([278.15, 298.15, 318.15]))
    assert np.all(np.diff(np.log(levels)) > 1)
    assert saturation_current(silicon, 298.15) == pytest.approx(levels[1], rel=1e-12, abs=0)
    assert np.isnan(saturation_current(silicon, np.array([np.nan, 300.0]))).tolist() == [True, False]


def test_moved_to_a_gap_keeps_quality_and_moves_the_edge():
    silicon = library.entry("c-si").absorber.junctions[0]
    moved = moved_to_gap(silicon, 1.6)
    assert moved.gap_ev == 1.6
    assert moved.external_radiative_efficiency == silicon.external_radiative_efficiency
    before = steepest_edge_ev(silicon.response.wavelength_nm, silicon.response.quantum_efficiency)
    after = steepest_edge_ev(moved.response.wavelength_nm, moved.response.quantum_efficiency)
    assert after - before == pytest.approx(0.48, abs=0.01)  # points above the gap move a little less
    with pytest.raises(ValueError, match="cannot move"):
        moved_to_gap(silicon, 4.2)
    same = moved_to_gap(IDEAL, 1.6)
    assert same.response.wavelength_nm == pytest.approx(step(1.6).wavelength_nm, rel=1e-14)


def test_constants_are_in_si_units():
    """By hand: 1 ohm cm2 is 1e-4 ohm m2, 1000 ohm cm2 of shunt are 10 siemens per m2; no shunt conducts nothing."""
    one = Junction(1.1, step(1.1), series_resistance_ohm_cm2=1.0, shunt_resistance_ohm_cm2=1000.0)
    assert constants(one)[:2] == pytest.approx([1e-4, 10.0], rel=1e-12)
    assert constants(replace(one, shunt_resistance_ohm_cm2=np.inf))[1] == 0.0
