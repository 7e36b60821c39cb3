"""Where the sun is in every interval: one accurate position, sub-steps by hour angle, averages over the lit part."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Direction = tuple[Array, Array, Array]  # components of directions to the sun

SUB_STEP_S = 300  # s: five minutes move the sun by 1.25 deg; halving it moves a year's light by less than 0.01 %
_SIDEREAL_RATE = 2 * np.pi / 86400.0  # rad s-1, mean solar hour angle
_DELTA_T_S = 69.0  # s, terrestrial less universal time, 2015-2025 within 1 s (IERS); 1 s moves the sun by 0.00001 deg
_STANDARD_PRESSURE_HPA = 1013.25
_STANDARD_TEMPERATURE_C = 12.0
_SOLAR_RADIUS_DEG = 0.26667
_MOST_LIFT = 0.02  # rad, more than refraction lifts the sun


@dataclass(frozen=True, slots=True)
class SunCourse:
    """The sun in each interval.

    Parameters
    ----------
    lit : (n,) array [1], share of the interval with the sun's centre above the horizon
    cos_zenith : (n,) array [1], mean over the lit sub-steps of the cosine of the apparent zenith; 0 where unlit
    earth_sun : (n,) array [1], extraterrestrial irradiance over its yearly mean
    direction : (n, step, 3) array [1], east, north, up components of the apparent direction to the sun; where it stays
        down all interval, of the true one at mid-interval
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
    -2000 to 6000, uncertainty 0.0003 deg; its series are summed once a day. Sub-steps turn it about the polar axis at
    15 deg an hour: over half an hour the neglected change of declination is below 0.009 deg. Refraction as in the same
    source, at 12 degC.

    References
    ----------
    I. Reda, A. Andreas, Solar position algorithm for solar radiation applications, Solar Energy 76 (2004) 577.
    """
    middle = np.asarray(time, dtype=np.float64) + interval_s / 2
    toward, distance = _topocentric(middle, latitude_deg, longitude_deg, elevation_m)
    latitude = np.radians(latitude_deg)
    steps = max(1, round(interval_s / SUB_STEP_S))
    offsets = ((np.arange(steps) + 0.5) / steps - 0.5) * interval_s
    height_of_middle = _horizontal(toward, latitude)[2]
    near = height_of_middle > -np.sin(min(_SIDEREAL_RATE * interval_s / 2 + _MOST_LIFT, np.pi / 2))
    direction = np.empty((len(middle), steps, 3))
    direction[~near] = np.stack(_horizontal(toward, latitude), axis=-1)[~near, None, :]
    south, west, pole = (each[near] for each in toward)
    direction[near] = _refracted(_turned((south, west, pole), offsets, latitude), pressure_hpa)
    up = direction[..., 2] > 0.0
    n_up = up.sum(axis=1)
    height = np.where(up, direction[..., 2], 0.0).sum(axis=1)
    cos_zenith = np.divide(height, n_up, out=np.zeros_like(height), where=n_up > 0)
    return SunCourse(n_up / steps, cos_zenith, 1.0 / distance**2, direction, up)


def _ephemeris(moment: Array) -> tuple[Array, Array, Array, Array]:
    """Return right ascension, declination [rad], distance [AU] and how far sidereal time is ahead [deg], each (n,).

    Ahead of `_even_sidereal_deg`: by nutation and by what the days' pace itself changes.

    Cubics between four days; they are within 0.000001 deg of the algorithm at every moment.
    """
    day = np.floor(moment / 86400.0).astype(np.int64)
    nodes = np.unique(np.unique(day)[:, None] + np.arange(-1, 3))
    first = np.searchsorted(nodes, day) - 1
    x = moment / 86400.0 - day
    a, b, c, d = x + 1, x, x - 1, x - 2
    weights = -b * c * d / 6, a * c * d / 2, -a * b * d / 2, a * b * c / 6
    found = [sum(w * each[first + i] for i, w in enumerate(weights)) for each in _at_midnights(nodes.tobytes())]
    return np.asarray(found[0]), np.asarray(found[1]), np.asarray(found[2]), np.asarray(found[3])


@lru_cache(maxsize=64)  # the sun is the same for all places of a study
def _at_midnights(days: bytes) -> tuple[Array, Array, Array, Array]:
    """Return the ephemeris at the start of days since 1970 (int64), by the algorithm's full series."""
    from pvlib import spa

    at = np.frombuffer(days, dtype=np.int64).astype(np.float64) * 86400.0
    sidereal, ascension, declination = spa.solar_position(at, 0, 0, 0, 0, 0, _DELTA_T_S, 0, sst=True)
    ahead = (sidereal - _even_sidereal_deg(at) + 180.0) % 360.0 - 180.0
    distance = np.asarray(spa.earthsun_distance(at, _DELTA_T_S, 1))
    return np.unwrap(np.radians(ascension)), np.radians(declination), distance, np.asarray(ahead)


