"""Conversions between the units of files and those used inside."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import CELSIUS_ZERO, PHOTON_EV_NM

Array = NDArray[np.float64]


def kelvin(celsius: Any) -> Any:
    """Return a temperature [degC] in kelvin [K]; any shape."""
    return np.asarray(celsius, dtype=np.float64)[()] + CELSIUS_ZERO


def celsius(kelvin: Any) -> Any:
    """Return a temperature [K] in degrees Celsius [degC]; any shape."""
    return np.asarray(kelvin, dtype=np.float64)[()] - CELSIUS_ZERO


def photon_energy_ev(wavelength_nm: Any) -> Any:
    """Return the energy [eV] of photons of a vacuum wavelength [nm] > 0; any shape."""
    return PHOTON_EV_NM / np.asarray(wavelength_nm, dtype=np.float64)[()]


def wavelength_nm(photon_energy_ev: Any) -> Any:
    """Return the vacuum wavelength [nm] of photons of an energy [eV] > 0; any shape."""
    return PHOTON_EV_NM / np.asarray(photon_energy_ev, dtype=np.float64)[()]
