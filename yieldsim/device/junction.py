"""One light-absorbing junction: its response, its losses, and its curve at any temperature."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import STANDARD_CELL_TEMPERATURE, STANDARD_IRRADIANCE, THERMAL_EV_PER_K
from yieldsim.device import balance, diode
from yieldsim.device.fold import folded
from yieldsim.device.response import Response, scaled, shifted
from yieldsim.spectrum import reference_bands

Array = NDArray[np.float64]

_M2_PER_CM2 = 1e-4

#: Field -> lowest and highest sane value; what lies outside is a slip of unit or sign.
LIMITS: dict[str, tuple[float, float]] = {
    "gap_ev": (0.35, 4.0),
    "external_radiative_efficiency": (1e-20, 1.0),
    "ideality": (1.0, 3.0),
    "series_resistance_ohm_cm2": (0.0, 1000.0),
    "shunt_resistance_ohm_cm2": (1.0, math.inf),
    "gap_shift_ev_per_k": (-2e-3, 2e-3),
    "nonradiative_drift_per_k": (-0.3, 0.3),
    "recombination_v": (0.0, 0.5),  # and 0 or `LEAST_RECOMBINATION_V` and above
    "built_in_v": (0.3, math.inf),
    "reflection": (0.0, 0.9),
    "parasitic": (0.0, 0.9),
    "transmits": (0.0, 0.95),
}

#: Below it [V] an i-layer loses nothing and cuts its curve off at the built-in voltage, sharper than can be solved.
LEAST_RECOMBINATION_V = 1e-6


@dataclass(frozen=True, slots=True, eq=False)
class Junction:
    """A junction by what a datasheet or a measurement says of it.

    Parameters
    ----------
    gap_ev : float [eV], gap at 25 degC
    response : Response, external quantum efficiency at 25 degC and short circuit
    external_radiative_efficiency : float [1], pairs that leave as light at open circuit over all pairs, at the
        standard photocurrent; sets how far the voltage stays below the radiative limit
    ideality : float [1], ideality of the diode, 1-3
    series_resistance_ohm_cm2 : float [ohm cm2]
    shunt_resistance_ohm_cm2 : float [ohm cm2], inf = none
    gap_shift_ev_per_k : float [eV K-1], drift of the gap with temperature, negative = narrows when hot
    nonradiative_drift_per_k : float [K-1], growth of non-radiative over radiative recombination with temperature; 0 =
        the external radiative efficiency holds at all temperatures
    recombination_v : float [V], d^2/(mu tau) of an i-layer at 25 degC: loss of generated carriers that grows as the
        field in it falls (Merten et al. 1998); 0 = none
    built_in_v : float [V], built-in voltage of that i-layer
    reflection : float [1], light the junction throws back, which its response has lost already; matters in a stack
    parasitic : float [1], light lost on the way out at its rear (contacts, glue) of what it lets through
    transmits : float [1], share of the light above its edge that a thinned junction lets through; lowers its response
    absorptance : Response or None, share of the light it takes in over wavelength, at 25 degC, before thinning; None
        = taken from the response: all of it up to the plateau, then as the response falls

    Raises
    ------
    ValueError
        For a value outside `LIMITS`, or a response that does not reach the gap.
    """

    gap_ev: float
    response: Response
    external_radiative_efficiency: float = 1.0
    ideality: float = 1.0
    series_resistance_ohm_cm2: float = 0.0
    shunt_resistance_ohm_cm2: float = math.inf
    gap_shift_ev_per_k: float = 0.0
    recombination_v: float = 0.0
    built_in_v: float = math.inf
    reflection: float = 0.0
    parasitic: float = 0.0
    transmits: float = 0.0
    absorptance: Response | None = None
    nonradiative_drift_per_k: float = 0.0

    def __post_init__(self) -> None:
        """Refuse what cannot be."""
        faults = [
            f"{name} is {getattr(self, name):g}; it must lie in {low:g} to {high:g}"
            for name, (low, high) in LIMITS.items()
            if not low <= getattr(self, name) <= high
        ]
        if self.recombination_v > 0 and not self.recombination_v < self.built_in_v / 4:
            faults.append(
                f"recombination_v is {self.recombination_v:g} V with a built-in voltage of {self.built_in_v:g} V; "
                "it must stay below a quarter of it, or little is collected at all"
            )
        if 0 < self.recombination_v < LEAST_RECOMBINATION_V:
            faults.append(
                f"recombination_v is {self.recombination_v:g} V; it must be 0, or {LEAST_RECOMBINATION_V:g} V or more"
            )
        if self.recombination_v > 0 and math.isinf(self.built_in_v):
            faults.append("recombination_v needs a finite built_in_v")
        if faults:
            raise ValueError("; ".join(faults))


def standard_photocurrent(response: Response) -> float:
    """Return the current [A m-2] that a response collects from the reference spectrum scaled to 1000 W/m2."""
    bands = reference_bands()
    return float(folded(response) @ bands * (STANDARD_IRRADIANCE / bands.sum()))


def reference_photocurrent(junction: Junction) -> float:
    """Return the standard photocurrent [A m-2] of a junction outside any stack, at which its quality is defined."""
    return standard_photocurrent(response_at(junction, STANDARD_CELL_TEMPERATURE))


def response_at(junction: Junction, temperature: float) -> Response:
    """Return the response [1] at a cell temperature [K]: the edge drifts with the gap, thinning lowers it."""
    moved = shifted(junction.response, _drift(junction, temperature), junction.gap_ev)
    return scaled(moved, 1 - junction.transmits) if junction.transmits else moved


def absorptance_at(junction: Junction, temperature: float) -> tuple[Array, Array]:
    """Return the share of light that a junction takes in, over wavelength, at a cell temperature [K].

    Returns
    -------
    (n,) array [nm] and (n,) array [1]; constant below the first wavelength, none beyond the last

    Notes
    -----
    If the junction does not say, its response tells: up to the plateau (the last point above 95 % of the peak) all
    light is taken in, collected or not; beyond, the absorptance falls as the response does.
    """
    given = junction.absorptance
    curve = shifted(given or junction.response, _drift(junction, temperature), junction.gap_ev)
    level = curve.quantum_efficiency
    if given is None:
        last = int(np.flatnonzero(level >= 0.95 * level.max())[-1])
        level = np.minimum(level / level[last], 1.0)
        level[: last + 1] = 1.0
    return curve.wavelength_nm, level * (1 - junction.transmits)


def _drift(junction: Junction, temperature: float) -> float:
    return junction.gap_shift_ev_per_k * (temperature - STANDARD_CELL_TEMPERATURE)


def saturation_current(junction: Junction, temperature: Any) -> Any:
    """Return the diode's saturation current at cell temperatures.

    Parameters
    ----------
    junction : Junction
    temperature : (...) array [K]

    Returns
    -------
    (...) array [A m-2]

    Notes
    -----
    Detailed balance with the response at each temperature, see `balance`. One response is built for each different
    temperature: meant for tables and single values; `bank.Bank` interpolates for hours.
    """
    temperature = np.asarray(temperature, dtype=np.float64)
    levels, where = np.unique(temperature, return_inverse=True)
    radiative = np.array([_radiative_current(junction, float(level)) for level in levels])
    collected = reference_photocurrent(junction)
    efficiency = external_radiative_efficiency_at(junction, levels)
    values = balance.saturation_current(radiative, collected, efficiency, junction.ideality)
    return values[where].reshape(temperature.shape)[()]


def external_radiative_efficiency_at(junction: Junction, temperature: Any) -> Any:
    """Return the external radiative efficiency (...) [1] at cell temperatures (...) [K].

    Notes
    -----
    Non-radiative over radiative recombination, (1 - ERE)/ERE, grows as exp(drift (T - 298.15 K)); so it stays in 0-1.
    """
    loss = 1 / junction.external_radiative_efficiency - 1
    growth = np.exp(junction.nonradiative_drift_per_k * (np.asarray(temperature)[()] - STANDARD_CELL_TEMPERATURE))
    return 1 / (1 + loss * growth)


def _radiative_current(junction: Junction, temperature: float) -> float:
    if not math.isfinite(temperature):
        return math.nan
    response = response_at(junction, temperature)
    return float(balance.radiative_current(response.wavelength_nm, response.quantum_efficiency, temperature))


def diode_at(junction: Junction, photocurrent: Any, temperature: Any, saturation: Any = None) -> diode.Diode:
    """Return the parameters of a junction's curve.

    Parameters
    ----------
    junction : Junction
    photocurrent : (...) array [A m-2], what its response collects
    temperature : (...) array [K], cell temperature
    saturation : (...) array [A m-2], its saturation current at that temperature if known already

    Returns
    -------
    Diode

    """
    temperature = np.asarray(temperature, dtype=np.float64)[()]
    if saturation is None:
        saturation = saturation_current(junction, temperature)
    series_resistance, shunt_conductance, recombination, built_in = constants(junction)
    return diode.Diode(
        photocurrent=generated(junction, photocurrent),
        saturation_current=saturation,
        thermal_voltage=junction.ideality * THERMAL_EV_PER_K * temperature,
        series_resistance=series_resistance,
        shunt_conductance=shunt_conductance,
        recombination_voltage=recombination,
        built_in_voltage=built_in,
    )


def constants(junction: Junction) -> tuple[float, float, float, float]:
    """Return series resistance [ohm m2], shunt conductance [ohm-1 m-2], recombination and built-in voltage [V]."""
    return (
        junction.series_resistance_ohm_cm2 * _M2_PER_CM2,
        1 / (junction.shunt_resistance_ohm_cm2 * _M2_PER_CM2),
        junction.recombination_v,
        junction.built_in_v,
    )


def generated(junction: Junction, photocurrent: Any) -> Any:
    """Return the current generated (...) [A m-2] where a response collects photocurrent (...) [A m-2].

    Notes
    -----
    A response is measured at short circuit, where an i-layer has lost the share chi/Vbi already: what is generated is
    larger by that much, so that the curve passes through the measured current.
    """
    if junction.recombination_v == 0:
        return photocurrent
    return photocurrent / (1 - junction.recombination_v / junction.built_in_v)


def moved_to_gap(junction: Junction, gap_ev: float) -> Junction:
    """Return a junction of the same quality at another gap [eV]: its response's edge moves there, all else stays.

    Raises
    ------
    ValueError
        If the gap is outside `LIMITS` or beyond the response's blue end.
    """
    move = gap_ev - junction.gap_ev
    absorbed = junction.absorptance
    return replace(
        junction,
        gap_ev=gap_ev,
        response=shifted(junction.response, move, junction.gap_ev),
        absorptance=absorbed if absorbed is None else shifted(absorbed, move, junction.gap_ev),
    )
