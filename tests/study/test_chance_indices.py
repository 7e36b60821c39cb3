"""Variance-based indices against functions whose indices are known."""

import numpy as np
import pytest

from yieldsim.study import chance_draws
from yieldsim.study.chance_indices import Samples, indices

#: Ishigami & Homma's function with a = 7, b = 0.1 (Saltelli et al. 2008, section 4.6, from memory; the closed form of
#: its variances gives the same).
FIRST, TOTAL = (0.3139, 0.4424, 0.0), (0.5576, 0.4424, 0.2437)


def ishigami(x):
    return np.sin(x[:, 0]) + 7 * np.sin(x[:, 1]) ** 2 + 0.1 * x[:, 2] ** 4 * np.sin(x[:, 0])


def design(function, count, transform, dimensions=3, line=None):
    a, b = (
        transform(np.array([chance_draws.stream(5, f"{again}x{i}", "", count) for i in range(dimensions)]).T)
        for again in ("", "again ")
    )
    mixed = {}
    for i in range(dimensions):
        mixed[str(i)] = a.copy()
        mixed[str(i)][:, i] = b[:, i]
    slope = np.zeros(dimensions) if line is None else np.asarray(line)
    return Samples(
        function(a), function(b), {name: function(x) for name, x in mixed.items()},
        a @ slope, b @ slope, {name: x @ slope for name, x in mixed.items()},
        {str(i): float(slope[i] ** 2) for i in range(dimensions)},
    )  # fmt: skip


def angles(u):
    return (2 * u - 1) * np.pi


def normals(u):
    from scipy.special import ndtri

    return ndtri(u)


def test_ishigami_function():
    """Within 0.02 of the published values at n = 4096, no straight line to help."""
    found = indices(design(ishigami, 4096, angles))
    for i in range(3):
        assert found[str(i)].first == pytest.approx(FIRST[i], abs=0.02)
        assert found[str(i)].total == pytest.approx(TOTAL[i], abs=0.02)


def test_published_values_are_those_of_the_closed_form():
    """Variances: 1/2 (1 + b pi^4/5)^2, a^2/8, and b^2 pi^8 (1/18 - 1/50) of first and third together."""
    a, b = 7.0, 0.1
    one, two, both = (1 + b * np.pi**4 / 5) ** 2 / 2, a**2 / 8, b**2 * np.pi**8 * (1 / 18 - 1 / 50)
    whole = one + two + both
    assert (one / whole, two / whole) == pytest.approx(FIRST[:2], abs=5e-5)
    assert ((one + both) / whole, both / whole) == pytest.approx((TOTAL[0], TOTAL[2]), abs=5e-5)


def test_a_straight_line_is_told_exactly():
    """What is straight needs no draws: shares of 9, 4 and 1 in 14, to rounding, with intervals of no width."""
    found = indices(design(lambda x: x @ [3.0, -2.0, 1.0], 50, normals, line=[3.0, -2.0, 1.0]))
    for name, share in (("0", 9 / 14), ("1", 4 / 14), ("2", 1 / 14)):
        index = found[name]
        assert index.first == pytest.approx(share, rel=1e-12)
        assert index.total == pytest.approx(share, rel=1e-12)
        assert index.first_high - index.first_low < 1e-12
        assert index.told


def test_nearly_straight_needs_few_draws():
    """x0 + x1 + 0.1 x0 x1: each input has 0.4975 alone, 0.5025 in all (closed form); 100 draws tell it to 0.02."""
    found = indices(design(lambda x: x[:, 0] + x[:, 1] + 0.1 * x[:, 0] * x[:, 1], 100, normals, 2, [1.0, 1.0]))
    for name in "01":
        assert found[name].first == pytest.approx(1 / 2.01, abs=0.02)
        assert found[name].total == pytest.approx(1.01 / 2.01, abs=0.02)
        assert found[name].told


def test_too_few_draws_are_called_so():
    found = indices(design(ishigami, 64, angles))
    assert not found["0"].told
    assert all(index.first_low <= index.first <= index.first_high for index in found.values())
    assert all(index.total_low <= index.total <= index.total_high for index in found.values())


def test_intervals_hold_what_they_say():
    """Of 3 x 40 intervals of 90 % at least three quarters hold the truth (binomial: below that once in 10^6)."""
    inside = 0
    for k in range(40):
        a, b = (np.random.default_rng([k, again]).uniform(-np.pi, np.pi, (256, 3)) for again in (0, 1))
        mixed = {str(i): np.where(np.arange(3) == i, b, a) for i in range(3)}
        none = np.zeros(256)
        found = indices(
            Samples(ishigami(a), ishigami(b), {name: ishigami(x) for name, x in mixed.items()}, none, none,
                    dict.fromkeys(mixed, none), dict.fromkeys(mixed, 0.0))
        )  # fmt: skip
        inside += sum(found[str(i)].total_low <= TOTAL[i] <= found[str(i)].total_high for i in range(3))
    assert inside >= 90


def test_nothing_varies():
    assert indices(design(lambda x: np.ones(len(x)), 64, angles)) == {}
