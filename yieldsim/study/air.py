"""What the air over a site holds in every lit interval, and where each part of it came from."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from yieldsim import spectrum
from yieldsim.sky import atmosphere, column, ground
from yieldsim.study.plan import AtmospherePlan, GroundPlan, Monthly, SitePlan
from yieldsim.weather import Weather

Array = NDArray[np.float64]

DEFAULT_ALBEDO = 0.2  # a mixed ground of grass and soil (common practice, no source)
DEFAULT_WATER_CM = 1.4164  # the water of ASTM G173-03, where a file says nothing of humidity
_GROUND_COLUMNS = ("albedo", "snow_depth")
HOURLY = "; each clear hour's own from its beam"
CLIMATOLOGY = "Linke turbidity climatology (Remund et al. 2003)"


def calendar(
    weather: Weather, lit: NDArray[np.intp], month: NDArray[np.intp], sources: Sequence[tuple[str, str]]
) -> tuple[NDArray[np.intp], NDArray[np.intp]] | None:
    """Return day and month for the monthly haze, where the air's haze is a climatology that the beam may correct."""
    if not dict(sources)["aod500"].startswith(CLIMATOLOGY):
        return None
    day = (weather.time[lit] + round(weather.utc_offset_h * 3600)) // 86400
    return day.astype(np.intp), month[lit]


def gather(
    site: SitePlan,
    weather: Weather,
    lit: NDArray[np.intp],
    month: NDArray[np.intp],
    day: NDArray[np.intp],
    cos_zenith: Array,
) -> tuple[column.Air, tuple[tuple[str, str], ...]]:
    """Gather the air from the study, then the file, then what can be derived; say which it was."""
    plan = site.atmosphere
    exponent, exponent_source = _given_or(
        plan.angstrom_exponent, month, np.full(12, atmosphere.DEFAULT_ANGSTROM_EXPONENT)[month], "Bird & Riordan 1984"
    )
    water, water_source = _water(plan, weather, lit, month)
    ozone_default = atmosphere.ozone_van_heuklon(weather.latitude_deg, weather.longitude_deg, day.astype(np.float64))
    ozone, ozone_source = _given_or(plan.ozone_atm_cm, month, ozone_default, "van Heuklon 1979")
    haze, haze_source = _haze(plan, weather, lit, month, water, exponent)
    from_height = np.full(len(lit), atmosphere.pressure_at(weather.elevation_m))
    pressure, pressure_source = _column_or(
        weather, "pressure", lit, from_height, "standard atmosphere at the elevation"
    )
    albedo, albedo_source = _albedo(site.ground, weather, lit)
    air = column.Air(cos_zenith, pressure, water, ozone, haze, exponent, albedo)
    sources = (
        ("aod500", haze_source + (HOURLY if plan.haze == "hourly" else "")),
        ("angstrom_exponent", exponent_source),
        ("single_scattering_albedo", _said(plan.single_scattering_albedo)),
        ("asymmetry", _said(plan.asymmetry)),
        ("precipitable_water", water_source),
        ("ozone", ozone_source),
        ("pressure", pressure_source),
        ("albedo", albedo_source),
    )
    return air, sources


def _said(given: float | None) -> str:
    """Return where a number of the haze came from."""
    return "Bird & Riordan 1984" if given is None else "study"


def _given_or(given: Monthly | None, month: NDArray[np.intp], default: Array, source: str) -> tuple[Array, str]:
    """Return the study's monthly values by hour, or the default."""
    return (default, source) if given is None else (np.asarray(given)[month], "study")


def _column_or(weather: Weather, name: str, lit: NDArray[np.intp], default: Array, source: str) -> tuple[Array, str]:
    """Return a file's column where it is filled, the default elsewhere, and where both came from."""
    if name not in weather:
        return default, source
    values = weather[name][lit]
    filled = np.isfinite(values)
    if not filled.any():
        return default, source
    if filled.all():
        return values, f"file ({name})"
    return np.where(filled, values, default), f"file ({name}) in {filled.mean():.1%} of lit hours, else {source}"


