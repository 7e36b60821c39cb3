"""Sky light by where it comes from, after Perez and others: around the sun, from the rim of the sky, from all of it."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky.sun import relative_air_mass

Array = NDArray[np.float64]

#: Upper bounds of sky clearness of the first seven of eight classes (table 1 of the source).
CLEARNESS = np.array([1.065, 1.23, 1.5, 1.95, 2.8, 4.5, 6.2])
#: F11 F12 F13 F21 F22 F23 of each class (table 6 of the source, all sites together).
COEFFICIENTS = np.array(
    [
        [-0.0080, 0.5880, -0.0620, -0.0600, 0.0720, -0.0220],
        [0.1300, 0.6830, -0.1510, -0.0190, 0.0660, -0.0290],
        [0.3300, 0.4870, -0.2210, 0.0550, -0.0640, -0.0260],
        [0.5680, 0.1870, -0.2950, 0.1090, -0.1520, -0.0140],
        [0.8730, -0.3920, -0.3620, 0.2260, -0.4620, 0.0010],
        [1.1320, -1.2370, -0.4120, 0.2880, -0.8230, 0.0560],
        [1.0600, -1.6000, -0.3590, 0.2640, -1.1270, 0.1310],
        [0.6780, -0.3270, -0.2500, 0.1560, -1.3770, 0.2510],
    ]
)
_KAPPA = 1.041  # rad-3, for the zenith's part in clearness


def shares(dni: Array, dhi: Array, extraterrestrial: Array, cos_zenith: Array) -> tuple[Array, Array]:
    """Return the shares of sky light that come from around the sun and from the rim of the sky.

    Parameters
    ----------
    dni, dhi : (n,) array [W m-2]
    extraterrestrial : (n,) array [W m-2], on a plane facing the sun
    cos_zenith : (n,) array [1]

    Returns
    -------
    around : (n,) array [1], F1, 0 to 1
    rim : (n,) array [1], F2, may be below 0: the sky is darker at its rim

    Notes
    -----
    Clearness e = ((dhi + dni)/dhi + k z^3)/(1 + k z^3) with z in rad, brightness D = dhi m / E0; then
    F1 = max(0, F11 + F12 D + F13 z) and F2 = F21 + F22 D + F23 z. Fitted to measured tilted planes, broadband.

    References
    ----------
    R. Perez, P. Ineichen, R. Seals, J. Michalsky, R. Stewart, Modeling daylight availability and irradiance components
    from direct and global irradiance, Solar Energy 44 (1990) 271, eq. 1, 2, 9.
    """
    zenith = np.arccos(np.clip(cos_zenith, 0.0, 1.0))
    cubed = _KAPPA * zenith**3
    sky = np.maximum(dhi, 1e-9)
    clearness = ((sky + dni) / sky + cubed) / (1 + cubed)
    brightness = dhi * relative_air_mass(cos_zenith) / extraterrestrial
    f11, f12, f13, f21, f22, f23 = COEFFICIENTS[np.searchsorted(CLEARNESS, clearness, side="right")].T
    around = np.clip(f11 + f12 * brightness + f13 * zenith, 0.0, 1.0)
    return around, f21 + f22 * brightness + f23 * zenith
