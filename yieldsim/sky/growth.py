"""How gas absorption grows along a path: the curves, and tables of them for the compiled column."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky import kernel_layer

Array = NDArray[np.float64]

#: Factors of both curves, vapour and mixed gas: Bird & Riordan (1984), eq. 2-8 and 2-11.
WATER_LAW, MIXED_LAW = (0.2385, 20.07), (1.41, 118.3)


def water_depth(coefficient: Array, path_cm: Array) -> Array:
    """Return the optical depth of vapour along a slant path [cm] (Bird & Riordan 1984, eq. 2-8)."""
    return _depth(WATER_LAW, coefficient * path_cm)


def mixed_gas_depth(coefficient: Array, air_mass: Array) -> Array:
    """Return the optical depth of uniformly mixed gas along an air mass (Bird & Riordan 1984, eq. 2-11)."""
    return _depth(MIXED_LAW, coefficient * air_mass)


def _depth(law: tuple[float, float], product: Array) -> Array:
    return np.asarray(law[0] * product / (1 + law[1] * product) ** 0.45)


def padded(values: Array) -> Array:
    """Return the constants of all bands on a row of the kernel's, its end filled with the last, (STRIDE,)."""
    row = np.full(kernel_layer.STRIDE, values[-1])
    row[: len(values)] = values
    return row


def tables(water: Array, mixed_gas: Array) -> Array:
    """Return the depths of vapour, then of mixed gas, at the paths of the kernel's nodes, flat, a row of bands a node.

    Parameters
    ----------
    water, mixed_gas : (n_band,) arrays, absorption coefficients
    """
    return _tables(water.tobytes(), mixed_gas.tobytes())


@lru_cache(maxsize=16)
def _tables(water: bytes, mixed_gas: bytes) -> Array:
    wet, mixed = padded(np.frombuffer(water)), padded(np.frombuffer(mixed_gas))
    depths = (
        water_depth(wet, np.exp(kernel_layer.WATER_NODES)[:, None]),
        mixed_gas_depth(mixed, np.exp(kernel_layer.MIXED_NODES)[:, None]),
    )
    return np.concatenate(depths).ravel()
