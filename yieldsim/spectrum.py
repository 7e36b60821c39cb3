"""The band grid, exact integrals over it, and the reference spectrum folded onto it."""

from __future__ import annotations

from functools import cache

import numpy as np
from numpy.typing import NDArray

from yieldsim import reference
from yieldsim.constants import PHOTON_EV_NM

Array = NDArray[np.float64]

FIRST_EDGE_NM = 280.0
LAST_EDGE_NM = 4000.0


@cache
def band_wavelengths() -> Array:
    """Return the wavelength of each band, (122,) [nm]: those of Bird & Riordan (1984), read-only."""
    return reference.table("bird_riordan_1984")["wavelength_nm"]


@cache
def band_edges() -> Array:
    """Return the edges of the bands, (123,) [nm]: mid-points between wavelengths, 280 and 4000 outside; read-only."""
    centre = band_wavelengths()
    edges = np.concatenate([[FIRST_EDGE_NM], (centre[1:] + centre[:-1]) / 2, [LAST_EDGE_NM]])
    edges.flags.writeable = False
    return edges


@cache
def band_widths() -> Array:
    """Return the width of each band, (122,) [nm], read-only."""
    widths = np.diff(band_edges())
    widths.flags.writeable = False
    return widths


def integrate_bands(wavelength_nm: Array, values: Array) -> Array:
    """Integrate a piecewise-linear function over each band, exactly.

    Parameters
    ----------
    wavelength_nm : (n,) array [nm], not falling; a repeated wavelength is a step
    values : (n,) array [unit nm-1]; zero is taken outside the wavelengths

    Returns
    -------
    (122,) array [unit]
    """
    return integrate_product_bands((wavelength_nm, values))


def integrate_product_bands(*functions: tuple[Array, Array]) -> Array:
    """Integrate the product of piecewise-linear functions over each band.

    Parameters
    ----------
    functions : pairs of (n,) wavelength array [nm], not falling, and (n,) values; zero outside; a repeated
        wavelength is a step

    Returns
    -------
    (122,) array [product of the units, times nm]

    Raises
    ------
    ValueError
        For more than three functions: the rule is exact up to cubic products only.

    Notes
    -----
    Simpson's rule on the union of all break points and band edges, exact for a product of three linear pieces.
    Every piece is sampled just inside its two ends, so steps are honoured.
    """
    if len(functions) > 3:
        raise ValueError(f"exact for at most 3 functions, {len(functions)} given")
    edges = band_edges()
    grid = np.unique(np.concatenate([edges, *(wavelength for wavelength, _ in functions)]))
    grid = grid[(grid >= edges[0]) & (grid <= edges[-1])]
    left, right = grid[:-1], grid[1:]
    middle = (left + right) / 2
    product_left = np.ones_like(left)
    product_middle = np.ones_like(left)
    product_right = np.ones_like(left)
    for wavelength, values in functions:
        at_left, at_right = _ends_of_pieces(left, right, middle, wavelength, values)
        product_left = product_left * at_left
        product_right = product_right * at_right
        product_middle = product_middle * (at_left + at_right) / 2
    pieces = (right - left) * (product_left + 4 * product_middle + product_right) / 6
    starts = np.searchsorted(left, edges[:-1])
    return np.asarray(np.add.reduceat(pieces, starts), dtype=np.float64)


def _ends_of_pieces(left: Array, right: Array, middle: Array, wavelength: Array, values: Array) -> tuple[Array, Array]:
    """Return a piecewise-linear function just inside both ends of each piece that holds no break point within."""
    segment = np.searchsorted(wavelength, middle, side="right") - 1
    inside = (segment >= 0) & (segment < len(wavelength) - 1)
    segment = np.clip(segment, 0, len(wavelength) - 2)
    x0, x1 = wavelength[segment], wavelength[segment + 1]
    y0, y1 = values[segment], values[segment + 1]
    slope = np.where(inside, (y1 - y0) / np.where(x1 > x0, x1 - x0, 1.0), 0.0)
    base = np.where(inside, y0, 0.0)
    return base + slope * (left - x0), base + slope * (right - x0)


@cache
def reference_spectrum() -> tuple[Array, Array]:
    """Return wavelength (2002,) [nm] and ASTM G173-03 global spectral irradiance (2002,) [W m-2 nm-1], read-only."""
    table = reference.table("astm_g173_03")
    return table["wavelength_nm"], table["global"]


@cache
def reference_bands() -> Array:
    """Return the ASTM G173-03 global spectrum's energy in each band, (122,) [W m-2], read-only; sums to 1000.37."""
    bands = integrate_bands(*reference_spectrum())
    bands.flags.writeable = False
    return bands


def band_yield(wavelength_nm: Array, quantum_efficiency: Array) -> Array:
    """Fold a response onto the bands: charge per energy of each band under the reference spectrum's fine structure.

    Parameters
    ----------
    wavelength_nm : (n,) array [nm], not falling; a repeated wavelength is a step
    quantum_efficiency : (n,) array [1], electrons per photon; zero outside

    Returns
    -------
    (122,) array [A W-1]

    Notes
    -----
    K_b = int_b G EQE q lambda/(hc) dlambda / int_b G dlambda on the fine grid of G173, so that at the reference
    spectrum the band sum equals the fine-grid integral for any response, also one whose edge cuts a band.
    """
    ends = np.array([FIRST_EDGE_NM, LAST_EDGE_NM])
    charge = integrate_product_bands(
        reference_spectrum(), (wavelength_nm, quantum_efficiency), (ends, ends / PHOTON_EV_NM)
    )
    return charge / reference_bands()


def photocurrent(band_irradiance: Array, band_yields: Array) -> Array:
    """Return the current density responses collect from band spectra.

    Parameters
    ----------
    band_irradiance : (..., n_band) array [W m-2], energy in each band
    band_yields : (n_absorber, n_band) or (n_band,) array [A W-1], charge per energy of each band

    Returns
    -------
    (..., n_absorber) or (...) array [A m-2]
    """
    return np.asarray(np.asarray(band_irradiance) @ np.asarray(band_yields).T)


def average_photon_energy(band_irradiance: Array) -> Array:
    """Return the mean energy of the photons in band spectra.

    Parameters
    ----------
    band_irradiance : (..., n_band) array [W m-2]

    Returns
    -------
    (...) array [eV]; NaN where there is no light
    """
    energy = np.asarray(band_irradiance, dtype=np.float64)
    photons = energy @ _photons_per_energy()
    total = energy.sum(axis=-1)
    return np.asarray(np.divide(total, photons, out=np.full_like(photons, np.nan), where=photons > 0))


@cache
def _photons_per_energy() -> Array:
    """Return photons per energy of each band under the reference spectrum, (122,) [eV-1]."""
    ends = np.array([FIRST_EDGE_NM, LAST_EDGE_NM])
    photons = integrate_product_bands(reference_spectrum(), (ends, ends / PHOTON_EV_NM))
    return photons / reference_bands()
