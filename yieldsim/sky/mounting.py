"""How a plane stands at every moment: fixed, or turned about an axis after the sun."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky.sun import SunCourse

Array = NDArray[np.float64]

ROOF_HEAT_LOSS = 0.65  # of a rack in the open: close roof mount over open rack in D. L. King, W. E. Boyson, J. A.
# Kratochvil, SAND2004-3535 (2004), glass on both sides: 0.66 in still air, 0.64 at 5 m/s


@dataclass(frozen=True, slots=True)
class Stance:
    """A plane that turns about one line, at every sub-step.

    Parameters
    ----------
    across : (3,) array [1], level unit vector (east, north, up) square to that line: where the turned plane leans to
    upright : (3,) array [1], unit vector the plane faces before it is turned: straight up unless the line is tilted
    rotation : (n, step) or (1, 1) array [rad], turn from ``upright`` towards ``across``
    """

    across: Array
    upright: Array
    rotation: Array

    def cos_incidence(self, direction: Array) -> Array:
        """Return the cosine of the front's normal to directions (n, step, 3), (n, step) [1]; below 0 behind it."""
        along, above = direction @ self.across, direction @ self.upright
        return np.asarray(np.sin(self.rotation) * along + np.cos(self.rotation) * above)

    def cos_tilt(self) -> Array:
        """Return the cosine of the tilt from horizontal, shaped as the rotation [1]."""
        return np.asarray(np.cos(self.rotation) * self.upright[2])

    def normals(self, rotation: Array) -> Array:
        """Return the front's normals (m, 3) [1] at rotations (m,) [rad]."""
        return np.sin(rotation)[:, None] * self.across + np.cos(rotation)[:, None] * self.upright


def fixed(tilt_deg: float, azimuth_deg: float) -> Stance:
    """Return the stance of a plane that does not move.

    Parameters
    ----------
    tilt_deg, azimuth_deg : float [deg], tilt from horizontal, azimuth clockwise from north
    """
    azimuth = np.radians(azimuth_deg)
    across = np.array([np.sin(azimuth), np.cos(azimuth), 0.0])
    return Stance(across, np.array([0.0, 0.0, 1.0]), np.full((1, 1), np.radians(tilt_deg)))


def tracking(
    sun: SunCourse, axis_azimuth_deg: float, axis_tilt_deg: float, max_angle_deg: float, coverage: float
) -> Stance:
    """Return the stance of a plane that follows the sun about one axis.

    Parameters
    ----------
    sun : SunCourse
    axis_azimuth_deg : float [deg], where the axis points, clockwise from north
    axis_tilt_deg : float [deg], how far it falls that way
    max_angle_deg : float [deg], largest turn to either side
    coverage : float [1], row width over pitch, 0 to 1: rows turn back from the sun so far that they do not shade each
        other; 0 = nothing to shade

    Returns
    -------
    Stance; level while the sun is down

    Notes
    -----
    The turn that brings the sun's projection on the plane square to the axis onto the normal is
    omega = atan2(d . across, d . upright). Where |cos omega| < coverage the rows would shade each other and turn back
    by arccos(|cos omega| / coverage) (eq. 14-16 for level ground), then stop at the largest turn.

    References
    ----------
    K. Anderson, M. Mikofski, Slope-aware backtracking for single-axis trackers, NREL/TP-5K00-76626 (2020).
    """
    azimuth, tilt = np.radians(axis_azimuth_deg), np.radians(axis_tilt_deg)
    axis = np.array([np.sin(azimuth) * np.cos(tilt), np.cos(azimuth) * np.cos(tilt), -np.sin(tilt)])
    across = np.array([np.cos(azimuth), -np.sin(azimuth), 0.0])
    upright = np.cross(across, axis)
    ideal = np.arctan2(sun.direction @ across, sun.direction @ upright)
    if coverage > 0:
        excess = np.minimum(np.abs(np.cos(ideal)) / coverage, 1.0)
        ideal = ideal - np.sign(ideal) * np.arccos(excess)
    most = np.radians(max_angle_deg)
    return Stance(across, upright, np.where(sun.up, np.clip(ideal, -most, most), 0.0))
