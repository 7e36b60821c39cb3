"""Absorption edge: its energy, wavelength and frequency, its drift with temperature, and where a response puts it."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import ELEMENTARY_CHARGE, PLANCK, STANDARD_CELL_TEMPERATURE
from yieldsim.units import photon_energy_ev, wavelength_nm

Array = NDArray[np.float64]


def edge_wavelength_nm(gap_ev: Any) -> Any:
    """Return the longest wavelength [nm] that a gap [eV] absorbs; any shape."""
    return wavelength_nm(gap_ev)


def edge_frequency_hz(gap_ev: Any) -> Any:
    """Return the lowest frequency [Hz] that a gap [eV] absorbs; any shape."""
    return np.asarray(gap_ev, dtype=np.float64)[()] * ELEMENTARY_CHARGE / PLANCK


def gap_at(gap_ev: Any, shift_ev_per_k: Any, temperature: Any) -> Any:
    """Return the gap at a cell temperature.

    Parameters
    ----------
    gap_ev : (...) array [eV], gap at 298.15 K
    shift_ev_per_k : (...) array [eV K-1]; negative = narrows when hot (silicon), positive = widens (lead halides)
    temperature : (...) array [K]

    Returns
    -------
    (...) array [eV]

    Notes
    -----
    Eg(T) = Eg(298.15 K) + dEg/dT (T - 298.15 K). Linear is within 2 meV of Varshni's form for silicon from 240 to
    370 K, the range in which modules work; not meant for cryogenic use.
    """
    return np.asarray(gap_ev)[()] + np.asarray(shift_ev_per_k)[()] * (
        np.asarray(temperature)[()] - STANDARD_CELL_TEMPERATURE
    )


def steepest_edge_ev(wavelength: Array, quantum_efficiency: Array) -> float:
    """Return the photon energy at which a response falls most steeply towards long waves.

    Parameters
    ----------
    wavelength : (n,) array [nm], not falling; a repeated wavelength is a step
    quantum_efficiency : (n,) array [1]

    Returns
    -------
    float [eV]

    Notes
    -----
    The inflection point of the edge, the photovoltaic gap of Rau et al. (2017): the maximum of dEQE/dE, taken as the
    centre of gravity of the steepest piece and its neighbours of more than half its slope, so that fine and coarse
    sampling of one edge agree. Only what follows the last point above nine tenths of the peak is looked at, so that
    no fall in the blue or within the plateau is taken for the edge. A step of a tenth of the peak or more (the last
    such one; also where the curve ends above that level) is the edge itself.

    References
    ----------
    Rau, U., Blank, B., Mueller, T. C. M., Kirchartz, T. (2017), Phys. Rev. Applied 7, 044016.
    """
    if quantum_efficiency[-1] >= np.max(quantum_efficiency) / 10:
        return float(photon_energy_ev(wavelength[-1]))
    return steepest_fall_ev(wavelength, quantum_efficiency)


def steepest_fall_ev(wavelength: Array, quantum_efficiency: Array) -> float:
    """Return what `steepest_edge_ev` does [eV], for a curve whose end is no edge."""
    peak = float(np.max(quantum_efficiency))
    first = int(np.flatnonzero(quantum_efficiency >= 0.9 * peak)[-1])
    energy, level = photon_energy_ev(wavelength[first:]), quantum_efficiency[first:]
    width, fall = -np.diff(energy), -np.diff(level)
    steps = np.flatnonzero((width == 0) & (fall >= peak / 10))
    if len(steps):
        return float(energy[steps[-1]])
    slope = np.where(width > 0, fall / np.where(width > 0, width, 1.0), 0.0)
    low = high = int(np.argmax(slope))
    half = slope[low] / 2
    while low > 0 and slope[low - 1] > half:
        low -= 1
    while high + 1 < len(slope) and slope[high + 1] > half:
        high += 1
    centre = (energy[low : high + 1] + energy[low + 1 : high + 2]) / 2
    weight = fall[low : high + 1]
    return float(np.sum(centre * weight) / np.sum(weight))
