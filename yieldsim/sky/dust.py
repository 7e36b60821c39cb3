"""Dust on the front: its colour."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from yieldsim import spectrum

Array = NDArray[np.float64]


def colour(lost: Array, exponent: float) -> Array:
    """Return by how much dust favours each band, beside the light it takes from all of them.

    Parameters
    ----------
    lost : (n,) array [1], share of the light that dust takes, 0 to below 1
    exponent : float [1], dust takes (wavelength)^-exponent; 0 = grey

    Returns
    -------
    (n, n_band) array [1]; mean 1 under the reference spectrum

    Notes
    -----
    Share taken s_b = lost w_b with w_b ~ wavelength^-exponent, its mean under the reference spectrum 1; passed over the
    mean passed: (1 - s_b)/(1 - lost), at least 0.
    """
    bands = spectrum.reference_bands()
    weight = spectrum.band_wavelengths() ** -exponent
    weight = weight * (bands.sum() / (weight @ bands))
    share = np.asarray(lost, dtype=np.float64)[:, None]
    return np.asarray(np.maximum(1 - share * weight, 0.0) / (1 - share))