def _even_sidereal_deg(moment: Array) -> Array:
    """Return sidereal time at Greenwich at an even pace [deg]: the linear part of Reda & Andreas (2004), eq. 28."""
    days = moment / 86400.0 + 2440587.5 - 2451545.0
    return 280.46061837 + 360.98564736629 * days


def _topocentric(
    moment: Array, latitude_deg: float, longitude_deg: float, elevation_m: float
) -> tuple[Direction, Array]:
    """Return the true direction to the sun, seen from the place, and the distance [AU] (Reda & Andreas 2004, 3.11-12).

    The direction's components (n,) point to the equator in the south (on the northern half), to the west and along the
    pole.
    """
    ascension, declination, distance, ahead = _ephemeris(moment)
    hour_angle = np.radians(_even_sidereal_deg(moment) + ahead + longitude_deg) - ascension
    parallax = np.sin(np.radians(8.794 / 3600.0 / distance))
    latitude, height = np.radians(latitude_deg), elevation_m / 6378140.0
    reduced = np.arctan(0.99664719 * np.tan(latitude))
    level = np.cos(declination)
    south = level * np.cos(hour_angle) - parallax * (np.cos(reduced) + height * np.cos(latitude))
    west = level * np.sin(hour_angle)
    pole = np.sin(declination) - parallax * (0.99664719 * np.sin(reduced) + height * np.sin(latitude))
    length = np.sqrt(south**2 + west**2 + pole**2)
    return (south / length, west / length, pole / length), distance


def _horizontal(toward: Direction, latitude: float) -> Direction:
    """Return east, north and up components of directions given by hour angle."""
    south, west, pole = toward
    sine, cosine = np.sin(latitude), np.cos(latitude)
    return -west, pole * cosine - south * sine, south * cosine + pole * sine


def _turned(toward: Direction, offsets_s: Array, latitude: float) -> Array:
    """Return directions (n, step, 3), turned about the polar axis by the hour angle of offsets (step,) [s]."""
    sine, cosine = np.sin(offsets_s * _SIDEREAL_RATE), np.cos(offsets_s * _SIDEREAL_RATE)
    south, west, pole = (each[:, None] for each in toward)
    turned = south * cosine - west * sine, south * sine + west * cosine, pole
    return np.stack(np.broadcast_arrays(*_horizontal(turned, latitude)), axis=-1)


def _refracted(direction: Array, pressure_hpa: float) -> Array:
    """Lift true directions (..., 3) to apparent ones (Reda & Andreas 2004, eq. 42)."""
    height = np.clip(direction[..., 2], -1.0, 1.0)
    true_deg = np.degrees(np.arcsin(height))
    bounded = np.maximum(true_deg, -_SOLAR_RADIUS_DEG - 0.5667)  # below it the formula has no meaning and no use
    scale = pressure_hpa / 1010.0 * 283.0 / (273.0 + _STANDARD_TEMPERATURE_C)
    lift = np.radians(scale * 1.02 / 60.0) / np.tan(np.radians(bounded + 10.3 / (bounded + 5.11)))
    lift = np.where(true_deg >= -_SOLAR_RADIUS_DEG - 0.5667, lift, 0.0)
    # Sine and cosine of the lift, below 0.02, by their series: 1e-15.
    square = lift * lift
    sine, cosine = lift * (1 - square / 6 * (1 - square / 20)), 1 - square / 2 * (1 - square / 12)
    level = np.sqrt(np.maximum(1 - height * height, 0.0))
    stretch = np.divide(level * cosine - height * sine, level, out=np.ones_like(level), where=level > 1e-9)
    apparent = direction * stretch[..., None]
    apparent[..., 2] = height * cosine + level * sine
    return np.asarray(apparent)


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
