"""A site's hours and its 24 days of spectra as CF datasets."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from yieldsim import spectrum
from yieldsim.device.stack import Absorber
from yieldsim.study import light
from yieldsim.study.hourly import PlaneYear, SiteSky
from yieldsim.study.plan import MountingPlan
from yieldsim.units import celsius

Array = NDArray[np.float64]

_UNITS = {
    "ghi": ("W m-2", "global horizontal irradiance"),
    "dni": ("W m-2", "direct normal irradiance"),
    "dhi": ("W m-2", "diffuse horizontal irradiance"),
    "temp_air": ("degC", "air temperature"),
    "wind_speed": ("m s-1", "wind speed"),
}


def _attributes(site: str, sky: SiteSky, title: str) -> dict[str, Any]:
    weather = sky.weather
    return {
        "Conventions": "CF-1.11",
        "title": title,
        "site": site,
        "source": f"yieldsim from {weather.source}",
        "latitude_deg": weather.latitude_deg,
        "longitude_deg": weather.longitude_deg,
        "elevation_m": weather.elevation_m,
        "utc_offset_h": weather.utc_offset_h,
        "atmosphere_sources": "; ".join(f"{name}: {source}" for name, source in sky.sources),
        "comment": "time is the start of each interval, UTC; values are means over it. " + " ".join(weather.notes),
    }


def _time(sky: SiteSky, chosen: Any) -> tuple[str, Array, dict[str, str]]:
    stamps = sky.weather.time[chosen]
    attributes = {"standard_name": "time", "units": "seconds since 1970-01-01T00:00:00Z", "calendar": "standard"}
    return "time", stamps, attributes


def _spread(sky: SiteSky, values: Array, fill: float) -> Array:
    """Put values of the lit intervals (..., n_lit) among all intervals (..., n)."""
    whole = np.full((*values.shape[:-1], len(sky.weather)), fill, dtype=np.float32)
    whole[..., sky.lit] = values
    return whole


def hourly_dataset(site: str, sky: SiteSky, years: Sequence[PlaneYear], absorbers: Sequence[Absorber]) -> xr.Dataset:
    """Return every interval of a site: the weather used, what was mended, sun, plane, and each absorber's output."""
    weather = sky.weather
    n = len(weather)
    labels = [year.mounting.name for year in years]
    names = [absorber.name for absorber in absorbers]
    junctions = [f"{a.name} / {i + 1}" for a in absorbers for i in range(len(a.junctions))]
    variables: dict[str, Any] = {
        name: (
            "time",
            weather[name].astype(np.float32),
            {"units": unit, "long_name": text, "cell_methods": "time: mean"},
        )
        for name, (unit, text) in _UNITS.items()
    }

    def lit(name: str, values: Array, unit: str, text: str, fill: float = np.nan) -> None:
        variables[name] = ("time", _spread(sky, values, fill), {"units": unit, "long_name": text})

    variables["flags"] = (
        "time",
        weather.flags.astype(np.int32),
        {"long_name": "what was done to the interval, bit field"},
    )
    lit(
        "zenith", np.degrees(np.arccos(sky.sun.cos_zenith)), "degree", "apparent solar zenith, lit part of the interval"
    )
    lit("lit_share", sky.sun.lit, "1", "share of the interval with the sun up", 0.0)
    lit("aod500", sky.sky.aod500, "1", "aerosol optical depth at 500 nm used")
    lit("precipitable_water", sky.air.water_cm, "cm", "precipitable water used")
    lit("ozone", sky.air.ozone_atm_cm, "atm-cm", "ozone column used")
    lit("cloud_optical_depth", sky.sky.cloud_depth, "1", "cloud depth of the obscured part of the interval", 0.0)
    lit("open_share", sky.sky.open_share, "1", "share of the lit part with open sun", 0.0)
    lit("clear", sky.sky.clear.astype(np.float64), "1", "1 where haze alone explains beam and diffuse light", 0.0)

    def stacked(name: str, dims: tuple[str, ...], values: Array, unit: str, text: str, fill: float) -> None:
        variables[name] = (dims, _spread(sky, values, fill), {"units": unit, "long_name": text})

    poa = np.array([year.plane_of_array for year in years])
    stacked("plane_of_array", ("mounting", "time"), poa, "W m-2", "front plane-of-array irradiance", 0.0)
    by_absorber = ("mounting", "absorber", "time")
    current = np.array([year.current for year in years])
    warm = celsius(np.array([year.cell_temperature for year in years]))
    power = np.array([year.power for year in years])
    stacked("current_density", ("mounting", "junction", "time"), current, "A m-2", "photocurrent density", 0.0)
    stacked("cell_temperature", by_absorber, warm, "degC", "cell temperature, lit intervals", np.nan)
    stacked("power", by_absorber, power, "W m-2", "power at the terminals per active area, before system losses", 0.0)
    coordinates = {
        "time": _time(sky, slice(0, n)),
        "mounting": ("mounting", np.array(labels, dtype=str)),
        "absorber": ("absorber", np.array(names, dtype=str)),
        "junction": ("junction", np.array(junctions, dtype=str)),
    }
    return xr.Dataset(variables, coordinates, _attributes(site, sky, "hourly means"))


