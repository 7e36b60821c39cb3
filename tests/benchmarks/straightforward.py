"""The straightforward way to the same figures: a clear-sky spectrum, the trapezoid rule, one diode, all from pvlib.

It knows no cloud and no stack; a stack's junctions are taken one by one, which is less work than a stack.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pvlib import pvsystem, spectrum

from yieldsim.constants import PHOTON_EV_NM, STANDARD_CELL_TEMPERATURE, THERMAL_EV_PER_K
from yieldsim.device.bank import Bank
from yieldsim.device.stack import Absorber, responses_at
from yieldsim.sky.sun import relative_air_mass
from yieldsim.study import hourly, light
from yieldsim.study.hourly import SiteSky
from yieldsim.study.plan import MountingPlan

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Prepared:
    """What needs no light: responses on the wavelengths, cell temperatures, diodes of each junction at both of them."""

    responses: Array
    temperature: Array
    diodes: list[tuple[dict[str, Any], dict[str, Any]]]


def inputs_of(sky: SiteSky) -> dict[str, Any]:
    """Return the arguments of `spectrl2` for the lit hours of a site, a plane tilted by 30 deg."""
    zenith = np.degrees(np.arccos(sky.sun.cos_zenith))
    direction = sky.sun.direction.mean(axis=1)
    normal = np.array([0.0, -np.sin(np.radians(30.0)), np.cos(np.radians(30.0))])
    day = (sky.weather.time[sky.lit] // 86400) % 365 + 1
    return {
        "apparent_zenith": zenith,
        "aoi": np.degrees(np.arccos(np.clip(direction @ normal, 0.0, 1.0))),
        "surface_tilt": 30.0,
        "ground_albedo": 0.2,
        "surface_pressure": sky.air.pressure,
        "relative_airmass": relative_air_mass(sky.sun.cos_zenith),
        "precipitable_water": sky.air.water_cm,
        "ozone": sky.air.ozone_atm_cm,
        "aerosol_turbidity_500nm": sky.air.aod500,
        "dayofyear": day.astype(np.float64),
    }


def spectra(inputs: dict[str, Any]) -> dict[str, Array]:
    """Return clear-sky spectra of all hours."""
    found: dict[str, Array] = spectrum.spectrl2(**inputs)
    return found


def prepared(sky: SiteSky, mounting: MountingPlan, absorbers: Sequence[Absorber]) -> Prepared:
    """Prepare what the timed part takes as given."""
    bank = Bank.of(absorbers)
    wavelength = spectra({name: np.ravel(value)[:1] for name, value in inputs_of(sky).items()})["wavelength"]
    responses = [r for absorber in absorbers for r in responses_at(absorber, STANDARD_CELL_TEMPERATURE)]
    on_grid = [np.interp(wavelength, r.wavelength_nm, r.quantum_efficiency, right=0.0) for r in responses]
    year = hourly.plane_year(sky, mounting, light.plane_parts(sky, mounting), absorbers)
    cool = np.full_like(year.cell_temperature, STANDARD_CELL_TEMPERATURE)
    both = [(bank.saturation(heat), heat) for heat in (cool, year.cell_temperature)]
    diodes = [
        tuple(_diode(junction, saturation[j], heat[bank.absorber_of[j]]) for saturation, heat in both)
        for j, junction in enumerate(bank.junctions)
    ]
    return Prepared(np.array(on_grid) * wavelength / PHOTON_EV_NM, wavelength, diodes)  # type: ignore[arg-type]


def _diode(junction: Any, saturation: Array, temperature: Array) -> dict[str, Any]:
    return {
        "saturation_current": saturation,
        "resistance_series": junction.series_resistance_ohm_cm2 * 1e-4,
        "resistance_shunt": min(junction.shunt_resistance_ohm_cm2 * 1e-4, 1e9),
        "nNsVth": junction.ideality * THERMAL_EV_PER_K * temperature,
    }


def year(inputs: dict[str, Any], work: Prepared) -> list[tuple[float, float, float]]:
    """Return charge and energy at both temperatures of each junction over the hours."""
    light_ = np.nan_to_num(spectra(inputs)["poa_global"])
    totals = []
    for response, diodes in zip(work.responses, work.diodes, strict=True):
        current = np.trapezoid(light_ * response[:, None], work.temperature, axis=0)
        powers = [float(np.sum(pvsystem.singlediode(current, **diode)["p_mp"])) for diode in diodes]
        totals.append((float(current.sum()), *powers))
    return totals  # type: ignore[return-value]
