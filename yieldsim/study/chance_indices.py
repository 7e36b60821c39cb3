"""Variance-based indices: which input causes how much of a spread, and how surely the draws tell it.

An index says which share of a result's variance an input causes alone (first order), and which would go if it were
known (total: alone and together with others).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

RESAMPLES = 200
LEVEL = 0.9  # of the intervals
TOO_WIDE = 0.1  # an index is told apart from others only where its interval is narrower


@dataclass(frozen=True, slots=True)
class Index:
    """First-order and total index of an input [1], each with its interval."""

    first: float
    first_low: float
    first_high: float
    total: float
    total_low: float
    total_high: float

    @property
    def told(self) -> bool:
        """Whether both intervals are narrow enough to say something."""
        return max(self.first_high - self.first_low, self.total_high - self.total_low) <= TOO_WIDE


@dataclass(frozen=True, slots=True, eq=False)
class Samples:
    """A result and its straight-line part at the points of the design.

    Parameters
    ----------
    a, b : (n,) arrays, the result at two independent sets of draws
    mixed : input -> (n,) array, at the first set with this input taken from the second
    straight_a, straight_b : (n,) arrays, of a straight line through the middle at the same points; zeros = none
    straight_mixed : input -> (n,) array, likewise
    straight_variance : input -> variance of the straight line due to it, exactly
    """

    a: Array
    b: Array
    mixed: Mapping[str, Array]
    straight_a: Array
    straight_b: Array
    straight_mixed: Mapping[str, Array]
    straight_variance: Mapping[str, float]


def indices(samples: Samples) -> dict[str, Index]:
    """Return the indices of every input; none where nothing varies.

    Parameters
    ----------
    samples : Samples

    Notes
    -----
    With f at A, B and at A with input i from B: first-order variance E[f_B (f_i - f_A)] (Saltelli et al. 2010, table 2
    b), total variance E[(f_A - f_i)^2]/2 (Jansen 1999), over the variance at A and B together. What a straight line L
    through the middle contributes is known exactly, so only the rest is estimated: the same estimates of f less those
    of L, plus L's own variances. Where the result is nearly straight, as yields are, few draws then suffice; where it
    is not, this is the plain estimate. Intervals: rows drawn anew `RESAMPLES` times.

    References
    ----------
    Saltelli, A., Ratto, M., Andres, T., et al. (2008), Global Sensitivity Analysis, Wiley.
    Saltelli, A., Annoni, P., Azzini, I., et al. (2010), Comput. Phys. Commun. 181, 259.
    Jansen, M. J. W. (1999), Comput. Phys. Commun. 117, 35.
    """
    n = len(samples.a)
    bits = np.random.PCG64(n).random_raw(RESAMPLES * n)
    rows = np.concatenate([np.arange(n)[None], (bits % np.uint64(n)).astype(np.intp).reshape(RESAMPLES, n)])
    middle = (samples.a.mean() + samples.b.mean()) / 2
    a, b = samples.a - middle, samples.b - middle
    of_line = (samples.straight_a.mean() + samples.straight_b.mean()) / 2
    straight = samples.straight_a - of_line, samples.straight_b - of_line
    variance = sum(samples.straight_variance.values()) + _both(a, b, rows) - _both(*straight, rows)
    if not variance[0] > 0:
        return {}
    found = {}
    for name, values in samples.mixed.items():
        mixed, line, own = values - middle, samples.straight_mixed[name] - of_line, samples.straight_variance[name]
        first = own + _mean(b * (mixed - a) - straight[1] * (line - straight[0]), rows)
        total = own + _mean(((a - mixed) ** 2 - (straight[0] - line) ** 2) / 2, rows)
        found[name] = Index(*_with_interval(first / variance), *_with_interval(total / variance))
    return found


def _mean(values: Array, rows: NDArray[np.intp]) -> Array:
    return np.asarray(values[rows].mean(axis=1))


def _both(a: Array, b: Array, rows: NDArray[np.intp]) -> Array:
    """Return the variance of two sets together, (n_resample,)."""
    values = np.concatenate([a[rows], b[rows]], axis=1)
    return np.asarray(values.var(axis=1))


def _with_interval(resampled: Array) -> tuple[float, float, float]:
    """Return the value of all rows and the interval that resampled rows span, widened to hold it."""
    value = float(resampled[0])
    low, high = np.quantile(resampled[1:], ((1 - LEVEL) / 2, (1 + LEVEL) / 2))
    return value, min(float(low), value), max(float(high), value)
