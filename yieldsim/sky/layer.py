"""Layers that scatter and absorb: the delta-Eddington solution of one, and several joined by adding."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_LEAST_DECAY = 1e-8  # below it the diffuse solution has reached its limit for no absorption to rounding
_RESONANCE = 1e-6  # how near 1 the product of decay and slant may come; the two terms then cancel to 1e-10


@dataclass(frozen=True, slots=True)
class Layer:
    """What one layer does to light, each (..., n_band) [1].

    Parameters
    ----------
    beam : share of the beam that passes without being turned aside (delta-scaled)
    through : share of the beam that passes in all
    back : share of the beam that is thrown back
    diffuse_through, diffuse_back : the same for diffuse light, alike from above and below
    """

    beam: Array
    through: Array
    back: Array
    diffuse_through: Array
    diffuse_back: Array


def delta_eddington(depth: Array, albedo: Array, asymmetry: Array, peak: Array, mu: Array) -> Layer:
    """Return what a homogeneous layer does to direct and diffuse light.

    Parameters
    ----------
    depth : (..., n_band) array [1], optical depth, vertical
    albedo : (..., n_band) array [1], single-scattering albedo, 0 to 1
    asymmetry : (..., n_band) array [1], mean cosine of the scattering angle
    peak : (..., n_band) array [1], share scattered into the forward peak; asymmetry**2 for one constituent
    mu : (..., 1) array [1], cosine of the beam's slant, above 0

    Returns
    -------
    Layer

    Notes
    -----
    Valid for any depth. Against discrete ordinates a cloud layer over black ground passes 13-16 % too much with the
    sun at 10 deg, 5-8 % at 20 deg, 2-5 % at 30 deg. Written so that nothing is lost without absorption.

    References
    ----------
    J. H. Joseph, W. J. Wiscombe, J. A. Weinman, The delta-Eddington approximation for radiative flux transfer,
    J. Atmos. Sci. 33 (1976) 2452. B. P. Briegleb, Delta-Eddington approximation for solar radiation in the NCAR
    community climate model, J. Geophys. Res. 97 (1992) 7603.
    """
    kept = 1 - albedo * peak
    tau = kept * depth
    omega = (1 - peak) * albedo / kept
    g = (asymmetry - peak) / (1 - peak)
    loss = 1 - omega
    q = 1.5 * (1 - omega * g)
    decay = np.maximum(np.sqrt(np.maximum(2 * loss * q, 0.0)), _LEAST_DECAY)
    mu_decay = decay * mu
    near = 1 - mu_decay**2
    near = np.where(np.abs(near) < _RESONANCE, np.copysign(_RESONANCE, near), near)
    alpha = 0.75 * omega * mu * (1 + g * loss) / near
    gamma = 0.5 * omega * (1 + 3 * g * loss * mu**2) / near

    faded = np.exp(-2 * decay * tau)
    sinh = -np.expm1(-2 * decay * tau) / (2 * decay)
    cosh = (1 + faded) / 2
    bottom = (q**2 + decay**2) * sinh + 2 * q * cosh
    diffuse_back = (q**2 - decay**2) * sinh / bottom
    diffuse_through = 2 * q * np.exp(-decay * tau) / bottom
    beam = np.exp(-tau / mu)
    plus, minus = alpha + gamma, alpha - gamma
    back = minus * diffuse_through * beam + plus * diffuse_back - minus
    through = plus * diffuse_through + minus * diffuse_back * beam - (plus - 1) * beam
    return Layer(beam, np.maximum(through, beam), np.maximum(back, 0.0), diffuse_through, diffuse_back)


def add_layers(layers: Sequence[Layer], ground_albedo: Array) -> Array:
    """Join layers, top first, over a Lambertian ground.

    Parameters
    ----------
    layers : Layers of alike shape (..., n_band)
    ground_albedo : (..., n_band) or (..., 1) array [1]

    Returns
    -------
    (..., n_band) array [1], light on the ground over light on a horizontal plane on top
    """
    first = layers[0]
    beam, through, back_below = first.beam, first.through, first.diffuse_back
    for layer in layers[1:]:
        between = 1 / (1 - back_below * layer.diffuse_back)
        diffuse = (through - beam + beam * layer.back * back_below) * between
        through = beam * layer.through + diffuse * layer.diffuse_through
        back_below = layer.diffuse_back + layer.diffuse_through**2 * back_below * between
        beam = beam * layer.beam
    return np.asarray(through / (1 - ground_albedo * back_below))
