"""A horizon of hills or houses: which sun it hides, and which share of the sky."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

_AZIMUTHS = 360
_HEIGHTS = 8  # Gauss points between level and skyline: with the azimuths the hidden share is right to 1e-4


@dataclass(frozen=True, slots=True)
class Horizon:
    """The skyline around a site.

    Parameters
    ----------
    azimuth_deg : tuple of float [deg], clockwise from north, rising, 0 to below 360
    elevation_deg : tuple of float [deg], of the skyline there, 0 to 90; between the points along straight lines

    Raises
    ------
    ValueError
        For unequal lengths, no points, azimuths that do not rise, values outside the ranges.
    """

    azimuth_deg: tuple[float, ...]
    elevation_deg: tuple[float, ...]

    def __post_init__(self) -> None:
        """Refuse what is no skyline."""
        azimuth, elevation = np.array(self.azimuth_deg), np.array(self.elevation_deg)
        if len(azimuth) != len(elevation) or not len(azimuth):
            raise ValueError(f"{len(azimuth)} azimuths and {len(elevation)} elevations; one of each for every point")
        if not (np.all(np.diff(azimuth) > 0) and np.all((azimuth >= 0) & (azimuth < 360))):
            raise ValueError("azimuths must rise, each once, from 0 to below 360")
        if not np.all((elevation >= 0) & (elevation <= 90)):
            raise ValueError("elevations must lie in 0 to 90")

    def elevation_at(self, azimuth_deg: Array) -> Array:
        """Return the elevation of the skyline [deg] at azimuths (...) [deg]."""
        return np.interp(azimuth_deg, self.azimuth_deg, self.elevation_deg, period=360.0)

    def shows(self, direction: Array) -> NDArray[np.bool_]:
        """Return which directions (..., 3) [1] (east, north, up) pass above the skyline, (...)."""
        azimuth = np.degrees(np.arctan2(direction[..., 0], direction[..., 1])) % 360
        return np.asarray(direction[..., 2] > np.sin(np.radians(self.elevation_at(azimuth))))

    def hidden_sky(self, normals: Array) -> Array:
        """Return the view factor of the sky behind the skyline.

        Parameters
        ----------
        normals : (m, 3) array [1], of the faces

        Returns
        -------
        (m,) array [1], part of the face's view factor of a uniform sky

        Notes
        -----
        F = 1/pi int da int_0^h max(0, n . s) cos(e) de over all azimuths a and elevations e below the skyline h(a).
        """
        azimuth_deg = np.asarray((np.arange(_AZIMUTHS) + 0.5) * (360.0 / _AZIMUTHS), dtype=np.float64)
        top = np.radians(self.elevation_at(azimuth_deg))[:, None]
        points, weights = np.polynomial.legendre.leggauss(_HEIGHTS)  # on -1 to 1
        elevation = top * (points + 1) / 2
        azimuth = np.radians(azimuth_deg)[:, None]
        flat = np.cos(elevation)
        toward = np.stack(
            [flat * np.sin(azimuth), flat * np.cos(azimuth), np.broadcast_to(np.sin(elevation), flat.shape)]
        ).reshape(3, -1)
        weight = (flat * top * weights / _AZIMUTHS).ravel()  # da/pi = 2/_AZIMUTHS, the Gauss weights sum to 2
        return np.asarray(np.maximum(np.asarray(normals) @ toward, 0.0) @ weight)
