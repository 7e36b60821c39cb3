"""Layers that scatter and absorb: the four-stream solution of one, and several joined by adding; plain numpy.

This is what the compiled kernel is held to, and what the checks against discrete ordinates use.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# Double Gauss quadrature, two streams a hemisphere: 1/2 -+ 1/(2 sqrt 3), each of weight 1/2 (Sykes 1951).
STREAMS = (0.5 - 0.5 / 3**0.5, 0.5 + 0.5 / 3**0.5)
MOMENTS = 5  # Legendre moments of the phase function, the last being the share of the forward peak
RESONANCE = 1e-5  # how near the beam's slant may come to a diffuse mode, relative; the two then cancel to 1e-10
_SERIES = 0.02  # below it tanh(x)/x by its series, whose next term is 5e-16


@dataclass(frozen=True, slots=True)
class Layer:
    """What one layer does to light; intensities in two streams, the shallow one first.

    Parameters
    ----------
    back, through : (..., 2, 2) array [1], from diffuse streams in to diffuse streams out, alike from both sides
    up, down : (..., 2) array [sr-1], diffuse intensity thrown up and sent down by a beam of unit horizontal flux
    beam : (...) array [1], share of the beam that passes without being turned aside (delta-scaled)
    """

    back: Array
    through: Array
    up: Array
    down: Array
    beam: Array


def legendre(mu: Array) -> tuple[Array, ...]:
    """Return the Legendre polynomials of order 0 to 3 at cosines mu (...); each (...) [1]."""
    mu = np.asarray(mu, dtype=np.float64)
    return np.ones_like(mu), mu, (3 * mu**2 - 1) / 2, (5 * mu**3 - 3 * mu) / 2


def four_stream(depth: Array, albedo: Array, moments: Sequence[Array], mu: Array) -> Layer:
    """Return what a homogeneous layer does to direct and diffuse light.

    Parameters
    ----------
    depth : (...) array [1], optical depth, vertical
    albedo : (...) array [1], single-scattering albedo, 0 to 1
    moments : five (...) arrays [1], Legendre moments of the phase function, the first 1
    mu : (...) array [1], cosine of the beam's slant, above 0

    Returns
    -------
    Layer

    Notes
    -----
    Discrete ordinates with two streams a hemisphere, the phase function cut at the fourth moment (delta-M). For a
    homogeneous layer what goes out is tied to what comes in by R + T = (1 + X)(1 - X)^-1, X = (a+b) Theta[(a-b)(a+b)],
    and R - T = -(1 + Y)(1 - Y)^-1, Y = (a-b) Theta[(a+b)(a-b)], where a and b couple streams of the same and of
    opposite hemispheres and Theta[k^2] = tanh(k tau/2)/k: bounded for any depth and without a special case where
    nothing is absorbed. Against 32 streams, light below a layer over black ground is within 1.5 % above 30 deg of sun.

    References
    ----------
    K.-N. Liou, Analytic two-stream and four-stream solutions for radiative transfer, J. Atmos. Sci. 31 (1974) 1473.
    W. J. Wiscombe, The delta-M method, J. Atmos. Sci. 34 (1977) 1408.
    """
    peak = moments[4]
    kept = 1 - albedo * peak
    tau = kept * depth
    omega = (1 - peak) * albedo / kept
    scaled = [(moment - peak) / (1 - peak) * (2 * order + 1) for order, moment in enumerate(moments[:4])]
    streams = np.array(STREAMS)
    along, across = legendre(streams), legendre(-streams)
    same = sum(s[..., None, None] * np.outer(p, p) for s, p in zip(scaled, along, strict=True))
    other = sum(s[..., None, None] * np.outer(p, q) for s, p, q in zip(scaled, along, across, strict=True))
    weight = omega[..., None, None] / 4
    a = (weight * same - np.eye(2)) / streams[:, None]
    b = weight * other / streams[:, None]
    plus, minus = a + b, a - b

    theta, k_squared = _theta(minus @ plus, tau)
    theta_turned, _ = _theta(plus @ minus, tau)
    x, y = plus @ theta, minus @ theta_turned
    even = (np.eye(2) + x) @ _inverse(np.eye(2) - x)
    odd = -(np.eye(2) + y) @ _inverse(np.eye(2) - y)
    back, through = (even + odd) / 2, (even - odd) / 2

    into = np.broadcast_to(1 / mu, tau.shape)
    toward = [s * p for s, p in zip(scaled, legendre(-mu), strict=True)]
    strength = (omega / (4 * np.pi) * into)[..., None] / streams
    source_up = strength * sum(t[..., None] * p for t, p in zip(toward, along, strict=True))
    source_down = strength * sum(t[..., None] * p for t, p in zip(toward, across, strict=True))
    summed, differing = source_up + source_down, source_up - source_down
    square = into**2
    matrix = square[..., None, None] * np.eye(2) - minus @ plus
    apart = [np.where(np.abs(square - k2) < RESONANCE * square, RESONANCE * square, square - k2) for k2 in k_squared]
    right = _times(minus, summed) + differing * into[..., None]
    both = _times(_adjugate(matrix), right) / (apart[0] * apart[1])[..., None]
    gap = (_times(plus, both) + summed) / into[..., None]
    forced_up, forced_down = (both + gap) / 2, (both - gap) / 2
    beam = np.exp(-tau * into)
    low = forced_up * beam[..., None]
    down = forced_down * beam[..., None] - _times(through, forced_down) - _times(back, low)
    up = forced_up - _times(back, forced_down) - _times(through, low)
    return Layer(back, through, up, down, beam)


def _theta(matrix: Array, tau: Array) -> tuple[Array, tuple[Array, Array]]:
    """Return tanh(k tau/2)/k of a 2x2 matrix k^2, and its two eigenvalues."""
    half_trace = (matrix[..., 0, 0] + matrix[..., 1, 1]) / 2
    determinant = matrix[..., 0, 0] * matrix[..., 1, 1] - matrix[..., 0, 1] * matrix[..., 1, 0]
    root = np.sqrt(np.maximum(half_trace**2 - determinant, 1e-30))
    large = half_trace + root
    small = np.maximum(determinant / large, 0.0)
    at_large, at_small = _tanh_over(large, tau), _tanh_over(small, tau)
    slope = (at_large - at_small) / (large - small)
    theta = at_small[..., None, None] * np.eye(2) + slope[..., None, None] * (
        matrix - small[..., None, None] * np.eye(2)
    )
    return theta, (large, small)


def _tanh_over(k_squared: Array, tau: Array) -> Array:
    """Return tanh(k tau/2)/k, tau/2 where k is 0."""
    x = np.sqrt(k_squared) * tau / 2
    square = x**2
    series = 1 - square / 3 * (1 - square * 2 / 5 * (1 - square * 17 / 42))
    ratio = np.where(x > _SERIES, np.tanh(x) / np.maximum(x, _SERIES), series)
    return np.asarray(ratio * tau / 2)


def _adjugate(matrix: Array) -> Array:
    a, b, c, d = matrix[..., 0, 0], matrix[..., 0, 1], matrix[..., 1, 0], matrix[..., 1, 1]
    return np.stack([np.stack([d, -b], axis=-1), np.stack([-c, a], axis=-1)], axis=-2)


def _inverse(matrix: Array) -> Array:
    determinant = matrix[..., 0, 0] * matrix[..., 1, 1] - matrix[..., 0, 1] * matrix[..., 1, 0]
    return np.asarray(_adjugate(matrix) / determinant[..., None, None])


def _times(matrix: Array, vector: Array) -> Array:
    return np.asarray((matrix @ vector[..., None])[..., 0])


def flux(intensity: Array) -> Array:
    """Return the flux through a horizontal plane of intensities in two streams, (..., 2) [sr-1] to (...) [1]."""
    return np.asarray(np.pi * (intensity[..., 0] * STREAMS[0] + intensity[..., 1] * STREAMS[1]))


def add_layers(layers: Sequence[Layer], ground_albedo: Array) -> Array:
    """Join layers, top first, over a Lambertian ground.

    Parameters
    ----------
    layers : Layers of alike shape (...)
    ground_albedo : (...) array [1]

    Returns
    -------
    (...) array [1], light on the ground over light on a horizontal plane on top
    """
    first = layers[0]
    down, back_below, beam = first.down, first.back, first.beam
    for layer in layers[1:]:
        between = _inverse(np.eye(2) - back_below @ layer.back)
        met = _times(between, down + beam[..., None] * _times(back_below, layer.up))
        down = _times(layer.through, met) + beam[..., None] * layer.down
        back_below = layer.back + layer.through @ between @ back_below @ layer.through
        beam = beam * layer.beam
    returned = flux(back_below.sum(axis=-1)) / np.pi
    return np.asarray((beam + flux(down)) / (1 - ground_albedo * returned))
