"""Dust on the front: its colour."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from yieldsim import spectrum

Array = NDArray[np.float64]

_MIDDLE_NM = 700.0  # scales the depth that is solved for, nothing else
_STEPS = 30


def colour(lost: Array, exponent: float) -> Array:
    """Return by how much dust favours each band, beside the light it takes from all of them.

    Parameters
    ----------
    lost : (n,) array [1], share of the light that dust takes, 0 to below 1
    exponent : float [1], dust takes (wavelength)^-exponent; 0 = grey

    Returns
    -------
    (n, n_band) array [1]; mean 1 under the reference spectrum, so that the loss itself is counted elsewhere

    Notes
    -----
    What dust lets through, exp(-t_b) with t_b ~ wavelength^-exponent, over the mean let through under the reference
    spectrum; t is solved so that this mean is 1 - lost.
    """
    bands = spectrum.reference_bands()
    weight = (spectrum.band_wavelengths() / _MIDDLE_NM) ** -exponent
    kept = 1 - np.asarray(lost, dtype=np.float64)[:, None]
    depth = -np.log(kept)
    for _ in range(_STEPS):  # Newton on a convex, falling function: from below it never overshoots
        passed = np.exp(-depth * weight)
        mean = (passed @ bands / bands.sum())[:, None]
        slope = ((passed * weight) @ bands / bands.sum())[:, None]
        depth = depth + (mean - kept) / slope
    return np.asarray(np.exp(-depth * weight) / kept)
