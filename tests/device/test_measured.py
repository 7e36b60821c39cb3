"""Curves as real files are: every flaw is mended or refused, and told."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from yieldsim.config import library
from yieldsim.constants import PHOTON_EV_NM
from yieldsim.device.balance import radiative_current
from yieldsim.device.junction import standard_photocurrent
from yieldsim.device.measured import cleaned, edge_ev
from yieldsim.device.response import at

WAVE = np.arange(300.0, 1001.0, 5.0)
GAP = 1.55
LEVEL = 0.9 / (1 + np.exp((GAP - PHOTON_EV_NM / WAVE) / 0.015)) * (1 - np.exp(-(WAVE - 280) / 40))


def told(measured, words):
    return any(words in finding for finding in measured.findings)


def test_a_clean_curve_is_left_alone():
    measured = cleaned(WAVE, LEVEL, "eqe")
    kept = WAVE < 850
    assert np.array_equal(at(measured.response, WAVE[kept]), LEVEL[kept])
    assert measured.gap_ev == pytest.approx(GAP, abs=2e-3)  # a sampling of 5 nm is 10 meV
    assert all("cut to 0" in finding for finding in measured.findings)


def test_per_cent_micrometres_disorder_repeats_and_blanks():
    order = np.random.default_rng(3).permutation(len(WAVE))
    wave = np.concatenate([WAVE[order], [600.0, np.nan, 700.0]]) / 1000
    level = np.concatenate([LEVEL[order], [LEVEL[60] + 0.02, 0.5, np.nan]]) * 100
    measured = cleaned(wave, level, "eqe")
    for words in ("per cent", "micrometres", "sorted", "1 repeated", "2 points without a number"):
        assert told(measured, words), words
    assert at(measured.response, np.array([600.0]))[0] == pytest.approx(LEVEL[60] + 0.01, rel=1e-12)
    assert measured.gap_ev == pytest.approx(GAP, abs=2e-3)


@pytest.mark.parametrize("scale", [1.0, 1000.0])
def test_spectral_response_becomes_quantum_efficiency(scale):
    measured = cleaned(WAVE, LEVEL * WAVE / PHOTON_EV_NM * scale, "response")
    kept = WAVE < 850
    assert at(measured.response, WAVE[kept]) == pytest.approx(LEVEL[kept], rel=1e-12)
    assert told(measured, "mA/W") == (scale > 1)


@given(st.integers(0, 10_000))
@settings(max_examples=30, deadline=None)
def test_noise_moves_neither_edge_nor_current_nor_the_dark_current(seed):
    noisy = LEVEL + np.random.default_rng(seed).normal(0, 0.004, len(WAVE))
    measured = cleaned(WAVE, noisy, "eqe")
    clean = cleaned(WAVE, LEVEL, "eqe")
    assert measured.gap_ev == pytest.approx(GAP, abs=8e-3)  # noise of 0.4 % on a fall of 0.9 over 60 meV
    assert standard_photocurrent(measured.response) == pytest.approx(standard_photocurrent(clean.response), rel=3e-3)
    dark, expected = (
        radiative_current(each.response.wavelength_nm, each.response.quantum_efficiency, 298.15)
        for each in (measured, clean)
    )
    # without the cut, noise of 0.4 % near 1.25 eV would add a factor of hundreds; a factor of 3 is 28 mV
    assert 1 / 3 < dark / expected < 3
    assert told(measured, "cut to 0")


def test_stray_light_far_below_the_edge_is_cut_too():
    measured = cleaned(WAVE, LEVEL + 0.01, "eqe")
    assert told(measured, "tail below 0.03 cut to 0")
    assert at(measured.response, np.array([900.0, 950.0])).tolist() == [0.0, 0.0]


def test_holes_and_missing_ends_are_told():
    hole = (WAVE < 450) | (WAVE > 560)
    measured = cleaned(WAVE[hole], LEVEL[hole], "eqe")
    assert told(measured, "no points from 445 to 565 nm")
    cut = cleaned(WAVE[20:103], LEVEL[20:103], "eqe")
    assert told(cut, "no points below 400 nm")
    assert told(cut, "no points beyond 810 nm")


def test_values_a_little_off_are_set_right_and_told():
    level = LEVEL.copy()
    level[50], level[-1] = 1.03, -0.002
    measured = cleaned(WAVE, level, "eqe")
    assert told(measured, "1 values above 1")
    assert told(measured, "1 negative")
    assert at(measured.response, WAVE[50:51])[0] == 1.0


@pytest.mark.parametrize(
    ("wave", "level", "kind", "word"),
    [
        (WAVE[:4], LEVEL[:4], "eqe", "at least 5"),
        (WAVE, LEVEL[:-1], "eqe", "unequal"),
        (WAVE * np.nan, LEVEL, "eqe", "0 usable"),
        (WAVE * 50, LEVEL, "eqe", "100 to 20000"),
        (WAVE, LEVEL * 1.4, "eqe", "cannot exceed 1"),
        (WAVE, LEVEL * 200, "eqe", "0-100 %"),
        (WAVE, LEVEL * 1e-3, "eqe", "another unit"),
        (WAVE, LEVEL, "response", "cannot exceed 1"),
        (WAVE[:60], LEVEL[:60], "eqe", "before it falls"),
    ],
)
def test_what_cannot_be_a_response_is_refused(wave, level, kind, word):
    with pytest.raises(ValueError, match=word):
        cleaned(wave, level, kind)


@pytest.mark.parametrize("name", library.names())
def test_edge_of_library_curves_is_near_their_gap(name):
    junction = library.entry(name).absorber.junctions[-1]
    edge = edge_ev(junction.response.wavelength_nm, junction.response.quantum_efficiency)
    # soft edges lie above the optical gap: 0.1 eV for amorphous silicon, 30 meV for the others
    assert junction.gap_ev - 0.01 < edge < junction.gap_ev + (0.12 if name == "a-si" else 0.04)


def test_a_gap_before_the_last_point_is_told():
    wave = np.append(WAVE[WAVE <= 790], 850.0)
    told_of = cleaned(wave, np.interp(wave, WAVE, LEVEL), "eqe").findings
    assert any("no points from 790 to 850 nm" in each for each in told_of)


def test_a_curve_without_an_edge_says_where_it_ends():
    with pytest.raises(ValueError, match="ends at 600 nm"):
        edge_ev(WAVE[WAVE <= 600], LEVEL[WAVE <= 600])
