"""What lies under the modules: how much of each band it throws back, bare or under snow."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from yieldsim import reference, spectrum

Array = NDArray[np.float64]

SNOW_DEPTH_CM = 2.0  # a thinner cover lets the ground through (common practice, no source)
SNOW_ALBEDO = 0.5  # no other ground of wide extent is brighter (common practice, no source)
_SNOW = "old-snow"  # what lies for days, as most snow on the ground does


def surfaces() -> tuple[str, ...]:
    """Return the names of the surfaces in the library (their sources stand in reference/ground_albedo.csv)."""
    return tuple(name.replace("_", "-") for name in reference.table("ground_albedo").columns if name != "wavelength_nm")


def surface(name: str) -> Array:
    """Return the albedo of a surface of the library in each band, (n_band,) [1].

    Raises
    ------
    KeyError
        If the library has no such surface.
    """
    if name not in surfaces():
        raise KeyError(name)
    return reference.table("ground_albedo")[name.replace("-", "_")]


def folded(wavelength_nm: Array, albedo: Array) -> Array:
    """Fold a measured albedo onto the bands, its first and last value held beyond its ends.

    Parameters
    ----------
    wavelength_nm : (m,) array [nm], rising
    albedo : (m,) array [1], 0 to 1

    Returns
    -------
    (n_band,) array [1], mean over each band weighted with the reference spectrum
    """
    ends = [spectrum.FIRST_EDGE_NM, spectrum.LAST_EDGE_NM]
    at = np.union1d(np.asarray(wavelength_nm, dtype=np.float64), ends)
    held = np.interp(at, wavelength_nm, albedo)
    reflected = spectrum.integrate_product_bands(spectrum.reference_spectrum(), (at, held))
    return np.asarray(reflected / spectrum.reference_bands())


def broadband(albedo: Array) -> Array:
    """Return the albedo (..., n_band) [1] of all light together under the reference spectrum, (...) [1]."""
    bands = spectrum.reference_bands()
    return np.asarray(albedo @ bands / bands.sum())


def scaled(shape: Array, level: Array) -> Array:
    """Return the albedo of a surface brought to a broadband level, its colour kept as far as that goes.

    Parameters
    ----------
    shape : (n_band,) array [1]
    level : (n,) array [1], broadband albedo wanted, 0 to 1

    Returns
    -------
    (n, n_band) array [1], 0 to 1

    Notes
    -----
    A darker surface reflects less in proportion, r L / L0; a brighter one absorbs less in proportion,
    1 - (1 - r)(1 - L)/(1 - L0): both have the level wanted under the reference spectrum and stay between 0 and 1.
    """
    at = float(broadband(shape))
    wanted = np.asarray(level, dtype=np.float64)[:, None]
    albedo = np.asarray(shape * np.minimum(wanted / max(at, 1e-12), 1.0))
    brighter = ~(wanted[:, 0] <= at)
    albedo[brighter] = 1 - (1 - shape) * np.minimum((1 - wanted[brighter]) / max(1 - at, 1e-12), 1.0)
    return albedo


def albedo_of(
    bare: Array, level: float | None, measured: Array, snow_depth_cm: Array
) -> tuple[Array, NDArray[np.bool_]]:
    """Return the ground's albedo hour by hour.

    Parameters
    ----------
    bare : (n_band,) array [1], the ground without snow
    level : float [1] or None, broadband albedo to which it is scaled; None = as it is
    measured : (n,) array [1], broadband albedo that the weather file gives; NaN where it has none
    snow_depth_cm : (n,) array [cm], that the file gives; NaN where it has none

    Returns
    -------
    albedo : (n, n_band) array [1]
    snow : (n,) bool array, hours under snow

    Notes
    -----
    There is snow where the file says so: by its depth, else by an albedo that only snow has. Snow is as bright as the
    file says, else as old snow is. A given level stands above the file's, but not above its snow.
    """
    known = np.isfinite(measured)
    snow = np.where(np.isfinite(snow_depth_cm), snow_depth_cm > SNOW_DEPTH_CM, measured > SNOW_ALBEDO)
    own = float(broadband(bare))
    found = scaled(bare, np.where(known, measured, own) if level is None else np.full(len(measured), level))
    if snow.any():
        old = surface(_SNOW)
        found[snow] = scaled(old, np.where(known, measured, float(broadband(old)))[snow])
    return found, snow
