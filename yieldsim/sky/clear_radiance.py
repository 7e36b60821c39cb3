"""Sky light of clear air by where it comes from, band by band: around the sun, from the rim of the sky, from all of it.

Four numbers fitted to radiances of discrete ordinates.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky import column
from yieldsim.sky.column import Air, Optics

Array = NDArray[np.float64]

HORIZON_CUT = 0.09  # how fast the horizon cuts the glow around a low sun
RAYLEIGH_LEAN = 0.22  # share of Rayleigh-scattered light that leans towards the sun
RIM = 0.70  # brightening of the rim through the longer slant of thin air
RIM_FADE = 2.1  # how fast it fades as the air thickens
OVERCAST_RIM = -0.08  # an overcast sky is darker at its rim; the same solver, cloud depth 10 and more


def shares(air: Air, open_share: Array, constants: Optics | None = None) -> tuple[Array, Array]:
    """Return the shares of sky light that come from around the sun and from the rim of the sky.

    Parameters
    ----------
    air : Air of n hours
    open_share : (n,) array [1], share of the hour with open sun
    constants : Optics, those with the reference folded in unless given

    Returns
    -------
    around : (n, n_band) array [1], 0 to 1
    rim : (n, n_band) array [1], on a wall; below 0 under cloud

    Notes
    -----
    With tau the depth of Rayleigh scattering and haze, T = exp(-tau/mu0), s haze's share of the scattering and f the
    open share: around = f (1 + 2c) mu0/(mu0 + c) [s sqrt(T) + a (1 - s) T], rim = f B exp(-k sqrt(tau/mu0)) - 0.08
    (1 - f); c = 0.09, a = 0.22, B = 0.70, k = 2.1. A plane then holds D [around R_b + (1 - around)(1 + cos tilt)/2 +
    rim sin tilt]. Fitted to table tilted_skies (240 clear skies x 12 planes, 350-1600 nm, sun 15-60 deg high, AOD
    0.05-0.5): facing planes tilted up to 60 deg within 2.5 % rms of their broadband sky light, others 5 to 9 %. Gas
    absorption is left out.
    """
    constants = column.optics() if constants is None else constants
    mu = np.maximum(air.cos_zenith, 1e-6)[:, None]
    haze = air.aod500[:, None] * np.exp(-air.angstrom_exponent[:, None] * constants.haze_shape)
    depth = haze + air.pressure[:, None] / column.BIRD_PRESSURE * constants.rayleigh
    return lobes(depth, column.forward_share(air, constants), mu, open_share[:, None])


def lobes(depth: Array, haze_share: Array, mu: Array, open_share: Array) -> tuple[Array, Array]:
    """Return the same from scattering depth, haze's share of the scattering and the cosine of the sun's zenith."""
    passed = np.exp(-depth / mu)
    near = haze_share * np.sqrt(passed) + RAYLEIGH_LEAN * (1 - haze_share) * passed
    around = (1 + 2 * HORIZON_CUT) * mu / (mu + HORIZON_CUT) * near
    rim = RIM * np.exp(-RIM_FADE * np.sqrt(depth / mu))
    return np.clip(open_share * around, 0.0, 1.0), open_share * rim + (1 - open_share) * OVERCAST_RIM
