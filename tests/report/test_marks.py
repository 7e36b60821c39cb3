import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from yieldsim.report import marks

EPS = 1e-9  # of values up to 100: rounding only


@given(st.lists(st.floats(-20, 120), max_size=20), st.floats(0.1, 30))
def test_labels_keep_apart_in_order_and_inside(wanted, gap):
    placed = marks.spread(wanted, gap, 0.0, 100.0)
    assert placed.shape == (len(wanted),)
    if wanted:
        fair = min(gap, 100.0 / max(len(wanted) - 1, 1))
        assert np.all(np.diff(np.sort(placed)) >= fair - EPS)
        assert placed.min() >= -EPS
        assert placed.max() <= 100 + EPS
        order = np.argsort(wanted, kind="stable")
        assert np.all(np.diff(placed[order]) > 0)


def test_labels_that_do_not_collide_stay_where_they_are():
    assert list(marks.spread([70.0, 10.0, 40.0], 5.0, 0.0, 100.0)) == [70.0, 10.0, 40.0]


def test_two_labels_for_one_place_part_evenly():
    assert list(marks.spread([50.0, 50.0], 10.0, 0.0, 100.0)) == [45.0, 55.0]


def test_twelve_series_are_told_apart_by_colour_and_dash_and_by_sign():
    looks = [marks.mark(i) for i in range(12)]
    assert len({look.marker for look in looks}) == 12
    assert len({(look.colour, look.dash) for look in (marks.mark(i) for i in range(28))}) == 28


@pytest.mark.parametrize("number", range(12))
def test_neighbours_in_grey_differ_in_dash(number):
    assert marks.mark(number).dash != marks.mark(number + 1).dash


def test_the_plateau_of_a_parabola_is_known():
    gap = np.linspace(0.9, 2.0, 111)
    energy = 100.0 * (1 - (gap - 1.4) ** 2)
    best, low, high = marks.plateau(gap, energy)
    # 1 % below the top lies at 0.1 eV from it; linear between steps of 0.01 eV, off by far less than 1e-3 eV
    assert best == pytest.approx(1.4, abs=1e-9)
    assert low == pytest.approx(1.3, abs=1e-3)
    assert high == pytest.approx(1.5, abs=1e-3)


def test_a_plateau_ends_where_the_gaps_end():
    gap = np.array([1.0, 1.1, 1.2])
    assert marks.plateau(gap, np.array([1.0, 0.999, 0.998])) == (1.0, 1.0, 1.2)


@pytest.mark.parametrize(
    ("name", "text"),
    [
        ("short", "short"),
        ("two\nlines", "two lines"),
        ("a\u202eb", "ab"),
        ("x" * 50, "x" * 39 + "…"),
        ("a\u200bb\x00c", "ab c"),
    ],
)
def test_names_in_pictures_are_one_line_of_bounded_length(name, text):
    assert marks.shorten(name) == text
