"""Detailed balance: the current a junction radiates in the dark, and what non-radiative loss makes of it."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import ELEMENTARY_CHARGE, LIGHT_SPEED, PHOTON_EV_NM, PLANCK, THERMAL_EV_PER_K
from yieldsim.units import photon_energy_ev

Array = NDArray[np.float64]

#: 2 pi q / (h^3 c^2) with energies in eV [A m-2 eV-3].
_EMISSION = 2 * np.pi * ELEMENTARY_CHARGE / (PLANCK**3 * LIGHT_SPEED**2) * ELEMENTARY_CHARGE**3


def radiative_current(wavelength_nm: Array, quantum_efficiency: Array, temperature: Any) -> Any:
    """Return the saturation current of a junction that loses pairs by radiation only.

    Parameters
    ----------
    wavelength_nm : (n,) array [nm], not falling; a repeated wavelength is a step
    quantum_efficiency : (n,) array [1], linear between points, zero outside
    temperature : (...) array [K]

    Returns
    -------
    (...) array [A m-2]

    Notes
    -----
    J0rad = q 2 pi/(h^3 c^2) int EQE E^2 exp(-E/kT) dE over the outward half-space (Shockley & Queisser 1961, in the
    reciprocity form of Rau 2007, with Boltzmann for Bose-Einstein statistics: 1e-8 off at 0.5 eV and 300 K). EQE is
    linear in wavelength, a + b/E, so each piece has the closed form
    int (a E^2 + b E) exp(-E/kT) dE = -kT exp(-E/kT) [a (E^2 + 2 E kT + 2 kT^2) + b (E + kT)]. No quadrature error.

    References
    ----------
    Shockley, W., Queisser, H. J. (1961), J. Appl. Phys. 32, 510. Rau, U. (2007), Phys. Rev. B 76, 085303.
    """
    x0, x1 = wavelength_nm[:-1], wavelength_nm[1:]
    wide = x1 > x0
    x0, x1 = x0[wide], x1[wide]
    y0, y1 = quantum_efficiency[:-1][wide], quantum_efficiency[1:][wide]
    slope = (y1 - y0) / (x1 - x0)
    flat, inverse = y0 - slope * x0, slope * PHOTON_EV_NM
    thermal = THERMAL_EV_PER_K * np.asarray(temperature, dtype=np.float64)[..., None]
    low, high = photon_energy_ev(x1), photon_energy_ev(x0)

    def antiderivative(energy: Array) -> Array:
        square = energy * energy + 2 * thermal * (energy + thermal)
        return np.asarray(-thermal * np.exp(-energy / thermal) * (flat * square + inverse * (energy + thermal)))

    return _EMISSION * np.sum(antiderivative(high) - antiderivative(low), axis=-1)[()]


def saturation_current(radiative: Any, photocurrent: Any, external_radiative_efficiency: Any, ideality: Any) -> Any:
    """Return the saturation current of a junction of a given ideality and external radiative efficiency.

    Parameters
    ----------
    radiative : (...) array [A m-2], radiative saturation current J0rad at the cell's temperature
    photocurrent : (...) array [A m-2], photocurrent at standard conditions, at which the efficiency is defined
    external_radiative_efficiency, ideality : (...) arrays [1]

    Returns
    -------
    (...) array [A m-2]

    Notes
    -----
    The efficiency says how far below the radiative limit the open-circuit voltage lies at the standard photocurrent:
    Voc = kT/q ln(ERE Jref/J0rad) (Rau 2007), whatever the ideality. A diode of ideality n with saturation current J0
    has Voc = n kT/q ln(Jref/J0); the two agree for J0 = Jref (J0rad/(ERE Jref))^(1/n); n = 1 gives J0rad/ERE.
    (The one that a diode adds to Jref/J0 is dropped on both sides: below 1e-8 for gaps above 0.5 eV at 300 K.)
    """
    return photocurrent * (radiative / (external_radiative_efficiency * photocurrent)) ** (1 / np.asarray(ideality)[()])
