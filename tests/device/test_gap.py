"""Edges: energy, wavelength, frequency, drift, and where a response puts them."""

import numpy as np
import pytest

from yieldsim.constants import STANDARD_CELL_TEMPERATURE
from yieldsim.device.gap import edge_frequency_hz, edge_wavelength_nm, gap_at, steepest_edge_ev
from yieldsim.units import wavelength_nm


def test_silicon_edge_in_hertz_and_nanometres():
    # common practice, no source: 1.12 eV is 2.7e14 Hz and about 1107-1110 nm
    assert edge_frequency_hz(1.12) == pytest.approx(2.7e14, rel=0.005)  # given to two digits
    assert 1106.5 < edge_wavelength_nm(1.12) < 1110


def test_drift_is_zero_at_standard_temperature_and_signed():
    assert gap_at(1.12, -2.7e-4, STANDARD_CELL_TEMPERATURE) == 1.12
    assert gap_at(1.12, -2.7e-4, STANDARD_CELL_TEMPERATURE + 40) < 1.12
    assert gap_at(1.55, 3e-4, STANDARD_CELL_TEMPERATURE + 40) == pytest.approx(1.562, abs=1e-12)  # rounding


def test_silicon_drift_within_2_mev_of_varshni():
    # Varshni (1967), Physica 34, 149, silicon: Eg = E0 - 7.021e-4 T^2/(T + 1108)
    temperature = np.linspace(240, 370, 27)
    varshni = -7.021e-4 * temperature**2 / (temperature + 1108)
    at_standard = -7.021e-4 * STANDARD_CELL_TEMPERATURE**2 / (STANDARD_CELL_TEMPERATURE + 1108)
    linear = gap_at(0.0, -2.7e-4, temperature)
    assert np.abs(linear - (varshni - at_standard)).max() < 2e-3  # the figure its docstring promises


def test_edge_of_a_step_is_the_step():
    assert steepest_edge_ev(np.array([280.0, 1000.0]), np.array([1.0, 1.0])) == pytest.approx(
        1.239841984, rel=1e-9
    )  # digits of hc/q given here
    wave = np.array([300.0, 900.0, 900.0, 1000.0])
    assert steepest_edge_ev(wave, np.array([0.9, 0.9, 0.0, 0.0])) == pytest.approx(1.3776, rel=1e-4)


@pytest.mark.parametrize("spacing", [0.5, 2.0, 5.0, 10.0])
def test_edge_of_a_sigmoid_is_its_centre_at_any_sampling(spacing):
    wave = np.arange(300.0, 1000.0, spacing)
    level = 0.9 / (1 + np.exp((1.55 - 1239.842 / wave) / 0.015))
    # a sampling of 10 nm is 19 meV here; the centre of gravity must do much better
    assert steepest_edge_ev(wave, level) == pytest.approx(1.55, abs=3e-3)


def test_a_blue_loss_or_a_dip_is_no_edge():
    wave = np.array([300, 310, 320, 400, 420, 430, 500, 850, 880, 920, 960.0])
    level = np.array([0.0, 0.9, 0.9, 0.9, 0.3, 0.9, 0.9, 0.9, 0.5, 0.1, 0.0])
    assert 870 < wavelength_nm(steepest_edge_ev(wave, level)) < 910


def test_a_plateau_that_leans_does_not_drag_the_edge():
    wave = np.arange(300.0, 1001.0, 5.0)
    level = np.interp(wave, [300, 500, 880], [0.9, 0.9, 0.6]) / (1 + np.exp((1.378 - 1239.842 / wave) / 0.006))
    # the lean holds a third of the fall; 5 nm are 8 meV
    assert steepest_edge_ev(wave, level) == pytest.approx(1.378, abs=4e-3)


def test_a_fall_that_lasts_to_the_last_point():
    """Straight down in energy from 1.5 to 1.3 eV, where the curve ends: its middle."""
    energy = np.array([3.0, 1.5, 1.45, 1.4, 1.35, 1.3])
    level = np.array([0.9, 0.9, 0.675, 0.45, 0.225, 0.0])
    assert steepest_edge_ev(wavelength_nm(energy), level) == pytest.approx(1.4, abs=1e-9)
