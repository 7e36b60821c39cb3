"""From a measured curve, as real files are, to a response: order, unit, repeats, gaps, noise, tail.

Pure functions on arrays; reading files is config's business. Whatever is done to the numbers is told.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from yieldsim.constants import PHOTON_EV_NM
from yieldsim.device.gap import steepest_fall_ev
from yieldsim.device.response import Response
from yieldsim.units import photon_energy_ev, wavelength_nm

Array = NDArray[np.float64]
Kind = Literal["eqe", "response"]

#: Points farther apart than this are told of: what lies between is a straight line [nm].
WIDE_GAP_NM = 50.0
#: Quantum efficiencies up to this are taken for 1 with measurement error.
TOLERATED_QE = 1.05
#: Width over which slopes are taken to find the edge of a noisy curve [eV].
EDGE_WINDOW_EV = 0.03
#: Below this lies 0.1 % of the sun's light at the ground; a curve need not reach farther.
LITTLE_LIGHT_BELOW_NM = 320.0
#: A tail below this share of the peak is the lock-in's floor, not the absorber's.
FLOOR = 1e-3


@dataclass(frozen=True, slots=True)
class Measured:
    """A cleaned curve.

    Parameters
    ----------
    response : Response
    gap_ev : float [eV], where it falls most steeply
    findings : what was found and done, in plain words
    """

    response: Response
    gap_ev: float
    findings: tuple[str, ...]


def cleaned(wavelength: Array, values: Array, kind: Kind) -> Measured:
    """Return a response from measured points.

    Parameters
    ----------
    wavelength : (n,) array, in nm or, if all below 20, in um; any order
    values : (n,) array, quantum efficiency 0-1 or in %, or spectral response in A/W or mA/W
    kind : ``eqe`` or ``response``

    Returns
    -------
    Measured

    Raises
    ------
    ValueError
        For fewer than five usable points, wavelengths outside 100-20000 nm, values that are neither, a quantum
        efficiency beyond 1.05, or a curve that does not fall towards long waves.

    Notes
    -----
    A spectral response S is an efficiency S hc/(q lambda). Values at a repeated wavelength are averaged. Negative ones
    are noise and become 0. Beyond the edge everything from the first point below a floor on is cut to 0: the radiative
    saturation current weighs that tail with exp(-E/kT), and noise of 0.1 % at 1.0 eV would outweigh the edge of
    gallium arsenide. The floor is a thousandth of the peak, or three times the noise found there.
    """
    findings: list[str] = []
    wave, level = _usable(np.asarray(wavelength, dtype=np.float64), np.asarray(values, dtype=np.float64), findings)
    wave = _in_nanometres(wave, findings)
    wave, level = _in_order(wave, level, findings)
    level = _from_response(wave, level, findings) if kind == "response" else _as_efficiency(level, findings)
    gap = edge_ev(wave, level)
    level = _without_noise_tail(wave, level, gap, findings)
    _tell_gaps(wave, level, findings)
    return Measured(Response(wave, level), gap, tuple(findings))


def edge_ev(wavelength: Array, quantum_efficiency: Array) -> float:
    """Return the photon energy [eV] of the steepest fall of a noisy curve: that of the curve smoothed over 30 meV."""
    if quantum_efficiency[-1] >= np.max(quantum_efficiency) / 2:
        raise ValueError(f"the curve ends at {wavelength[-1]:g} nm before it falls: no edge to take the gap from")
    energy = photon_energy_ev(wavelength)
    fine = np.linspace(energy[-1], energy[0], max(2000, 8 * len(energy)))
    level = np.interp(fine, energy[::-1], quantum_efficiency[::-1])
    running = np.concatenate([[0.0], np.cumsum(np.diff(fine) * (level[1:] + level[:-1]) / 2)])
    half = EDGE_WINDOW_EV / 2
    padded = np.concatenate([[fine[0] - 1.0], fine, [fine[-1] + 1.0]])
    whole = np.concatenate([[running[0] - level[0]], running, [running[-1] + level[-1]]])
    smooth = (np.interp(fine + half, padded, whole) - np.interp(fine - half, padded, whole)) / (2 * half)
    return steepest_fall_ev(wavelength_nm(fine[::-1]), smooth[::-1])


def _usable(wave: Array, level: Array, findings: list[str]) -> tuple[Array, Array]:
    if wave.shape != level.shape or wave.ndim != 1:
        raise ValueError(f"wavelengths and values of unequal shape: {wave.shape} and {level.shape}")
    finite = np.isfinite(wave) & np.isfinite(level)
    if not finite.all():
        findings.append(f"{int((~finite).sum())} points without a number left out")
    if finite.sum() < 5:
        raise ValueError(f"{int(finite.sum())} usable points; a response needs at least 5")
    return wave[finite], level[finite]


def _in_nanometres(wave: Array, findings: list[str]) -> Array:
    if wave.max() < 20:
        findings.append("wavelengths taken for micrometres")
        wave = wave * 1000
    if wave.min() < 100 or wave.max() > 20000:
        raise ValueError(f"wavelengths from {wave.min():g} to {wave.max():g} nm; they must lie in 100 to 20000 nm")
    return wave


def _in_order(wave: Array, level: Array, findings: list[str]) -> tuple[Array, Array]:
    if np.any(np.diff(wave) < 0):
        findings.append("points sorted by wavelength")
    rising, first, counts = np.unique(wave, return_inverse=True, return_counts=True)
    if len(rising) < len(wave):
        findings.append(f"{len(wave) - len(rising)} repeated wavelengths averaged")
    return rising, np.bincount(first, weights=level) / counts


def _from_response(wave: Array, level: Array, findings: list[str]) -> Array:
    if level.max() > 10:  # no junction gives more than one electron per photon: 3.2 A/W at 4 um
        findings.append("values taken for mA/W")
        level = level / 1000
    return _as_share(level * PHOTON_EV_NM / wave, findings)


def _as_efficiency(level: Array, findings: list[str]) -> Array:
    if level.max() > 1.5:
        if level.max() > 100 * TOLERATED_QE:
            raise ValueError(f"a quantum efficiency of {level.max():g}; it must lie in 0-1 or 0-100 %")
        findings.append("values taken for per cent")
        level = level / 100
    return _as_share(level, findings)


def _as_share(level: Array, findings: list[str]) -> Array:
    if level.max() > TOLERATED_QE:
        raise ValueError(f"a quantum efficiency of {level.max():.3g}; it cannot exceed 1 (unit A/W or %, or a slip?)")
    if level.max() <= 0.01:
        raise ValueError(f"a quantum efficiency of at most {level.max():.3g}: no response, or another unit")
    for wrong, what in ((level < 0, "negative values set to 0"), (level > 1, "values above 1 set to 1")):
        if wrong.any():
            findings.append(f"{int(wrong.sum())} {what}")
    return np.clip(level, 0.0, 1.0)


def _without_noise_tail(wave: Array, level: Array, gap: float, findings: list[str]) -> Array:
    energy = photon_energy_ev(wave)
    far = level[energy < gap - 0.2]  # well below any edge
    noise = float(np.sqrt(np.mean(far**2))) if len(far) >= 3 else 0.0
    floor = max(FLOOR * float(level.max()), 3 * noise)
    below = np.flatnonzero((energy < gap) & (level < floor))
    if not len(below):
        return level
    first = int(below[0])
    if np.any(level[first:] > 0):
        findings.append(f"tail below {floor:.2g} cut to 0 from {wave[first]:g} nm on")
    level = level.copy()
    level[first:] = 0.0
    return level


def _tell_gaps(wave: Array, level: Array, findings: list[str]) -> None:
    lit = np.flatnonzero(level > 0)
    inside = slice(int(lit[0]), int(lit[-1]) + 1)
    wide = np.flatnonzero(np.diff(wave[inside]) > WIDE_GAP_NM) + lit[0]
    findings.extend(f"no points from {wave[i]:g} to {wave[i + 1]:g} nm: a straight line is taken" for i in wide)
    if level[0] > 0.05 and wave[0] > LITTLE_LIGHT_BELOW_NM:
        findings.append(f"no points below {wave[0]:g} nm, where the response is still {level[0]:.2g}: nothing is taken")
    if level[-1] > 0.0:
        findings.append(
            f"no points beyond {wave[-1]:g} nm, where the response is still {level[-1]:.2g}: nothing is taken"
        )
