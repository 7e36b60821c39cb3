"""Write yieldsim/reference/gas_coefficients.csv: absorption of vapour and mixed gas, set on ASTM G173's direct beam.

    python tests/reference/make_gas_coefficients.py

Bird & Riordan's curves of growth are kept; the coefficient of each band is chosen so that the direct beam of the
standard
comes out under the standard's air. Where less than LEAST of depth is at stake, the standard's haze and ozone, which are
not known to that depth, would be taken for gas: there the mean depth of two line-by-line sources is taken. They also
say
how a band's depth is shared between vapour and mixed gas. Needs yieldsim installed; reads its published tables only.
"""

from pathlib import Path

import numpy as np
from scipy.optimize import brentq

from yieldsim import reference, spectrum
from yieldsim.sky import column, growth, sun

LEAST = 0.02
LAST_NM = 2550.0  # beyond it neither line-by-line table has data: Bird & Riordan's coefficients stay
HERE = Path(__file__).resolve().parents[2] / "yieldsim" / "reference"
SOURCES = ("hgrs_gas_transmittance", "sixs_gas_transmittance")
WATER, MIXED = 1, 6
HEADER = """\
Absorption coefficients of vapour and mixed gas for the curves of growth of Bird & Riordan (1984), eq. 2-8 and 2-11.
Source: calculated from the direct beam of ASTM G173-03, with the share of each gas, and depths below 0.02, from
hgrs_gas_transmittance.csv and sixs_gas_transmittance.csv; beyond 2550 nm those of bird_riordan_1984.csv.
Licence: calculated for this project, as free as it.
Units: nm; cm-1 (precipitable water); per air mass.
Obtained: tests/reference/make_gas_coefficients.py""".splitlines()


def depth_at(name, gas, path):
    """Return the depth of each band (122,) along a path, from a table of band transmittances."""
    table, wavelength = reference.table(name), spectrum.band_wavelengths()
    chosen = table["gas"] == gas
    paths = np.unique(table["path"][chosen])
    passed = np.ones((len(paths), len(wavelength)))
    for nm, at, share in zip(
        table["wavelength_nm"][chosen], table["path"][chosen], table["transmittance"][chosen], strict=True
    ):
        passed[np.searchsorted(paths, at), np.argmin(np.abs(wavelength - nm))] = share
    log_depth = np.log(np.maximum(-np.log(np.maximum(passed, 1e-12)), 1e-9))
    return np.array([np.exp(np.interp(np.log(path), np.log(paths), row)) for row in log_depth.T])


def coefficients(growth, depth, path):
    """Return the coefficient of each band whose curve of growth reaches a depth along a path."""

    def solve(wanted):
        return np.exp(brentq(lambda log: float(growth(np.exp(log), path)) - wanted, -25.0, 25.0))

    return np.array([solve(wanted) if wanted > 1e-5 else 0.0 for wanted in depth])


def main():
    air, bird, wavelength = column.reference_air(), reference.table("bird_riordan_1984"), spectrum.band_wavelengths()
    optics = column.bare_optics()
    standard = reference.table("astm_g173_03")
    direct = spectrum.integrate_bands(standard["wavelength_nm"], standard["direct"])
    mass = float(sun.relative_air_mass(air.cos_zenith)[0])
    water_path, air_path = float(air.water_cm[0]) * mass, float(air.pressure[0]) / column.BIRD_PRESSURE * mass
    other = optics.rayleigh * air_path
    other += float(air.aod500[0]) * np.exp(-float(air.angstrom_exponent[0]) * optics.haze_shape) * mass
    other += optics.ozone * float(air.ozone_atm_cm[0]) * float(sun.ozone_air_mass(air.cos_zenith)[0])
    gas = np.maximum(-np.log(direct / optics.extraterrestrial) - other, 0.0)

    water = np.mean([depth_at(name, WATER, water_path) for name in SOURCES], axis=0)
    mixed = np.mean([depth_at(name, MIXED, air_path) for name in SOURCES], axis=0)
    lines = water + mixed
    share = np.divide(water, lines, out=np.zeros_like(lines), where=lines > 0)
    depth = np.where(lines > LEAST, gas, lines)
    far = wavelength > LAST_NM
    wet = coefficients(growth.water_depth, depth * share, water_path)
    even = coefficients(growth.mixed_gas_depth, depth * (1 - share), air_path)
    rows = zip(wavelength, np.where(far, bird["water"], wet), np.where(far, bird["mixed_gas"], even), strict=True)
    text = [f"# {line}" for line in HEADER] + ["wavelength_nm,water,mixed_gas"]
    text += [f"{nm:g},{a:.6g},{b:.6g}" for nm, a, b in rows]
    (HERE / "gas_coefficients.csv").write_text("\n".join(text) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
