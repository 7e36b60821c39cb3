"""Where the sun is in every interval: one accurate position, sub-steps by hour angle, averages over the lit part."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

SUB_STEP_S = 300  # s: five minutes move the sun by 1.25 deg; halving it moves a year's light by less than 0.01 %
_SIDEREAL_RATE = 2 * np.pi / 86400.0  # rad s-1, mean solar hour angle
_DELTA_T_S = 69.0  # s, terrestrial less universal time, 2015-2025 within 1 s (IERS); 1 s moves the sun by 0.00001 deg
_STANDARD_PRESSURE_HPA = 1013.25
_STANDARD_TEMPERATURE_C = 12.0
_SOLAR_RADIUS_DEG = 0.26667


@dataclass(frozen=True, slots=True)
class SunCourse:
    """The sun in each interval.

    Parameters
    ----------
    lit : (n,) array [1], share of the interval with the sun's centre above the horizon
    cos_zenith : (n,) array [1], mean over the lit sub-steps of the cosine of the apparent zenith; 0 where unlit
    earth_sun : (n,) array [1], extraterrestrial irradiance over its yearly mean
    direction : (n, step, 3) array [1], east, north, up components of the apparent direction to the sun
    up : (n, step) bool array, sub-steps with the sun's centre above the horizon
    """

    lit: Array
    cos_zenith: Array
    earth_sun: Array
    direction: Array
    up: NDArray[np.bool_]

    def only(self, chosen: NDArray[np.bool_] | slice) -> SunCourse:
        """Return the chosen intervals."""
        return SunCourse(
            self.lit[chosen], self.cos_zenith[chosen], self.earth_sun[chosen], self.direction[chosen], self.up[chosen]
        )


def course(
    time: NDArray[np.int64],
    interval_s: int,
    latitude_deg: float,
    longitude_deg: float,
    elevation_m: float = 0.0,
    pressure_hpa: float = _STANDARD_PRESSURE_HPA,
) -> SunCourse:
    """Return the sun's course through intervals.

    Parameters
    ----------
    time : (n,) int64 array [s], UTC unix seconds of the start of each interval
    interval_s : int [s], length of the intervals
    latitude_deg, longitude_deg : float [deg], north and east positive
    elevation_m : float [m]
    pressure_hpa : float [hPa], for refraction

    Returns
    -------
    SunCourse

    Notes
    -----
    The position at mid-interval is that of the solar position algorithm of Reda & Andreas (2004), valid for the years
    -2000 to 6000, uncertainty 0.0003 deg. Sub-steps turn it about the polar axis at 15 deg an hour: over half an hour
    the neglected change of declination is below 0.009 deg. Refraction as in the same source, at 12 degC.

    References
    ----------
    I. Reda, A. Andreas, Solar position algorithm for solar radiation applications, Solar Energy 76 (2004) 577.
    """
    from pvlib import spa

    middle = np.asarray(time, dtype=np.float64) + interval_s / 2
    true = spa.solar_position(
        middle, latitude_deg, longitude_deg, elevation_m, pressure_hpa, _STANDARD_TEMPERATURE_C, _DELTA_T_S, 0.5667
    )
    elevation, azimuth = np.radians(true[3]), np.radians(true[4])
    distance = spa.earthsun_distance(middle, _DELTA_T_S, 1)
    toward = np.stack(
        [np.cos(elevation) * np.sin(azimuth), np.cos(elevation) * np.cos(azimuth), np.sin(elevation)], axis=-1
    )
    steps = max(1, round(interval_s / SUB_STEP_S))
    offsets = ((np.arange(steps) + 0.5) / steps - 0.5) * interval_s
    turned = _turn(toward, offsets * _SIDEREAL_RATE, np.radians(latitude_deg))
    direction = _refracted(turned, pressure_hpa)
    up = direction[..., 2] > 0.0
    n_up = up.sum(axis=1)
    height = np.where(up, direction[..., 2], 0.0).sum(axis=1)
    cos_zenith = np.divide(height, n_up, out=np.zeros_like(height), where=n_up > 0)
    return SunCourse(n_up / steps, cos_zenith, 1.0 / np.asarray(distance) ** 2, direction, up)


def _turn(toward: Array, angle: Array, latitude: float) -> Array:
    """Turn directions (n, 3) about the polar axis by hour angles (step,) [rad]: (n, step, 3)."""
    pole = np.array([0.0, np.cos(latitude), np.sin(latitude)])
    # The sky turns from east through south to west on the northern half: clockwise seen against the pole.
    across = np.cross(toward, pole)
    along = (toward @ pole)[:, None] * pole
    cosine, sine = np.cos(angle)[None, :, None], np.sin(angle)[None, :, None]
    turned = toward[:, None, :] * cosine + across[:, None, :] * sine + along[:, None, :] * (1 - cosine)
    return np.asarray(turned)


def _refracted(direction: Array, pressure_hpa: float) -> Array:
    """Lift true directions (..., 3) to apparent ones (Reda & Andreas 2004, eq. 42)."""
    true_deg = np.degrees(np.arcsin(np.clip(direction[..., 2], -1.0, 1.0)))
    bounded = np.maximum(true_deg, -_SOLAR_RADIUS_DEG - 0.5667)  # below it the formula has no meaning and no use
    scale = pressure_hpa / 1010.0 * 283.0 / (273.0 + _STANDARD_TEMPERATURE_C)
    lift = scale * 1.02 / (60.0 * np.tan(np.radians(bounded + 10.3 / (bounded + 5.11))))
    apparent = np.radians(np.where(true_deg >= -_SOLAR_RADIUS_DEG - 0.5667, true_deg + lift, true_deg))
    level = np.hypot(direction[..., 0], direction[..., 1])
    stretch = np.divide(np.cos(apparent), level, out=np.ones_like(level), where=level > 1e-9)
    return np.stack([direction[..., 0] * stretch, direction[..., 1] * stretch, np.sin(apparent)], axis=-1)


def relative_air_mass(cos_zenith: Array) -> Array:
    """Return the optical air mass relative to the vertical, seen at sea level.

    Parameters
    ----------
    cos_zenith : (...) array [1], cosine of the apparent zenith, 0 to 1

    Returns
    -------
    (...) array [1], 1 to 38

    References
    ----------
    F. Kasten, A. T. Young, Revised optical air mass tables and approximation formula, Applied Optics 28 (1989) 4735,
    eq. 3; valid from zenith to horizon.
    """
    elevation_deg = np.degrees(np.arcsin(np.clip(cos_zenith, 0.0, 1.0)))
    mass = 1.0 / (np.clip(cos_zenith, 0.0, 1.0) + 0.50572 * (elevation_deg + 6.07995) ** -1.6364)
    return np.maximum(mass, 1.0)


def ozone_air_mass(cos_zenith: Array) -> Array:
    """Return the air mass of an ozone layer 22 km high (Bird & Riordan 1984, eq. 2-10); (...) array [1]."""
    height = 22.0 / 6370.0
    return np.asarray((1 + height) / np.sqrt(np.asarray(cos_zenith) ** 2 + 2 * height))
