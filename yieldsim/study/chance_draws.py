"""Streams of draws: one for each (seed, input, owner), even in themselves, independent of each other, and nested.

A stream is a Latin hypercube of one dimension that grows: its first 25 values lie one in each twenty-fifth of 0 to 1,
its first 50 one in each fiftieth, and so on by doubling, in random order. The order of one stream knows nothing of
another's, so that no pair of inputs is tied together, as digits of a common counter would tie them.
"""

from __future__ import annotations

import hashlib
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr, ndtri

Array = NDArray[np.float64]

FIRST_BLOCK = 25  # 25, 50, 100, ... 400, 800 draws are even to the last one
_MANTISSA = 2.0**-53


@lru_cache(maxsize=4096)
def stream(seed: int, name: str, owner: str, count: int) -> Array:
    """Return the first values of a stream, (count,) [1], above 0 and below 1.

    Parameters
    ----------
    seed : int
    name : str, of the input that is drawn
    owner : str, whose input it is; streams of other owners have nothing in common with it
    count : int, how many; a longer stream begins with the shorter one

    Notes
    -----
    n values stand in n strata. Of 2n strata half are then empty; n further values fill them, in an order that is
    drawn. Raw bits of a PCG-64 generator are used, whose course does not change with the version of numpy.

    References
    ----------
    McKay, M. D., Beckman, R. J., Conover, W. J. (1979), Technometrics 21, 239: Latin hypercubes.
    """
    identity = "\x1f".join((str(seed), name, owner)).encode("utf-8", "surrogatepass")
    bits = np.random.PCG64(int.from_bytes(hashlib.sha256(identity).digest(), "big"))
    empty = np.arange(FIRST_BLOCK)
    parts, strata, filled = [], FIRST_BLOCK, 0
    while filled < count:
        order = np.argsort(bits.random_raw(len(empty)), kind="stable")
        within = ((bits.random_raw(len(empty)) >> 11).astype(np.float64) + 0.5) * _MANTISSA
        parts.append((empty[order] + within) / strata)
        filled += len(empty)
        strata *= 2
        taken = np.zeros(strata, dtype=bool)
        taken[(np.concatenate(parts) * strata).astype(np.intp)] = True
        empty = np.flatnonzero(~taken)
    values = np.concatenate(parts)[:count]
    values.flags.writeable = False
    return values


def normal(seed: int, name: str, owner: str, count: int) -> Array:
    """Return the values of a stream as those of a standard normal distribution, (count,) [1]."""
    return np.asarray(ndtri(stream(seed, name, owner, count)))


def tied(own: Array, common: Array, correlation: float) -> Array:
    """Return normal values that share a part with others.

    Parameters
    ----------
    own, common : (n,) arrays [1], standard normal
    correlation : float [1], 0 to 1, of two owners that share ``common``; 0 gives ``own`` as it is, 1 ``common``
    """
    if correlation == 0.0:
        return own
    return np.asarray(np.sqrt(correlation) * common + np.sqrt(1 - correlation) * own)


def picked(values: Array, count: int) -> NDArray[np.intp]:
    """Return which of ``count`` equally likely things normal values (n,) stand for, (n,) 0 to count - 1."""
    return np.asarray(np.minimum((np.asarray(ndtr(values)) * count).astype(np.intp), count - 1), dtype=np.intp)
