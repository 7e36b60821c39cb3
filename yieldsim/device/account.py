"""Where the energy of light goes in an absorber: shares of each band, and the voltage given up on the way."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import STANDARD_CELL_TEMPERATURE, THERMAL_EV_PER_K
from yieldsim.device import diode
from yieldsim.device.bank import Bank
from yieldsim.device.junction import response_at
from yieldsim.device.response import Response
from yieldsim.device.stack import Absorber, responses_at
from yieldsim.spectrum import FIRST_EDGE_NM, LAST_EDGE_NM, integrate_product_bands, reference_bands, reference_spectrum
from yieldsim.units import wavelength_nm

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class BandShares:
    """What becomes of the light of each band, under the reference spectrum's fine structure, at 25 degC.

    Parameters
    ----------
    below : (n_band,) array [1], energy below the lowest gap that is not collected
    missed : (n_band,) array [1], energy above the lowest gap that is not collected
    collected : (n_band,) array [1], energy of the photons that are collected; the three add up to 1
    """

    below: Array
    missed: Array
    collected: Array


@dataclass(frozen=True, slots=True, eq=False)
class Voltages:
    """What collected photons give up before the power point, each (n_junction, n_time).

    Parameters
    ----------
    radiative : [V], open-circuit voltage if all recombination were radiative
    actual : [V], open-circuit voltage of the junction without its resistances
    bare_power : [W m-2], at the power point of the junction without its resistances
    """

    radiative: Array
    actual: Array
    bare_power: Array


def front_shares(absorber: Absorber) -> BandShares:
    """Return what becomes of light from the front."""
    return _shares(responses_at(absorber, STANDARD_CELL_TEMPERATURE), min(absorber.gaps_ev))


def rear_shares(absorber: Absorber) -> BandShares:
    """Return what becomes of light from the rear, which enters the bottom junction only."""
    bottom = absorber.junctions[-1]
    return _shares([response_at(bottom, STANDARD_CELL_TEMPERATURE)], bottom.gap_ev)


def _shares(responses: Sequence[Response], lowest_gap_ev: float) -> BandShares:
    edge = float(wavelength_nm(lowest_gap_ev))
    above = np.array([FIRST_EDGE_NM, edge, edge]), np.array([1.0, 1.0, 0.0])
    collected, collected_above = np.zeros_like(reference_bands()), np.zeros_like(reference_bands())
    for response in responses:
        curve = response.wavelength_nm, response.quantum_efficiency
        collected = collected + integrate_product_bands(reference_spectrum(), curve)
        collected_above = collected_above + integrate_product_bands(reference_spectrum(), curve, above)
    ends = np.array([FIRST_EDGE_NM, LAST_EDGE_NM]), np.ones(2)
    whole = integrate_product_bands(reference_spectrum(), ends)
    all_above = integrate_product_bands(reference_spectrum(), above)
    return BandShares(
        below=((whole - all_above) - (collected - collected_above)) / whole,
        missed=(all_above - collected_above) / whole,
        collected=collected / whole,
    )


def voltages(bank: Bank, currents: Array, temperature: Array) -> Voltages:
    """Return the voltages that separate collected photons from the power they give.

    Parameters
    ----------
    bank : Bank
    currents : (n_junction, n_time) array [A m-2]
    temperature : (n_absorber, n_time) array [K]

    Returns
    -------
    Voltages; all zero in the dark

    Notes
    -----
    Radiative: kT/q ln(1 + J/J0,rad). Actual: n kT/q ln(1 + J/J0), without resistances. The diode is that of `diode`.
    """
    saturation = bank.saturation(temperature)
    radiative, actual, bare = (np.empty(np.shape(currents)) for _ in range(3))
    for j, junction in enumerate(bank.junctions):
        heat = np.broadcast_to(temperature[bank.absorber_of[j]], currents[j].shape)
        thermal = THERMAL_EV_PER_K * heat
        emitted = bank.radiative_saturation(j, saturation[j], heat)
        radiative[j] = thermal * np.log1p(currents[j] / emitted)
        actual[j] = junction.ideality * thermal * np.log1p(currents[j] / saturation[j])
        bare[j] = diode.maximum_power(diode.Diode(currents[j], saturation[j], junction.ideality * thermal))[0]
    return Voltages(radiative, actual, bare)
