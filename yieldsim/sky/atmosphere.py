"""What the air holds when no file says so: water, haze, ozone and pressure from published climatologies."""

from __future__ import annotations

from functools import lru_cache
from importlib import resources

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

STANDARD_PRESSURE = 101325.0  # Pa, ISO 2533:1975
DEFAULT_ANGSTROM_EXPONENT = 1.14  # Bird & Riordan (1984), rural aerosol
AOD_RANGE = (
    0.01,
    3.0,
)  # what an hour's haze may be solved to; measured hourly means lie within (common practice, no source)
_MAX_WATER_CM = 8.0  # the wettest soundings hold about 7.5 cm (common practice, no source)
_MIN_WATER_CM = 0.05


def pressure_at(elevation_m: float) -> float:
    """Return the pressure [Pa] of the standard atmosphere at an elevation [m], -450 to 9000 (ISO 2533:1975)."""
    return float(STANDARD_PRESSURE * (1 - 2.25577e-5 * elevation_m) ** 5.25588)


def water_from_humidity(temp_air_c: Array, relative_humidity: Array) -> Array:
    """Return precipitable water from surface temperature and humidity.

    Parameters
    ----------
    temp_air_c : (n,) array [degC]
    relative_humidity : (n,) array [%]

    Returns
    -------
    (n,) array [cm], kept within 0.05 and 8

    References
    ----------
    C. Gueymard, Analysis of monthly average atmospheric precipitable water and turbidity in Canada and northern
    United States, Solar Energy 53 (1994) 57; through pvlib.
    """
    from pvlib.atmosphere import gueymard94_pw

    water = gueymard94_pw(np.asarray(temp_air_c), np.clip(relative_humidity, 1.0, 100.0))
    return np.clip(np.asarray(water, dtype=np.float64), _MIN_WATER_CM, _MAX_WATER_CM)


def ozone_van_heuklon(latitude_deg: float, longitude_deg: float, day_of_year: Array) -> Array:
    """Return the ozone column.

    Parameters
    ----------
    latitude_deg, longitude_deg : float [deg], north and east positive
    day_of_year : (n,) array [day], 1 to 366

    Returns
    -------
    (n,) array [atm-cm]

    References
    ----------
    T. K. van Heuklon, Estimating atmospheric ozone for solar radiation models, Solar Energy 22 (1979) 63, eq. 4.
    """
    north = latitude_deg > 0
    amplitude, beta, seasonal, phase = (150.0, 1.28, 40.0, -30.0) if north else (100.0, 1.5, 30.0, 152.625)
    waves = 3.0 if north else 2.0
    shift = (20.0 if longitude_deg > 0 else 0.0) if north else -75.0
    day = np.asarray(day_of_year, dtype=np.float64)
    bracket = (
        amplitude
        + seasonal * np.sin(np.radians(0.9865 * (day + phase)))
        + 20.0 * np.sin(np.radians(waves * (longitude_deg + shift)))
    )
    return np.asarray((235.0 + bracket * np.sin(np.radians(beta * latitude_deg)) ** 2) / 1000.0)


def turbidity_climatology(latitude_deg: float, longitude_deg: float) -> Array:
    """Return the Linke turbidity of each month, (12,) [1], from the map that pvlib ships (SoDa, 1/12 degree).

    References
    ----------
    J. Remund, L. Wald, M. Lefevre, T. Ranchin, J. Page, Worldwide Linke turbidity information, ISES 2003.
    """
    return _turbidity_at(latitude_deg, longitude_deg).copy()


@lru_cache(maxsize=256)  # asked for again for every year of a site, and every part of a year
def _turbidity_at(latitude_deg: float, longitude_deg: float) -> Array:
    import h5py

    path = resources.files("pvlib") / "data" / "LinkeTurbidities.h5"
    with resources.as_file(path) as file, h5py.File(file, "r") as data:
        grid = data["LinkeTurbidity"]
        row = _pixel(latitude_deg, 90.0, -90.0, grid.shape[0])
        column = _pixel(longitude_deg, -180.0, 180.0, grid.shape[1])
        return np.asarray(grid[row, column, :], dtype=np.float64) / 20.0


def _pixel(degrees: float, first: float, last: float, count: int) -> int:
    at = round((degrees - first) / (last - first) * count - 0.5)
    return int(min(max(at, 0), count - 1))


def aod500_from_broadband(aod_broadband: Array, angstrom_exponent: Array) -> Array:
    """Return the aerosol optical depth at 500 nm whose broadband depth is the given one.

    Parameters
    ----------
    aod_broadband : (...) array [1]
    angstrom_exponent : (...) array [1]

    Returns
    -------
    (...) array [1]

    Notes
    -----
    Inverts tau_bb = 0.27583 tau_380 + 0.35 tau_500 (R. Bird, R. Hulstrom, SERI/TR-642-761 (1981)) with the Angstrom
    law between 380 and 500 nm.
    """
    ratio_380 = (380.0 / 500.0) ** -np.asarray(angstrom_exponent)
    return np.asarray(np.asarray(aod_broadband) / (0.27583 * ratio_380 + 0.35))


def aod500_from_turbidity(linke_turbidity: Array, water_cm: Array, angstrom_exponent: Array) -> Array:
    """Return the aerosol optical depth at 500 nm that gives a Linke turbidity at air mass 2.

    Parameters
    ----------
    linke_turbidity : (n,) array [1]
    water_cm : (n,) array [cm]
    angstrom_exponent : (n,) array [1]

    Returns
    -------
    (n,) array [1], kept within `AOD_RANGE`

    References
    ----------
    F. Kasten, The Linke turbidity factor based on improved values of the integral Rayleigh optical thickness, Solar
    Energy 56 (1996) 239; inverted on a table of broadband depths.
    """
    from pvlib.atmosphere import kasten96_lt

    depths = np.linspace(0.0, 2.0, 401)
    turbidity = kasten96_lt(2.0, np.asarray(water_cm)[:, None], depths)
    broadband = np.array(
        [np.interp(wanted, row, depths) for wanted, row in zip(linke_turbidity, turbidity, strict=True)]
    )
    return np.clip(aod500_from_broadband(broadband, angstrom_exponent), *AOD_RANGE)
