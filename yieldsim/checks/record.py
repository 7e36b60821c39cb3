"""What a check says: what was held against what, how far apart they are, and how far they may be."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from yieldsim.spectrum import band_yield, reference_bands
from yieldsim.units import wavelength_nm

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Outcome:
    """One check done on this machine.

    Parameters
    ----------
    group : str, what kind of thing is checked
    name : str, what exactly
    source : str, what it is held against
    value : float, what yieldsim gives, in ``unit``
    deviation : float, how far that lies from the source, in ``deviation_unit``, never negative
    limit : float or None, how far it may lie; None = reported only
    unit, deviation_unit : str
    """

    group: str
    name: str
    source: str
    value: float
    deviation: float
    limit: float | None
    unit: str = "%"
    deviation_unit: str = "%"

    @property
    def passed(self) -> bool:
        """Whether the deviation is a number within the limit."""
        return bool(np.isfinite(self.deviation)) and (self.limit is None or self.deviation <= self.limit)


def step_yields(gaps_ev: tuple[float, ...]) -> Array:
    """Return the band yields of unit steps, (n_gap, n_band) [A W-1]."""
    one_zero = np.array([1.0, 1.0, 0.0])
    edges = [float(wavelength_nm(gap)) for gap in gaps_ev]
    return np.array([band_yield(np.array([280.0, edge, edge]), one_zero) for edge in edges])


def spectral_factor(bands: Array, yields: Array) -> Array:
    """Return current per light over that of the reference spectrum, (..., n_response) [1].

    Parameters
    ----------
    bands : (..., n_band) array [W m-2]
    yields : (n_response, n_band) array [A W-1]
    """
    standard = reference_bands() @ yields.T / reference_bands().sum()
    return np.asarray(bands @ yields.T / bands.sum(axis=-1)[..., None] / standard)


def rms(values: Array) -> float:
    """Return the root of the mean square."""
    return float(np.sqrt(np.mean(np.square(values))))
