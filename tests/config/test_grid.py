"""Evenly spaced decimals."""

import pytest

from yieldsim.config.grid import decimal_grid


def test_the_sweep_of_the_shipped_study():
    gaps = decimal_grid(0.9, 2.0, 0.02)
    assert len(gaps) == 56
    assert gaps == tuple(float(f"{0.9 + 0.02 * i:.2f}") for i in range(56))  # no 1.1000000000000001


@pytest.mark.parametrize(
    ("first", "last", "step", "expected"),
    [
        (1.0, 1.0, 0.1, (1.0,)),
        (1.0, 1.25, 0.1, (1.0, 1.1, 1.2)),  # the end is not reached
        (1, 2, 1, (1.0, 2.0)),
        (2.0, 1.0, 0.1, ()),
        (1e-3, 3e-3, 1e-3, (0.001, 0.002, 0.003)),
    ],
)
def test_ends(first, last, step, expected):
    assert decimal_grid(first, last, step) == expected


def test_a_step_of_nothing_is_refused():
    with pytest.raises(ValueError, match="above zero"):
        decimal_grid(1, 2, 0)
