"""From a film or wafer to a response: absorption coefficient, thickness, reflection, light trapping."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal, get_args

import numpy as np
from numpy.typing import NDArray

from yieldsim import reference
from yieldsim.device.gap import steepest_edge_ev
from yieldsim.device.junction import Junction
from yieldsim.device.response import Response
from yieldsim.spectrum import FIRST_EDGE_NM
from yieldsim.units import photon_energy_ev

Array = NDArray[np.float64]
Trapping = Literal["single_pass", "double_pass", "lambertian"]

#: Short name -> table of `yieldsim.reference`, each with its source in its header.
MATERIALS = {
    "c-si": "material_si",
    "cdte": "material_cdte",
    "gaas": "material_gaas",
    "gainp": "material_gainp",
    "ge": "material_ge",
    "mapbi3": "material_mapbi3",
}


@dataclass(frozen=True, slots=True, eq=False)
class Material:
    """How strongly a material absorbs.

    Parameters
    ----------
    wavelength_nm : (n,) array [nm], rising
    absorption_per_m : (n,) array [m-1]; none is taken beyond the last wavelength, the first value before the first
    refractive_index : (n,) array [1]

    Raises
    ------
    ValueError
        For fewer than two points, unequal lengths, wavelengths that do not rise, negative or infinite values.
    """

    wavelength_nm: Array
    absorption_per_m: Array
    refractive_index: Array

    def __post_init__(self) -> None:
        """Refuse what cannot be."""
        wave, alpha, index = self.wavelength_nm, self.absorption_per_m, self.refractive_index
        if wave.ndim != 1 or len(wave) < 2 or alpha.shape != wave.shape or index.shape != wave.shape:
            raise ValueError("a material needs two or more points of wavelength, absorption and refractive index")
        if not all(np.all(np.isfinite(values)) for values in (wave, alpha, index)):
            raise ValueError("a material needs finite numbers")
        if wave[0] <= 0 or np.any(np.diff(wave) <= 0):
            raise ValueError("the wavelengths of a material must be positive and rise")
        if alpha.min() < 0 or index.min() < 0:
            raise ValueError("absorption coefficients and refractive indices cannot be negative")


def known(name: str) -> Material:
    """Return a material of `MATERIALS`; KeyError for any other name."""
    table = reference.table(MATERIALS[name])
    return Material(table["wavelength_nm"], table["absorption_per_m"], table["refractive_index"])


def absorptance(absorption_per_m: Any, thickness: Any, trapping: Trapping, refractive_index: Any = 3.5) -> Any:
    """Return the share of entered light that a layer absorbs.

    Parameters
    ----------
    absorption_per_m : (...) array [m-1]
    thickness : (...) array [m]
    trapping : ``single_pass`` = one way through; ``double_pass`` = flat mirror behind; ``lambertian`` = scattered at
        random
    refractive_index : (...) array [1], matters for ``lambertian`` only

    Returns
    -------
    (...) array [1]

    Notes
    -----
    1 - exp(-alpha W), 1 - exp(-2 alpha W), and alpha/(alpha + 1/(4 n^2 W)) of Yablonovitch & Cody (1982) and Tiedje et
    al. (1984), made for weak absorption and right for strong absorption to 1/(4 n^2 alpha W).

    References
    ----------
    Yablonovitch, E., Cody, G. D. (1982), IEEE Trans. Electron Devices 29, 300.
    Tiedje, T., Yablonovitch, E., Cody, G. D., Brooks, B. G. (1984), IEEE Trans. Electron Devices 31, 711.
    """
    depth = np.asarray(absorption_per_m, dtype=np.float64)[()] * thickness
    if trapping == "single_pass":
        return -np.expm1(-depth)
    if trapping == "double_pass":
        return -np.expm1(-2 * depth)
    if trapping == "lambertian":
        lengthened = 4 * np.asarray(refractive_index)[()] ** 2 * depth
        return lengthened / (1 + lengthened)
    raise ValueError(f"light trapping {trapping!r}; one of {', '.join(get_args(Trapping))}")


def response_of(material: Material, thickness: float, trapping: Trapping, reflection: float = 0.0) -> Response:
    """Return the response of a layer that collects every pair.

    Parameters
    ----------
    material : Material
    thickness : float [m]
    trapping : see `absorptance`
    reflection : float [1], of the front

    Raises
    ------
    ValueError
        For a thickness outside 1 nm to 10 mm, a reflection outside 0-1.
    """
    if not 1e-9 <= thickness <= 1e-2:
        raise ValueError(f"a thickness of {thickness * 1e6:g} um; it must lie in 0.001 to 10000 um")
    if not 0 <= reflection < 1:
        raise ValueError(f"a front reflection of {reflection:g}; it must lie in 0-1")
    wave, absorbed = _absorbed(material, thickness, trapping)
    return Response(wave, (1 - reflection) * absorbed)


def junction_of(
    material: Material, thickness: float, trapping: Trapping, reflection: float = 0.0, **quality: Any
) -> Junction:
    """Return a junction made of a layer; quality: fields of `Junction`; gap_ev is the steepest edge if not given."""
    response = response_of(material, thickness, trapping, reflection)
    absorbed = Response(*_absorbed(material, thickness, trapping))
    gap = quality.pop("gap_ev", None) or gap_of(response)
    return Junction(gap, response, reflection=reflection, absorptance=absorbed, **quality)


def _absorbed(material: Material, thickness: float, trapping: Trapping) -> tuple[Array, Array]:
    """Return wavelengths [nm], from 280 nm on, and the share of entered light absorbed [1]."""
    absorbed = absorptance(material.absorption_per_m, thickness, trapping, material.refractive_index)
    if material.wavelength_nm[0] <= FIRST_EDGE_NM:
        return material.wavelength_nm, absorbed
    return np.concatenate([[FIRST_EDGE_NM], material.wavelength_nm]), np.concatenate([absorbed[:1], absorbed])


def generation_profile(
    absorption_per_m: Array, thickness: float, trapping: Trapping, depth: Array, refractive_index: Array
) -> Array:
    """Return where in a layer light of each wavelength makes its pairs.

    Parameters
    ----------
    absorption_per_m, refractive_index : (n_wave,) arrays [m-1], [1]
    thickness : float [m]
    trapping : see `absorptance`
    depth : (n_depth,) array [m], from the front, 0 to thickness

    Returns
    -------
    (n_depth, n_wave) array [m-1], pairs per depth and entered photon; its integral over depth is `absorptance`

    Notes
    -----
    Single pass alpha exp(-alpha z); double pass adds alpha exp(-alpha (2W - z)). Lambertian: the first pass as it is,
    as far as it lies below `absorptance`; what is absorbed later has been scattered many times and is spread evenly.
    """
    alpha, z = np.asarray(absorption_per_m)[None, :], np.asarray(depth)[:, None]
    first = alpha * np.exp(-alpha * z)
    if trapping == "single_pass":
        return first
    if trapping == "double_pass":
        return np.asarray(first + alpha * np.exp(-alpha * (2 * thickness - z)))
    whole = absorptance(alpha, thickness, trapping, refractive_index)
    once = absorptance(alpha, thickness, "single_pass")
    share = np.divide(np.minimum(once, whole), once, out=np.zeros_like(once), where=once > 0)
    return np.asarray(share * first + (whole - share * once) / thickness)


def generation(
    material: Material, thickness: float, trapping: Trapping, depth: Array, light: tuple[Array, Array]
) -> Array:
    """Return the current made per depth in a layer.

    Parameters
    ----------
    material : Material
    thickness : float [m]
    trapping : see `absorptance`
    depth : (n_depth,) array [m]
    light : (n,) array [nm] and (n,) array [W m-2 nm-1] that enters, e.g. `spectrum.reference_spectrum()`

    Returns
    -------
    (n_depth,) array [A m-3], charge made per volume and time
    """
    wave, density = light
    inside = wave <= material.wavelength_nm[-1]
    wave, density = wave[inside], density[inside]
    alpha = np.interp(wave, material.wavelength_nm, material.absorption_per_m)
    index = np.interp(wave, material.wavelength_nm, material.refractive_index)
    profile = generation_profile(alpha, thickness, trapping, depth, index)
    return np.asarray(np.trapezoid(profile * density / photon_energy_ev(wave), wave, axis=-1))


def median_depth(material: Material, thickness: float, trapping: Trapping, light: tuple[Array, Array]) -> float:
    """Return the depth [m] above which half of the pairs are made."""
    depth = thickness * np.linspace(0, 1, 401) ** 3  # most pairs are made near the front
    made = generation(material, thickness, trapping, depth, light)
    running = np.concatenate([[0.0], np.cumsum(np.diff(depth) * (made[1:] + made[:-1]) / 2)])
    return float(np.interp(running[-1] / 2, running, depth))


def silicon_edge_shift(thickness: float, trapping: Trapping, hot: int = 350, cold: int = 300) -> float:
    """Return how the edge of a silicon layer moves with temperature [eV K-1], from measured absorption.

    Parameters
    ----------
    thickness : float [m]
    trapping : see `absorptance`
    hot, cold : temperatures [K] out of 250, 300, 350, 400

    Notes
    -----
    Shift of the photon energy at which half of the light is absorbed, divided by the temperature step. About twice the
    drift of the gap itself (-0.27 meV/K): hotter silicon also has more phonons to help light across.
    """
    table = reference.table("silicon_temperature")
    energy = photon_energy_ev(table["wavelength_nm"])
    at_half = [
        np.interp(-0.5, -absorptance(table[f"absorption_{temperature}k_per_m"], thickness, trapping, 3.53), energy)
        for temperature in (cold, hot)
    ]
    return float((at_half[1] - at_half[0]) / (hot - cold))


def gap_of(response: Response) -> float:
    """Return the gap [eV] of a layer's response: its steepest edge."""
    return steepest_edge_ev(response.wavelength_nm, response.quantum_efficiency)
