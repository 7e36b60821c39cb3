"""Detailed balance."""

from itertools import pairwise

import numpy as np
import pytest
from scipy import integrate

from yieldsim.constants import ELEMENTARY_CHARGE, LIGHT_SPEED, PLANCK, THERMAL_EV_PER_K
from yieldsim.device.balance import radiative_current, saturation_current
from yieldsim.device.response import Response, step


@pytest.mark.parametrize("temperature", [233.15, 298.15, 373.15])
@pytest.mark.parametrize("gap", [0.7, 1.12, 2.0])
def test_step_against_quadrature(gap, temperature):
    thermal = THERMAL_EV_PER_K * temperature
    factor = 2 * np.pi * ELEMENTARY_CHARGE**4 / (PLANCK**3 * LIGHT_SPEED**2)
    integral = integrate.quad(lambda e: e**2 * np.exp(-(e - gap) / thermal), gap, gap + 60 * thermal, epsabs=0)[0]
    response = step(gap)
    got = radiative_current(response.wavelength_nm, response.quantum_efficiency, temperature)
    assert got == pytest.approx(factor * integral * np.exp(-gap / thermal), rel=1e-7, abs=0)  # quad's own 1e-8


def test_sloping_response_against_quadrature():
    wave, level = np.array([600, 760, 790, 810, 850.0]), np.array([0.9, 0.93, 0.6, 0.2, 0.0])
    thermal = THERMAL_EV_PER_K * 310.0
    hc = PLANCK * LIGHT_SPEED / ELEMENTARY_CHARGE * 1e9
    factor = 2 * np.pi * ELEMENTARY_CHARGE**4 / (PLANCK**3 * LIGHT_SPEED**2)
    edges = hc / wave[::-1]
    pieces = [
        integrate.quad(lambda e: np.interp(hc / e, wave, level) * e**2 * np.exp(-e / thermal), a, b, epsabs=0)[0]
        for a, b in pairwise(edges)
    ]
    assert radiative_current(wave, level, 310.0) == pytest.approx(
        factor * sum(pieces), rel=1e-7, abs=0
    )  # quad's own 1e-8


def test_parts_sum_to_the_whole_and_scale():
    whole = Response(np.array([300.0, 800.0]), np.array([1.0, 1.0]))
    total = radiative_current(whole.wavelength_nm, whole.quantum_efficiency, 300.0)
    parts = sum(radiative_current(np.array(ends), np.ones(2), 300.0) for ends in ([300.0, 700.0], [700.0, 800.0]))
    assert parts == pytest.approx(total, rel=1e-12, abs=0)  # rounding
    half = radiative_current(whole.wavelength_nm, whole.quantum_efficiency / 2, 300.0)
    assert half == pytest.approx(total / 2, rel=1e-12, abs=0)


def test_hotter_and_narrower_radiate_more():
    response, narrower = step(1.4), step(1.3)
    cold, hot = radiative_current(response.wavelength_nm, response.quantum_efficiency, np.array([290.0, 300.0]))
    assert hot > 2 * cold  # exp(1.4 eV/k (1/290 - 1/300)) is 6.5
    assert radiative_current(narrower.wavelength_nm, narrower.quantum_efficiency, 300.0) > hot


def test_boltzmann_is_as_close_to_bose_einstein_as_said():
    thermal = THERMAL_EV_PER_K * 300.0
    bose = integrate.quad(lambda e: e**2 / np.expm1(e / thermal), 0.5, 0.5 + 40 * thermal, epsabs=0)[0]
    boltzmann = integrate.quad(lambda e: e**2 * np.exp(-e / thermal), 0.5, 0.5 + 40 * thermal, epsabs=0)[0]
    assert 0 < bose / boltzmann - 1 < 1e-8


@pytest.mark.parametrize("ideality", [1.0, 1.3, 2.0])
@pytest.mark.parametrize("efficiency", [1.0, 1e-3, 1e-8])
def test_voltage_is_the_radiative_one_less_the_efficiency_for_every_ideality(ideality, efficiency):
    thermal, collected, radiative = THERMAL_EV_PER_K * 298.15, 300.0, 1e-16
    saturation = saturation_current(radiative, collected, efficiency, ideality)
    voltage = ideality * thermal * np.log(collected / saturation)
    assert voltage == pytest.approx(thermal * np.log(efficiency * collected / radiative), rel=1e-12)  # rounding


def test_ideality_one_divides_by_the_efficiency():
    assert saturation_current(1e-16, 300.0, 1e-3, 1.0) == pytest.approx(1e-13, rel=1e-12, abs=0)
