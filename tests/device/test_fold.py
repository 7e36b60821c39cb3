"""The fast fold against the plain one, and its invariants."""

import numpy as np
import pytest

from yieldsim.config import library
from yieldsim.constants import ELEMENTARY_CHARGE, LIGHT_SPEED, PLANCK
from yieldsim.device.fold import folded
from yieldsim.device.response import Response, step
from yieldsim.spectrum import band_edges, band_yield, reference_bands, reference_spectrum

CURVES = {
    "step in a band": step(1.1),
    "step on a band edge": Response(np.array([280.0, band_edges()[70]]), np.ones(2)),
    "wider than the bands": Response(np.array([200.0, 300.0, 300.0, 5000.0]), np.array([0.5, 0.7, 0.2, 0.9])),
    "step in dark bands": step(0.46),
} | {name: library.entry(name).absorber.junctions[0].response for name in library.names()}


@pytest.mark.parametrize("name", CURVES)
def test_equals_the_plain_fold(name):
    curve = CURVES[name]
    plain = band_yield(curve.wavelength_nm, curve.quantum_efficiency)
    # both are exact and add up to a hundred pieces a band: rounding relative to the largest yield
    assert np.abs(folded(curve) - plain).max() < 1e-13 * plain.max()


def test_parts_sum_to_the_whole():
    left = Response(np.array([280.0, 555.5]), np.ones(2))
    right = Response(np.array([555.5, 1234.5]), np.ones(2))
    whole = Response(np.array([280.0, 1234.5]), np.ones(2))
    assert np.abs(folded(left) + folded(right) - folded(whole)).max() < 1e-14  # rounding of numbers below 1


def test_a_narrow_line_gives_charge_over_photon_energy():
    line = Response(np.array([600.0, 600.001]), np.ones(2))
    at = int(np.searchsorted(band_edges(), 600.0)) - 1
    density = np.interp(600.0, *reference_spectrum())
    per_energy = ELEMENTARY_CHARGE * 600e-9 / (PLANCK * LIGHT_SPEED)
    expected = density * 0.001 * per_energy / reference_bands()[at]
    assert folded(line)[at] == pytest.approx(expected, rel=1e-5)  # the light changes by 1e-6 over the line's width
