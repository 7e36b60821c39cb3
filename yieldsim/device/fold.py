"""Responses folded onto the bands, fast: the same integral as `spectrum.band_yield`, from running moments of the light.

A study with swept gaps folds thousands of responses (gaps x temperatures). Between its points a response is a + b
lambda, so all that is needed of the reference spectrum G is int G lambda and int G lambda^2 up to any wavelength.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import PHOTON_EV_NM
from yieldsim.device.response import Response
from yieldsim.spectrum import band_edges, reference_bands, reference_spectrum

Array = NDArray[np.float64]


def folded(response: Response) -> Array:
    """Return charge per energy of each band, (122,) [A W-1].

    Notes
    -----
    K_b = int_b G EQE q lambda/(hc) dlambda / int_b G dlambda, exactly, with G linear between the points of the fine
    grid; equals `spectrum.band_yield` to rounding and takes a tenth of its time.
    """
    edges = band_edges()
    wave, level = response.wavelength_nm, response.quantum_efficiency
    grid = np.union1d(edges, wave[(wave > edges[0]) & (wave < edges[-1])])
    middle = (grid[1:] + grid[:-1]) / 2
    segment = np.searchsorted(wave, middle, side="right") - 1
    inside = (segment >= 0) & (segment < len(wave) - 1)
    segment = np.clip(segment, 0, len(wave) - 2)
    width = wave[segment + 1] - wave[segment]
    rise = np.where(inside & (width > 0), (level[segment + 1] - level[segment]) / np.where(width > 0, width, 1.0), 0.0)
    base = np.where(inside, level[segment], 0.0) - rise * wave[segment]
    first_low, second_low = _moments_up_to(grid[:-1], "right")
    first_high, second_high = _moments_up_to(grid[1:], "left")
    pieces = base * (first_high - first_low) + rise * (second_high - second_low)
    starts = np.searchsorted(grid, edges[:-1])
    return np.asarray(np.add.reduceat(pieces, starts)) / (PHOTON_EV_NM * reference_bands())


@dataclass(frozen=True, slots=True)
class _Cells:
    """The fine grid with the band edges in it; moments run from the start of the band each cell lies in.

    Running over all bands instead would drown those of saturated water, 1e-20 of the whole, in rounding.
    """

    start: Array
    light: Array
    rise: Array
    first: Array
    second: Array


@cache
def _cells() -> _Cells:
    wave, light = reference_spectrum()
    edges = band_edges()
    grid = np.union1d(wave, edges)
    start, end = grid[:-1], grid[1:]
    of = np.clip(np.searchsorted(wave, start, side="right") - 1, 0, len(wave) - 2)
    rise = (np.diff(light) / np.diff(wave))[of]
    at_start = light[of] + rise * (start - wave[of])
    band_start = np.searchsorted(start, edges[:-1])
    first, second = _partial(start, at_start, rise, end)
    return _Cells(start, at_start, rise, _before(first, band_start), _before(second, band_start))


def _before(values: Array, starts: NDArray[np.intp]) -> Array:
    """Return the sum of values before each within its own group; groups begin at starts."""
    groups = [np.concatenate([[0.0], np.cumsum(group)[:-1]]) for group in np.split(values, starts[1:])]
    return np.concatenate(groups)


def _partial(start: Array, light: Array, rise: Array, end: Array) -> tuple[Array, Array]:
    """Return both moments from start to end of light + rise (lambda - start); Simpson's rule is exact for them."""
    middle, width = (start + end) / 2, end - start
    at_middle, at_end = light + rise * (middle - start), light + rise * width
    first = width / 6 * (light * start + 4 * at_middle * middle + at_end * end)
    second = width / 6 * (light * start**2 + 4 * at_middle * middle**2 + at_end * end**2)
    return first, second


def _moments_up_to(wavelength: Array, side: Literal["left", "right"]) -> tuple[Array, Array]:
    """Return both moments from the start of a band; on a band edge, side says of which: left = it ends there."""
    cells = _cells()
    at = np.searchsorted(cells.start, wavelength, side=side) - 1
    first, second = _partial(cells.start[at], cells.light[at], cells.rise[at], wavelength)
    return cells.first[at] + first, cells.second[at] + second