def _water(plan: AtmospherePlan, weather: Weather, lit: NDArray[np.intp], month: NDArray[np.intp]) -> tuple[Array, str]:
    if plan.water_cm is not None:
        return np.asarray(plan.water_cm)[month], "study"
    default, source = np.full(len(lit), DEFAULT_WATER_CM), "that of ASTM G173-03, assumed"
    humidity = _humidity(weather)
    if humidity is not None:
        derived = atmosphere.water_from_humidity(weather["temp_air"][lit], humidity[lit])
        filled = np.isfinite(derived)
        default = np.where(filled, derived, default)
        source = "temperature and humidity (Gueymard 1994)"
        if not filled.all():
            source += f" in {filled.mean():.1%} of lit hours, else assumed"
    return _column_or(weather, "precipitable_water", lit, default, source)


def _humidity(weather: Weather) -> Array | None:
    """Return relative humidity [%], from the dew point (Magnus, WMO-No. 8) where the file has no humidity."""
    if "relative_humidity" in weather:
        return weather["relative_humidity"]
    if "temp_dew" not in weather:
        return None
    dew, air = weather["temp_dew"], weather["temp_air"]
    return np.asarray(100 * np.exp(17.62 * dew / (243.12 + dew) - 17.62 * air / (243.12 + air)))


def _albedo(plan: GroundPlan, weather: Weather, lit: NDArray[np.intp]) -> tuple[Array, str]:
    """Return the ground's albedo (n,) or (n, n_band) [1] of the lit intervals, and where it came from."""
    if plan.spectrum is not None:
        bare = ground.folded(*(np.asarray(column) for column in plan.spectrum))
    elif plan.surface is not None:
        bare = ground.surface(plan.surface)
    elif plan.albedo is not None:
        return np.full(len(lit), plan.albedo), f"study ({plan.albedo:g})"
    elif not any(name in weather for name in _GROUND_COLUMNS):
        return np.full(len(lit), DEFAULT_ALBEDO), f"{DEFAULT_ALBEDO:g}, common practice"
    else:
        bare = np.full_like(spectrum.band_wavelengths(), DEFAULT_ALBEDO)
    measured, depth = (weather[name][lit] if name in weather else np.full(len(lit), np.nan) for name in _GROUND_COLUMNS)
    albedo, snow = ground.albedo_of(bare, plan.albedo, measured, depth)
    source = plan.surface or f"{DEFAULT_ALBEDO:g}, common practice"
    if plan.albedo is not None:
        source += f" at {plan.albedo:g} (study)"
    filled = np.isfinite(measured)
    if filled.any():
        level = "all" if filled.all() else f"{filled.mean():.1%} of"
        source += f"; level of {level} lit hours from the file (albedo)"
    if snow.any():
        source += f"; snow in {snow.mean():.1%} of lit hours"
    return albedo, source


def _haze(
    plan: AtmospherePlan,
    weather: Weather,
    lit: NDArray[np.intp],
    month: NDArray[np.intp],
    water: Array,
    exponent: Array,
) -> tuple[Array, str]:
    if plan.aod500 is not None:
        return np.asarray(plan.aod500)[month], "study"
    turbidity = atmosphere.turbidity_climatology(weather.latitude_deg, weather.longitude_deg)
    count = np.maximum(np.bincount(month, minlength=12), 1)
    monthly_water = np.bincount(month, water, minlength=12) / count
    monthly_exponent = np.bincount(month, exponent, minlength=12) / count
    monthly = atmosphere.aod500_from_turbidity(turbidity, monthly_water, monthly_exponent)
    default, source = monthly[month], CLIMATOLOGY
    if "aod_broadband" in weather:
        broadband = atmosphere.aod500_from_broadband(weather["aod_broadband"][lit], exponent)
        filled = np.isfinite(broadband)
        if filled.any():
            default = np.where(filled, np.clip(broadband, *atmosphere.AOD_RANGE), default)
            part = "" if filled.all() else f" in {filled.mean():.1%} of lit hours, else {source}"
            source = f"file (aod_broadband, Bird & Hulstrom 1981){part}"
    haze, source = _column_or(weather, "aod500", lit, default, source)
    return np.clip(haze, *atmosphere.AOD_RANGE), source