def joined(parts: Sequence[xr.Dataset]) -> xr.Dataset:
    """Return datasets of one kind, one stretch of time after the other, as one."""
    if len(parts) == 1:
        return parts[0]
    return xr.concat(parts, "time", data_vars="minimal", coords="minimal", compat="equals", combine_attrs="override")


def chosen_days(sky: SiteSky) -> list[tuple[int, str, NDArray[np.intp]]]:
    """Return (month, kind, positions among the lit intervals) of the clearest and the median day of each month.

    Days are ordered by their global light over that outside the air; the median day is the middle one of that order.
    """
    weather = sky.weather
    local = weather.time[sky.lit] + weather.interval_s // 2 + round(weather.utc_offset_h * 3600)
    date = local // 86400
    top = sky.sun.earth_sun * sky.sun.cos_zenith * sky.sun.lit
    ground = sky.sky.beam.sum(axis=1) * sky.sun.cos_zenith + sky.sky.diffuse.sum(axis=1)
    days: list[tuple[int, str, NDArray[np.intp]]] = []
    for month in range(12):
        inside = np.flatnonzero(sky.month == month)
        if inside.size == 0:
            continue
        dates, which = np.unique(date[inside], return_inverse=True)
        clearness = np.bincount(which, ground[inside]) / np.bincount(which, top[inside])
        order = np.argsort(clearness, kind="stable")
        for kind, pick in (("clear", order[-1]), ("median", order[len(order) // 2])):
            days.append((month, kind, inside[date[inside] == dates[pick]]))
    return days


def spectra_dataset(site: str, sky: SiteSky, years: Sequence[PlaneYear]) -> xr.Dataset:
    """Return the band spectra of 24 days: per month the clearest and the median one."""
    days = chosen_days(sky)
    at = np.concatenate([positions for _, _, positions in days])
    kinds = np.concatenate([[kind] * len(positions) for _, kind, positions in days])
    months = np.concatenate([[month + 1] * len(positions) for month, _, positions in days])
    numbers = np.concatenate([[2 * month + (kind == "median")] * len(at) for month, kind, at in days])
    front = np.array([(y.parts.beam + y.parts.sky + y.parts.ground)[at] for y in years])
    edges = spectrum.band_edges()
    per_band = {"units": "W m-2"}
    variables: dict[str, Any] = {
        "beam": (("time", "band"), sky.sky.beam[at], per_band | {"long_name": "energy in each band, facing the sun"}),
        "diffuse": (
            ("time", "band"),
            sky.sky.diffuse[at],
            per_band | {"long_name": "energy in each band, from the sky"},
        ),
        "plane_of_array": (
            ("mounting", "time", "band"),
            front,
            per_band | {"long_name": "energy in each band, on the plane"},
        ),
        "band_edges": (("band", "edge"), np.stack([edges[:-1], edges[1:]], axis=1), {"units": "nm"}),
        "month": ("time", months.astype(np.int32), {"long_name": "calendar month of the day"}),
        "day": (
            "time",
            numbers.astype(np.int32),
            {"long_name": "number of the chosen day: two a month, January's clearest is 0"},
        ),
        "day_kind": (
            "time",
            kinds.astype(str),
            {"long_name": "clear: the month's clearest day; median: its middle one"},
        ),
    }
    variables |= _circumstances(sky, at)
    coordinates = {
        "time": _time(sky, sky.lit[at]),
        "wavelength": ("band", spectrum.band_wavelengths(), {"units": "nm", "bounds": "band_edges"}),
        "mounting": ("mounting", np.array([year.mounting.name for year in years], dtype=str)),
    }
    return xr.Dataset(variables, coordinates, _attributes(site, sky, "band spectra of 24 days"))


def all_spectra_dataset(site: str, sky: SiteSky, mountings: Sequence[MountingPlan], at: NDArray[np.intp]) -> xr.Dataset:
    """Return the band spectra of chosen lit intervals, horizontal and on each front by where they come from.

    Parameters
    ----------
    site : str
    sky : SiteSky
    mountings : the site's
    at : (n,) int array, positions among the lit intervals
    """
    per_band = {"units": "W m-2", "cell_methods": "time: mean"}
    on_planes = [light.plane_parts(sky, mounting) for mounting in mountings]
    horizontal = sky.sky.beam[at] * sky.sun.cos_zenith[at, None] + sky.sky.diffuse[at]
    by_plane = ("mounting", "time", "band")

    def stacked(name: str, text: str) -> tuple[Any, ...]:
        return by_plane, np.array([getattr(parts, name)[at] for parts in on_planes]), per_band | {"long_name": text}

    variables: dict[str, Any] = {
        "beam": (("time", "band"), sky.sky.beam[at], per_band | {"long_name": "energy in each band, facing the sun"}),
        "diffuse": (
            ("time", "band"),
            sky.sky.diffuse[at],
            per_band | {"long_name": "energy in each band, from the sky"},
        ),
        "plane_beam": stacked("beam", "on the plane, from the sun and the bright sky around it"),
        "plane_sky": stacked("sky", "on the plane, from the rest of the sky"),
        "plane_ground": stacked("ground", "on the plane, from the ground"),
        "average_photon_energy": (
            "time",
            spectrum.average_photon_energy(horizontal),
            {"units": "eV", "long_name": "mean photon energy of global light, 280-4000 nm"},
        ),
    }
    edges = spectrum.band_edges()
    variables["band_edges"] = (("band", "edge"), np.stack([edges[:-1], edges[1:]], axis=1), {"units": "nm"})
    variables |= _circumstances(sky, at)
    coordinates = {
        "time": _time(sky, sky.lit[at]),
        "wavelength": ("band", spectrum.band_wavelengths(), {"units": "nm", "bounds": "band_edges"}),
        "mounting": ("mounting", np.array([mounting.name for mounting in mountings], dtype=str)),
    }
    return xr.Dataset(variables, coordinates, _attributes(site, sky, "band spectra of lit intervals"))


def _circumstances(sky: SiteSky, at: NDArray[np.intp]) -> dict[str, Any]:
    """Return the weather and air of chosen lit intervals."""
    found: dict[str, Any] = {
        "zenith": ("time", np.degrees(np.arccos(sky.sun.cos_zenith[at])), {"units": "degree"}),
        "aod500": ("time", sky.sky.aod500[at], {"units": "1"}),
        "precipitable_water": ("time", sky.air.water_cm[at], {"units": "cm"}),
        "ozone": ("time", sky.air.ozone_atm_cm[at], {"units": "atm-cm"}),
        "cloud_optical_depth": ("time", sky.sky.cloud_depth[at], {"units": "1"}),
        "open_share": ("time", sky.sky.open_share[at], {"units": "1"}),
    }
    for name, (unit, text) in _UNITS.items():
        found[name] = ("time", sky.weather[name][sky.lit[at]], {"units": unit, "long_name": text})
    return found
