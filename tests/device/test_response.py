"""Responses: what is refused, how an edge moves."""

import numpy as np
import pytest

from yieldsim.device.gap import steepest_edge_ev
from yieldsim.device.response import Response, at, scaled, shifted, step
from yieldsim.units import photon_energy_ev, wavelength_nm

SOFT = Response(np.array([300, 400, 700, 780, 800, 820, 850.0]), np.array([0.4, 0.9, 0.92, 0.8, 0.4, 0.1, 0.0]))


@pytest.mark.parametrize(
    ("wave", "level", "word"),
    [
        ([300], [0.5], "two or more"),
        ([300, 400, 500], [0.5, 0.5], "shapes"),
        ([[300, 400]], [[0.5, 0.5]], "shapes"),
        ([300, np.nan], [0.5, 0.5], "finite"),
        ([300, 400], [0.5, np.inf], "finite"),
        ([400, 300], [0.5, 0.5], "not fall"),
        ([0, 300], [0.5, 0.5], "positive"),
        ([300, 400], [-0.1, 0.5], "0-1"),
        ([300, 400], [0.5, 1.01], "0-1"),
        ([300, 400], [0, 0], "0-1"),
    ],
)
def test_what_is_no_response_is_refused(wave, level, word):
    with pytest.raises(ValueError, match=word):
        Response(np.array(wave, dtype=float), np.array(level, dtype=float))


def test_a_response_owns_its_numbers():
    wave = np.array([300.0, 400.0])
    made = Response(wave, np.array([0.5, 0.5]))
    wave[0] = 350.0
    assert made.wavelength_nm[0] == 300.0
    with pytest.raises(ValueError, match="read-only"):
        made.quantum_efficiency[0] = 1.0


@pytest.mark.parametrize("gap", [0.2, 4.5, -1.0, np.nan])
def test_a_step_outside_the_bands_is_refused(gap):
    with pytest.raises(ValueError, match="gap of"):
        step(gap)


@pytest.mark.parametrize("shift", [-0.2, -0.01, 0.01, 0.3])
def test_edge_and_tail_move_as_one_and_the_blue_end_stays(shift):
    gap = steepest_edge_ev(SOFT.wavelength_nm, SOFT.quantum_efficiency)
    moved = shifted(SOFT, shift, gap)
    energy, before = photon_energy_ev(moved.wavelength_nm), photon_energy_ev(SOFT.wavelength_nm)
    tail = before <= gap
    assert np.abs(energy[tail] - before[tail] - shift).max() < 1e-12  # rounding
    assert moved.wavelength_nm[0] == pytest.approx(SOFT.wavelength_nm[0], rel=1e-14)
    assert np.all(np.diff(moved.wavelength_nm) > 0)
    assert np.array_equal(moved.quantum_efficiency, SOFT.quantum_efficiency)


def test_a_shift_there_and_back_changes_nothing():
    gap = steepest_edge_ev(SOFT.wavelength_nm, SOFT.quantum_efficiency)
    back = shifted(shifted(SOFT, 0.03, gap), -0.03, gap + 0.03)
    # the weight is linear in energy, so the way back is the exact inverse; rounding only
    assert np.abs(back.wavelength_nm / SOFT.wavelength_nm - 1).max() < 1e-13


def test_a_shifted_step_is_the_step_at_the_other_gap():
    moved = shifted(step(1.12), 0.05, 1.12)
    assert moved.wavelength_nm == pytest.approx(step(1.17).wavelength_nm, rel=1e-14)


def test_an_edge_cannot_leave_its_response():
    with pytest.raises(ValueError, match="cannot move"):
        shifted(step(1.12), 3.5)
    with pytest.raises(ValueError, match="cannot move"):
        shifted(SOFT, -1.6)


def test_reading_and_scaling():
    assert at(SOFT, np.array([250.0, 350.0, 900.0])) == pytest.approx([0.0, 0.65, 0.0], abs=1e-15)
    assert scaled(SOFT, 0.5).quantum_efficiency[2] == 0.46
    with pytest.raises(ValueError, match="0-1"):
        scaled(SOFT, 1.2)
    assert at(step(1.0), np.array([wavelength_nm(1.001), wavelength_nm(0.999)])).tolist() == [1.0, 0.0]
