"""The clear sky a place's light is measured by: its turbidity climatology, nothing of the file's own."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from yieldsim.sky import atmosphere, sun
from yieldsim.weather import Weather

Array = NDArray[np.float64]

SOLAR_CONSTANT = 1361.0  # W m-2, total solar irradiance at 1 AU, Kopp & Lean (2011), doi:10.1029/2010GL045777


def clear_global(weather: Weather, course: sun.SunCourse) -> Array:
    """Return global light under a clear sky, mean over each interval, (n,) [W m-2].

    Notes
    -----
    Ineichen & Perez (2002) through pvlib, with the Linke turbidity of the climatology that pvlib ships.
    """
    from pvlib.clearsky import ineichen

    local = weather.time + round(weather.utc_offset_h * 3600)
    month = local.astype("datetime64[s]").astype("datetime64[M]").astype(np.int64) % 12
    turbidity = atmosphere.turbidity_climatology(weather.latitude_deg, weather.longitude_deg)[month]
    zenith = np.degrees(np.arccos(np.clip(course.cos_zenith, 0.0, 1.0)))
    pressure = atmosphere.pressure_at(weather.elevation_m)
    mass = sun.relative_air_mass(np.maximum(course.cos_zenith, 0.0)) * pressure / 101325.0
    top = SOLAR_CONSTANT * course.earth_sun
    found = ineichen(zenith, mass, turbidity, altitude=weather.elevation_m, dni_extra=top)
    return np.asarray(np.nan_to_num(np.asarray(found["ghi"], dtype=np.float64)) * course.lit)


def top_of_air(course: sun.SunCourse) -> Array:
    """Return what the sun sends to a horizontal plane above the air, mean over each interval, (n,) [W m-2]."""
    return np.asarray(SOLAR_CONSTANT * course.earth_sun * course.cos_zenith * course.lit)
