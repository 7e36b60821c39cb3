"""What stacked junctions hand down and collect."""

import numpy as np
import pytest

from yieldsim.config import library
from yieldsim.device.fold import folded
from yieldsim.device.junction import Junction, absorptance_at, response_at
from yieldsim.device.optics import handed_down, in_stack, product
from yieldsim.device.response import Response, at, step

STANDARD = 298.15


def read(curve, wavelength):
    return np.interp(wavelength, *curve)


def test_ideal_junctions_share_the_light_at_the_edge():
    top, bottom = Junction(1.68, step(1.68)), Junction(1.12, step(1.12))
    upper, lower = in_stack((top, bottom), STANDARD)
    # steps are exact: rounding only
    assert np.abs(folded(upper) + folded(lower) - folded(step(1.12))).max() < 1e-13
    assert np.abs(folded(lower) - (folded(step(1.12)) - folded(step(1.68)))).max() < 1e-13


def test_blue_light_lost_in_the_top_is_not_handed_down():
    top = library.entry("perovskite-1.68").absorber.junctions[0]
    down = handed_down(top, STANDARD)
    assert at(response_at(top, STANDARD), np.array([350.0]))[0] < 0.8
    assert read(down, 350.0) == 0.0
    assert read(down, 300.0) == 0.0
    assert read(down, 1000.0) == pytest.approx((1 - top.reflection) * (1 - top.parasitic), rel=1e-12)
    assert 0 < read(down, 735.0) < 0.7


def test_every_loss_on_the_way_down_counts():
    top = Junction(1.68, step(1.68), reflection=0.04, parasitic=0.1, transmits=0.25)
    assert read(handed_down(top, STANDARD), np.array([500.0, 900.0])) == pytest.approx(
        [0.96 * 0.25 * 0.9, 0.96 * 0.9], rel=1e-12
    )
    assert at(response_at(top, STANDARD), np.array([500.0]))[0] == pytest.approx(0.75, rel=1e-12)
    bottom = Junction(1.12, Response(np.array([280.0, 1107.0]), np.array([0.95, 0.95])), reflection=0.05)
    lower = in_stack((top, bottom), STANDARD)[1]
    assert at(lower, np.array([500.0, 900.0])) == pytest.approx([0.96 * 0.25 * 0.9, 0.96 * 0.9], rel=1e-12)


def test_a_third_junction_sees_what_both_hand_down():
    stack = (*(Junction(gap, step(gap), transmits=0.1) for gap in (1.9, 1.4)), Junction(0.9, step(0.9)))
    _, middle, lowest = in_stack(stack, STANDARD)
    assert at(middle, np.array([500.0, 800.0])) == pytest.approx([0.09, 0.9], rel=1e-12)
    assert at(lowest, np.array([500.0, 800.0, 1200.0])) == pytest.approx([0.01, 0.1, 1.0], rel=1e-12)


def test_given_absorptance_is_used_and_drifts_with_the_gap():
    absorbed = Response(np.array([300.0, 700.0, 730.0]), np.array([1.0, 1.0, 0.0]))
    top = Junction(1.7, step(1.7), absorptance=absorbed, gap_shift_ev_per_k=3e-4)
    assert absorptance_at(top, STANDARD)[0].tolist() == [300.0, 700.0, 730.0]
    hot = absorptance_at(top, STANDARD + 50)[0]
    assert hot[0] == pytest.approx(300.0, rel=1e-14)
    assert hot[2] < 729


def test_all_light_is_somewhere():
    # collected by either junction, reflected, or lost; never more than there is
    names = ("perovskite-1.68", "c-si")
    stack = tuple(library.entry(name).absorber.junctions[0] for name in names)
    upper, lower = in_stack(stack, STANDARD)
    wave = np.arange(300.0, 1200.0, 1.0)
    assert np.all(at(upper, wave) + at(lower, wave) <= 1.0)


def test_product_keeps_steps_and_is_exact_at_and_between_points():
    first = (np.array([300.0, 500.0, 500.0, 900.0]), np.array([1.0, 1.0, 0.5, 0.1]))
    second = (np.array([200.0, 700.0]), np.array([0.2, 0.8]))
    wave, level = product(first, second, 0.0)
    assert wave[0] == 300.0
    assert wave[-1] == 900.0
    assert np.interp(600.0, wave, level) == pytest.approx(0.4 * 0.68, rel=1e-12)
    assert np.interp(899.999999, wave, level) == pytest.approx(0.08, rel=1e-6)
    assert np.interp(499.999999, wave, level) == pytest.approx(0.56, rel=1e-6)
    assert np.interp(500.000001, wave, level) == pytest.approx(0.28, rel=1e-6)
    # half-way of a piece is exact, elsewhere chords: 0.4 x 0.24 / 16 at most here
    assert np.interp(650.0, wave, level) == pytest.approx(0.35 * 0.74, abs=0.006)
