"""The standard spectrum, detailed balance, and what library absorbers are published to reach."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from yieldsim.checks.record import Outcome, step_yields
from yieldsim.constants import ELEMENTARY_CHARGE, PLANCK
from yieldsim.device.bank import Bank
from yieldsim.device.junction import Junction
from yieldsim.device.response import step
from yieldsim.device.stack import Absorber
from yieldsim.spectrum import reference_bands
from yieldsim.units import wavelength_nm

BALANCE = "detailed balance under ASTM G173-03 (Shockley & Queisser 1961), computed independently on a fine grid"
#: Gap [eV] -> short-circuit current [mA cm-2], open-circuit voltage [V], efficiency [%]; None = not given.
ONE_JUNCTION: Mapping[float, tuple[float, float | None, float]] = {
    1.12: (43.81, 0.878, 33.48),
    1.34: (35.03, 1.084, 33.76),
    1.42: (32.05, None, 33.22),
    1.6: (25.47, None, 30.58),
}
#: (top, bottom [eV], terminals) -> efficiency [%].
TWO_JUNCTIONS = {(1.60, 0.94, 2): 45.8, (1.73, 1.12, 2): 45.1, (1.81, 1.12, 4): 45.3}
PUBLISHED_LIMITS = {"efficiency": 5.0, "module_efficiency": 5.0, "power_temperature_coefficient_per_k": 0.05}


def ideal(*gaps_ev: float, terminals: int = 2) -> Absorber:
    """Return unit steps over each other at the radiative limit."""
    name = "/".join(f"{gap:g}" for gap in gaps_ev)
    return Absorber(name, tuple(Junction(gap, step(gap)) for gap in gaps_ev), terminals=terminals)


def spectrum_outcomes() -> Iterator[Outcome]:
    """Yield the standard spectrum's sum and silicon's edge."""
    total = float(reference_bands().sum())
    source = "ASTM G173-03, global, 280-4000 nm: 1000.37 W/m2"
    yield Outcome("standard", "sum of the bands", source, total, abs(total - 1000.37), 0.005, "W/m2", "W/m2")
    edge = float(wavelength_nm(1.12))
    source = "1107-1110 nm (common practice, no source)"
    yield Outcome("standard", "edge of 1.12 eV", source, edge, max(0.0, 1106.5 - edge, edge - 1110), 0.0, "nm", "nm")
    frequency = 1.12 * ELEMENTARY_CHARGE / PLANCK / 1e14
    source = "2.7e14 Hz (common practice, no source)"
    yield Outcome(
        "standard", "the same as frequency", source, frequency, abs(frequency - 2.7), 0.05, "1e14 Hz", "1e14 Hz"
    )


def balance_outcomes() -> Iterator[Outcome]:
    """Yield detailed-balance figures of one and two junctions."""
    standard = Bank.of([ideal(gap) for gap in ONE_JUNCTION]).standard()
    currents = reference_bands() @ step_yields(tuple(ONE_JUNCTION)).T / 10
    for i, (gap, (current, voltage, efficiency)) in enumerate(ONE_JUNCTION.items()):
        ours = float(currents[i])
        yield Outcome("device", f"{gap:g} eV: current", BALANCE, ours, 100 * abs(ours / current - 1), 0.1, "mA/cm2")
        if voltage is not None:
            ours = float(standard.open_circuit[i])
            yield Outcome("device", f"{gap:g} eV: voltage", BALANCE, ours, 100 * abs(ours / voltage - 1), 0.1, "V")
        ours = 100 * float(standard.efficiency[i])
        yield Outcome("device", f"{gap:g} eV: efficiency", BALANCE, ours, 100 * abs(ours / efficiency - 1), 0.1)
    for (top, bottom, terminals), efficiency in TWO_JUNCTIONS.items():
        ours = 100 * float(Bank.of([ideal(top, bottom, terminals=terminals)]).standard().efficiency[0])
        name = f"{top:g}/{bottom:g} eV, {terminals} terminals: efficiency"
        yield Outcome("device", name, BALANCE, ours, 100 * abs(ours / efficiency - 1), 0.15)


def library_outcomes(
    library: Mapping[str, Absorber], published: Mapping[str, Mapping[str, tuple[float, str]]]
) -> Iterator[Outcome]:
    """Yield what each library entry reaches against what is published for its kind.

    Parameters
    ----------
    library : entry name -> Absorber
    published : entry name -> quantity -> (value, source)
    """
    standard = Bank.of(library.values()).standard()
    for i, (name, absorber) in enumerate(library.items()):
        ours = {
            "efficiency": float(standard.efficiency[i]),
            "module_efficiency": float(standard.efficiency[i]) * absorber.area_fraction,
            "power_temperature_coefficient_per_k": float(standard.power_temperature_coefficient[i]),
        }
        for quantity, (value, source) in published.get(name, {}).items():
            if quantity not in ours:
                continue
            words, limit = quantity.removesuffix("_per_k").replace("_", " "), PUBLISHED_LIMITS[quantity]
            if quantity.endswith("_per_k"):
                off = 100 * abs(ours[quantity] - value)
                yield Outcome("library", f"{name}: {words}", source, 100 * ours[quantity], off, limit, "%/K", "%/K")
            else:
                off = 100 * abs(ours[quantity] / value - 1)
                yield Outcome("library", f"{name}: {words}", source, 100 * ours[quantity], off, limit)
