"""What a junction collects: electrons per photon over wavelength, and what is done to such a curve."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.device.gap import steepest_edge_ev
from yieldsim.spectrum import FIRST_EDGE_NM, LAST_EDGE_NM
from yieldsim.units import photon_energy_ev, wavelength_nm

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Response:
    """External quantum efficiency over wavelength: linear between points, zero outside.

    Parameters
    ----------
    wavelength_nm : (n,) array [nm], positive, not falling; a repeated wavelength is a step
    quantum_efficiency : (n,) array [1], electrons per photon that falls on the cell, 0 to 1

    Raises
    ------
    ValueError
        For fewer than two points, unequal lengths, values that are not finite, outside 0-1, or wavelengths that fall.
    """

    wavelength_nm: Array
    quantum_efficiency: Array

    def __post_init__(self) -> None:
        """Refuse what cannot be."""
        for name in ("wavelength_nm", "quantum_efficiency"):
            values = np.array(getattr(self, name), dtype=np.float64)  # a copy: the record owns what it checks
            values.flags.writeable = False
            object.__setattr__(self, name, values)
        wave, level = self.wavelength_nm, self.quantum_efficiency
        if wave.ndim != 1 or wave.shape != level.shape or len(wave) < 2:
            raise ValueError(f"a response needs two or more points; got shapes {wave.shape} and {level.shape}")
        if not (np.all(np.isfinite(wave)) and np.all(np.isfinite(level))):
            raise ValueError("a response needs finite numbers")
        if wave[0] <= 0 or np.any(np.diff(wave) < 0):
            raise ValueError("the wavelengths of a response must be positive and not fall")
        if level.min() < 0 or level.max() > 1 or level.max() == 0:
            raise ValueError(
                f"quantum efficiency from {level.min():g} to {level.max():g}; it must lie in 0-1, not all 0"
            )


def step(gap_ev: float) -> Response:
    """Return the response that collects every photon from 280 nm to the gap [eV] and none beyond.

    Raises
    ------
    ValueError
        If the gap does not lie inside the band grid (0.31 to 4.43 eV).
    """
    low, high = photon_energy_ev(LAST_EDGE_NM), photon_energy_ev(FIRST_EDGE_NM)
    if not low <= gap_ev < high:
        raise ValueError(f"a gap of {gap_ev:g} eV; it must lie in {low:.2f} to {high:.2f} eV")
    return Response(np.array([FIRST_EDGE_NM, wavelength_nm(gap_ev)]), np.ones(2))


def shifted(response: Response, shift_ev: float, gap_ev: float | None = None) -> Response:
    """Return a response with its long-wave edge moved in photon energy.

    Parameters
    ----------
    response : Response
    shift_ev : float [eV], positive moves the edge to the blue
    gap_ev : float [eV], where the edge is; None = where the response falls most steeply

    Raises
    ------
    ValueError
        If the edge would leave the response's own range.

    Notes
    -----
    E' = E + shift w(E), w = 1 from the edge down in energy (edge and tail move as one), falling linearly in E to 0 at
    the response's blue end (reflection, window layers and the blue loss stay nearly where they are). A rigid shift
    of the whole curve would move the blue end too, which no change of gap does. A step response stays one.
    """
    if shift_ev == 0.0:
        return response
    edge = steepest_edge_ev(response.wavelength_nm, response.quantum_efficiency) if gap_ev is None else gap_ev
    energy = photon_energy_ev(response.wavelength_nm)
    blue = float(energy[0])
    if not 0 < edge + shift_ev < blue or energy[-1] + shift_ev <= 0:
        raise ValueError(f"an edge at {edge:g} eV cannot move by {shift_ev:g} eV: the response ends at {blue:g} eV")
    weight = np.minimum((blue - energy) / (blue - edge), 1.0)
    return Response(wavelength_nm(energy + shift_ev * weight), response.quantum_efficiency)


def scaled(response: Response, factor: float) -> Response:
    """Return a response times a factor; ValueError if it would leave 0-1."""
    return Response(response.wavelength_nm, response.quantum_efficiency * factor)


def at(response: Response, wavelength: Array) -> Array:
    """Return the quantum efficiency (n,) [1] at wavelengths (n,) [nm]; at a step the short-wave side."""
    return np.interp(wavelength, response.wavelength_nm, response.quantum_efficiency, left=0.0, right=0.0)
