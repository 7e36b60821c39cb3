"""Films and wafers: closed forms, where pairs are made, published currents."""

import numpy as np
import pytest

from yieldsim.device.junction import standard_photocurrent
from yieldsim.device.material import (
    MATERIALS,
    Material,
    absorptance,
    gap_of,
    generation,
    generation_profile,
    junction_of,
    known,
    median_depth,
    response_of,
    silicon_edge_shift,
)
from yieldsim.device.response import at
from yieldsim.spectrum import reference_spectrum

TRAPPINGS = ("single_pass", "double_pass", "lambertian")


def test_closed_forms():
    assert absorptance(1e5, 1e-5, "single_pass") == pytest.approx(1 - np.exp(-1), rel=1e-12)
    assert absorptance(1e5, 1e-5, "double_pass") == pytest.approx(1 - np.exp(-2), rel=1e-12)
    assert absorptance(1.0, 1e-6, "lambertian", 3.5) == pytest.approx(49e-6, rel=1e-4)  # 4 n^2 for weak absorption
    assert absorptance(0.0, 1e-5, "lambertian", 3.5) == 0.0
    with pytest.raises(ValueError, match="lambertian"):
        absorptance(1.0, 1.0, "mirrored")


@pytest.mark.parametrize("trapping", TRAPPINGS)
def test_profile_integrates_to_the_absorptance(trapping):
    alpha, index = np.array([1e2, 1e4, 1e6]), np.full(3, 3.5)
    depth = 1e-5 * np.linspace(0, 1, 20001) ** 2
    profile = generation_profile(alpha, 1e-5, trapping, depth, index)
    assert np.all(profile >= 0)
    # trapezoids of 2e4 steps, closer together in front
    assert np.trapezoid(profile, depth, axis=0) == pytest.approx(absorptance(alpha, 1e-5, trapping, index), rel=1e-6)


@pytest.mark.parametrize("trapping", TRAPPINGS)
def test_generation_adds_up_to_the_photocurrent(trapping):
    silicon = known("c-si")
    depth = 1.1e-4 * np.linspace(0, 1, 2001) ** 4
    current = np.trapezoid(generation(silicon, 1.1e-4, trapping, depth, reference_spectrum()), depth)
    expected = standard_photocurrent(response_of(silicon, 1.1e-4, trapping)) * 1.00037  # 1000.37 W/m2 here
    # absorptance is interpolated there, absorption here: 0.3 % on a table of 10 nm
    assert current == pytest.approx(expected, rel=3e-3)


def test_more_trapping_more_current_and_deeper_pairs():
    silicon, light = known("c-si"), reference_spectrum()
    currents = [standard_photocurrent(response_of(silicon, 1.6e-4, trapping)) for trapping in TRAPPINGS]
    assert np.all(np.diff(currents) > 0)
    depths = [median_depth(silicon, 1.6e-4, trapping, light) for trapping in TRAPPINGS]
    assert np.all(np.diff(depths) > 0)
    assert 2e-6 < depths[0] < 4e-6  # red light of 650 nm, the middle of what silicon takes in, gets 3.5 um deep


def test_lambertian_silicon_as_published():
    # Richter et al. (2013), IEEE J. Photovoltaics 3, 1184: 43.3 mA/cm2 for 110 um, from memory
    current = standard_photocurrent(response_of(known("c-si"), 1.1e-4, "lambertian")) / 10
    assert current == pytest.approx(43.3, rel=0.01)  # the limit


@pytest.mark.parametrize(
    ("name", "thickness", "low", "high"),
    [  # gaps at room temperature, common practice, no source; a layer's steepest edge lies near by
        ("c-si", 1.6e-4, 1.08, 1.22),
        ("cdte", 3e-6, 1.40, 1.53),
        ("gaas", 2e-6, 1.40, 1.46),
        ("gainp", 7e-7, 1.81, 1.90),
        ("ge", 1.5e-4, 0.66, 0.82),
        ("mapbi3", 5e-7, 1.55, 1.65),
    ],
)
def test_edges_are_where_the_gaps_are(name, thickness, low, high):
    assert low < gap_of(response_of(known(name), thickness, "double_pass")) < high


def test_every_material_is_tested_for_its_edge_and_covers_the_blue():
    for name in MATERIALS:
        assert at(response_of(known(name), 1e-6, "single_pass"), np.array([281.0]))[0] > 0.9
    with pytest.raises(KeyError):
        known("kryptonite")


def test_silicon_edge_moves_as_the_library_says():
    from yieldsim.config import library

    measured = silicon_edge_shift(1.6e-4, "lambertian")
    assert library.entry("c-si").absorber.junctions[0].gap_shift_ev_per_k == pytest.approx(measured, rel=0.01)
    assert -6e-4 < silicon_edge_shift(1.6e-4, "single_pass", 300, 250) < -4e-4


@pytest.mark.parametrize(
    ("thickness", "reflection", "word"),
    [
        (0.0, 0.0, "thickness"),
        (1.0, 0.0, "thickness"),
        (1e-6, 1.0, "reflection"),
        (1e-6, -0.1, "reflection"),
        (np.nan, 0.0, "thickness"),
    ],
)
def test_what_is_no_layer_is_refused(thickness, reflection, word):
    with pytest.raises(ValueError, match=word):
        response_of(known("gaas"), thickness, "single_pass", reflection)


@pytest.mark.parametrize(
    ("wave", "alpha", "index", "word"),
    [
        ([300.0], [1.0], [3.5], "two or more"),
        ([300.0, 400.0], [1.0], [3.5, 3.5], "two or more"),
        ([300.0, 400.0], [1.0, np.nan], [3.5, 3.5], "finite"),
        ([400.0, 300.0], [1.0, 1.0], [3.5, 3.5], "rise"),
        ([300.0, 400.0], [-1.0, 1.0], [3.5, 3.5], "negative"),
    ],
)
def test_what_is_no_material_is_refused(wave, alpha, index, word):
    with pytest.raises(ValueError, match=word):
        Material(np.array(wave), np.array(alpha), np.array(index))


def test_a_layer_becomes_a_junction_with_its_own_absorptance():
    layer = junction_of(known("gaas"), 5e-7, "single_pass", 0.05, external_radiative_efficiency=0.1)
    assert layer.reflection == 0.05
    assert layer.external_radiative_efficiency == 0.1
    wave = np.array([500.0, 800.0])
    assert at(layer.response, wave) == pytest.approx(0.95 * at(layer.absorptance, wave), rel=1e-12)
    assert junction_of(known("gaas"), 5e-7, "single_pass", gap_ev=1.42).gap_ev == 1.42
