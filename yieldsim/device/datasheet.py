"""From a datasheet to a junction: the quality, resistance and drift with which the model returns the sheet."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from scipy.optimize import brentq

from yieldsim.constants import STANDARD_CELL_TEMPERATURE, STANDARD_IRRADIANCE
from yieldsim.device import diode
from yieldsim.device.junction import (
    LIMITS,
    Junction,
    diode_at,
    reference_photocurrent,
    response_at,
    standard_photocurrent,
)
from yieldsim.device.response import scaled

#: How far the currents of sheet and response may differ before one of them is taken for wrong.
CURRENT_TOLERANCE = 0.05
#: How well figures that are given twice (efficiency and Jsc x Voc x FF) must agree.
AGREEMENT = 0.005
_ROUNDS = 12  # of voltage, fill factor and drift in turn; three are enough for 1e-6
_MOST_RESISTIVE = LIMITS["series_resistance_ohm_cm2"][1]
_LOG_LEAST_EFFICIENCY = float(np.log(LIMITS["external_radiative_efficiency"][0])) + 1e-9


@dataclass(frozen=True, slots=True)
class Sheet:
    """What a datasheet says, each None if it does not.

    Parameters
    ----------
    jsc_a_m2 : float [A m-2]
    voc_v : float [V], of one cell
    ff : float [1]
    efficiency : float [1]
    jsc_coefficient, voc_coefficient, power_coefficient : float [K-1], relative, around 25 degC
    area : ``cell`` = currents and efficiency are per collecting area; ``aperture`` or ``module`` = per larger area, of
        which area_fraction collects
    """

    jsc_a_m2: float | None = None
    voc_v: float | None = None
    ff: float | None = None
    efficiency: float | None = None
    jsc_coefficient: float | None = None
    voc_coefficient: float | None = None
    power_coefficient: float | None = None
    area: Literal["cell", "aperture", "module"] = "cell"


@dataclass(frozen=True, slots=True)
class Solved:
    """A junction that returns its sheet.

    Parameters
    ----------
    junction : Junction
    current_factor : float [1], by which the response was scaled to the sheet's current
    findings : what was solved from what, and what the sheet says but the model does not, in plain words
    """

    junction: Junction
    current_factor: float
    findings: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Figures:
    """What a junction does at standard conditions: [A m-2], [V], [1], [1], and relative changes [K-1]."""

    jsc: float
    voc: float
    ff: float
    efficiency: float
    jsc_coefficient: float
    voc_coefficient: float
    power_coefficient: float


def figures(junction: Junction) -> Figures:
    """Return what a junction does under the reference spectrum at 1000 W/m2 and 25 degC, outside any stack."""
    cold, mid, hot = (_point(junction, STANDARD_CELL_TEMPERATURE + step) for step in (-1.0, 0.0, 1.0))
    short, opened, power = mid
    change = [(h - c) / 2 / m for c, m, h in zip(cold, mid, hot, strict=True)]
    return Figures(short, opened, power / short / opened, power / STANDARD_IRRADIANCE, *change)


def solve(junction: Junction, sheet: Sheet, area_fraction: float = 1.0) -> Solved:
    """Return a junction that does at standard conditions what its sheet says.

    Parameters
    ----------
    junction : Junction, with the response, gap and ideality to keep; its other values stand where the sheet is silent
    sheet : Sheet
    area_fraction : float [1], collecting area over the area of the sheet, used unless that is the cell's

    Raises
    ------
    ValueError
        For a sheet that contradicts itself or the response, or that no junction of this response can reach; the limit
        is named.

    Notes
    -----
    Current: the response is scaled. Voltage: external radiative efficiency. Fill factor: series resistance. These in
    turn until nothing moves; each hardly touches the others. Then the drift of the gap from the current's temperature
    coefficient, and the drift of non-radiative recombination from that of the power, else of the voltage. A voltage
    coefficient beside that of the power is told with what the model has.
    """
    sheet = _per_collecting_area(sheet, area_fraction)
    _refuse_nonsense(sheet)
    sheet, findings = _completed(sheet, junction)
    junction, factor = _with_current(junction, sheet)
    for _ in range(_ROUNDS):
        before = junction
        if sheet.jsc_a_m2 is not None:  # a shunt and a series resistance take a little at short circuit
            correction = sheet.jsc_a_m2 / _point(junction, STANDARD_CELL_TEMPERATURE)[0]
            junction, factor = _scaled(junction, correction), factor * correction
        if sheet.voc_v is not None:
            junction = _with_voltage(junction, sheet.voc_v)
        if sheet.ff is not None:
            junction = _with_fill_factor(junction, sheet.ff)
        if _unmoved(before, junction):
            break
    if sheet.jsc_a_m2 is not None:
        findings.append(f"response scaled by {factor:.4f} to the sheet's Jsc")
    junction = _with_drifts(junction, sheet, findings)
    return Solved(junction, factor, tuple(findings))


def _point(junction: Junction, temperature: float) -> tuple[float, float, float]:
    """Return short-circuit current, open-circuit voltage and power of a junction at a temperature."""
    one = diode_at(junction, standard_photocurrent(response_at(junction, temperature)), temperature)
    return (
        float(diode.short_circuit(one)),
        float(diode.open_circuit(one)),
        float(diode.maximum_power(one)[0]),
    )


def _per_collecting_area(sheet: Sheet, area_fraction: float) -> Sheet:
    if sheet.area == "cell":
        return sheet
    return replace(
        sheet,
        jsc_a_m2=None if sheet.jsc_a_m2 is None else sheet.jsc_a_m2 / area_fraction,
        efficiency=None if sheet.efficiency is None else sheet.efficiency / area_fraction,
        area="cell",
    )


def _refuse_nonsense(sheet: Sheet) -> None:
    limits = {
        "jsc_a_m2": (1.0, 800.0),
        "voc_v": (0.05, 4.0),
        "ff": (0.25, 1.0),
        "efficiency": (0.001, 0.5),
        "jsc_coefficient": (-0.01, 0.01),
        "voc_coefficient": (-0.02, 0.01),
        "power_coefficient": (-0.02, 0.01),
    }
    faults = [
        f"{name} is {value:g}; it must lie in {low:g} to {high:g}"
        for name, (low, high) in limits.items()
        if (value := getattr(sheet, name)) is not None and not low <= value <= high
    ]
    if faults:
        raise ValueError("; ".join(faults))


def _completed(sheet: Sheet, junction: Junction) -> tuple[Sheet, list[str]]:
    """Return the sheet with the fill factor or voltage that its efficiency implies; refuse figures that disagree."""
    if sheet.efficiency is None:
        return sheet, []
    current = sheet.jsc_a_m2 if sheet.jsc_a_m2 is not None else reference_photocurrent(junction)
    power = sheet.efficiency * STANDARD_IRRADIANCE
    if sheet.voc_v is not None and sheet.ff is not None:
        implied = current * sheet.voc_v * sheet.ff
        if sheet.jsc_a_m2 is None:
            return replace(sheet, jsc_a_m2=power / sheet.voc_v / sheet.ff), ["current taken from efficiency/(Voc FF)"]
        if abs(implied / power - 1) > AGREEMENT:
            raise ValueError(
                f"efficiency {sheet.efficiency:.4g} against Jsc x Voc x FF = {implied / STANDARD_IRRADIANCE:.4g}; "
                f"they must agree within {AGREEMENT:.1%}"
            )
        return sheet, []
    if sheet.voc_v is not None:
        ratio = power / current / sheet.voc_v
        if not 0.25 <= ratio <= 1:
            raise ValueError(f"efficiency {sheet.efficiency:.4g} asks for a fill factor of {ratio:.3g}; at most 1")
        return replace(sheet, ff=ratio), ["fill factor taken from efficiency/(Jsc Voc)"]
    if sheet.ff is not None:
        return replace(sheet, voc_v=power / current / sheet.ff), ["voltage taken from efficiency/(Jsc FF)"]
    raise ValueError("an efficiency alone does not tell voltage from fill factor; give voc_v or ff too")


def _with_current(junction: Junction, sheet: Sheet) -> tuple[Junction, float]:
    if sheet.jsc_a_m2 is None:
        return junction, 1.0
    factor = sheet.jsc_a_m2 / _point(junction, STANDARD_CELL_TEMPERATURE)[0]
    if abs(factor - 1) > CURRENT_TOLERANCE:
        raise ValueError(
            f"Jsc of {sheet.jsc_a_m2 / 10:.4g} mA/cm2 is {factor - 1:+.1%} off what the response collects; "
            f"at most {CURRENT_TOLERANCE:.0%}"
        )
    return _scaled(junction, factor), factor


def _scaled(junction: Junction, factor: float) -> Junction:
    peak = float(junction.response.quantum_efficiency.max()) * factor
    if peak > 1:
        raise ValueError(f"the response would have to rise to {peak:.3f} to give the sheet's Jsc; at most 1")
    return replace(junction, response=scaled(junction.response, factor))


def _with_voltage(junction: Junction, voltage: float) -> Junction:
    def off(log_efficiency: float) -> float:
        trial = replace(junction, external_radiative_efficiency=float(np.exp(log_efficiency)))
        return _point(trial, STANDARD_CELL_TEMPERATURE)[1] - voltage

    most = off(0.0)
    if most < 0:
        raise ValueError(
            f"Voc of {voltage:.4g} V is above the radiative limit of this response, {voltage + most:.4g} V"
            " (with the shunt resistance given)"
        )
    if off(_LOG_LEAST_EFFICIENCY) > 0:
        raise ValueError(f"Voc of {voltage:.4g} V is too low for any external radiative efficiency above 1e-20")
    found = brentq(off, _LOG_LEAST_EFFICIENCY, 0.0, xtol=1e-12)
    return replace(junction, external_radiative_efficiency=float(np.exp(found)))


def _with_fill_factor(junction: Junction, fill_factor: float) -> Junction:
    def off(resistance: float) -> float:
        trial = replace(junction, series_resistance_ohm_cm2=resistance)
        short, opened, power = _point(trial, STANDARD_CELL_TEMPERATURE)
        return power / short / opened - fill_factor

    most = off(0.0)
    if most < 0:
        raise ValueError(
            f"FF of {fill_factor:.4g} is above {fill_factor + most:.4g}, the limit without series resistance at this "
            f"voltage (ideality {junction.ideality:g}, shunt {junction.shunt_resistance_ohm_cm2:g} ohm cm2)"
        )
    high = 1.0
    while off(high) > 0:
        high *= 2
        if high > _MOST_RESISTIVE:
            raise ValueError(f"FF of {fill_factor:.4g} is too low for any series resistance below {_MOST_RESISTIVE:g}")
    return replace(junction, series_resistance_ohm_cm2=float(brentq(off, 0.0, high, xtol=1e-12)))


def _with_drifts(junction: Junction, sheet: Sheet, findings: list[str]) -> Junction:
    """Return a junction whose temperature coefficients are the sheet's."""
    if sheet.jsc_coefficient is not None:
        # 1 meV/K is more than any absorber in use has
        junction = _with_drift(junction, "gap_shift_ev_per_k", 1e-3, "jsc_coefficient", sheet.jsc_coefficient, findings)
    if sheet.power_coefficient is not None:
        name, wanted = "power_coefficient", sheet.power_coefficient
    elif sheet.voc_coefficient is not None:
        name, wanted = "voc_coefficient", sheet.voc_coefficient
    else:
        return junction
    # 0.1 /K is a factor of 20 over 30 K
    junction = _with_drift(junction, "nonradiative_drift_per_k", 0.1, name, wanted, findings)
    if name == "power_coefficient" and sheet.voc_coefficient is not None:
        model = figures(junction).voc_coefficient
        findings.append(f"voc_coefficient: sheet {sheet.voc_coefficient:.3%}/K, model {model:.3%}/K")
    return junction


def _with_drift(junction: Junction, field: str, most: float, name: str, wanted: float, findings: list[str]) -> Junction:
    """Return a junction whose field, within +-most, gives the wanted temperature coefficient."""

    def off(drift: float) -> float:
        return float(getattr(figures(replace(junction, **{field: drift})), name) - wanted)  # type: ignore[arg-type]

    at_low, at_high = off(-most), off(most)
    if at_low * at_high > 0:
        low, high = sorted((at_low + wanted, at_high + wanted))
        raise ValueError(
            f"{name} of {wanted:.3%}/K is out of reach; with {field} of {-most:g} to {most:g} "
            f"it lies in {low:.3%} to {high:.3%}/K"
        )
    drift = float(brentq(off, -most, most, xtol=1e-10))
    findings.append(f"{field} of {drift:.3g} solved from the sheet's {name}")
    return replace(junction, **{field: drift})  # type: ignore[arg-type]


def _unmoved(before: Junction, after: Junction) -> bool:
    return (
        abs(after.external_radiative_efficiency / before.external_radiative_efficiency - 1) < 1e-9
        and abs(after.series_resistance_ohm_cm2 - before.series_resistance_ohm_cm2) < 1e-9
    )
