"""Write CIE daylight D65 and the example spectrum of the simple spectral model's C code.

pip install colour-science
pip download --no-deps --no-binary :all: pvlib==0.16.1 && tar xzf pvlib-0.16.1.tar.gz    (for its test data)
python tests/reference/make_daylight.py pvlib-0.16.1/tests/data/spectrl2_example_spectra.csv
"""

from __future__ import annotations

import csv
import sys
import textwrap
from pathlib import Path

import numpy as np

HERE = Path(__file__).resolve().parents[2] / "yieldsim" / "reference"


def write(name, header, columns, digits):
    cells = [",".join(f"{value:.{digits}g}" for value in row) for row in zip(*columns.values(), strict=True)]
    lines = [f"# {line}" for paragraph in header for line in textwrap.wrap(paragraph, 116)]
    (HERE / f"{name}.csv").write_text("\n".join([*lines, ",".join(columns), *cells]) + "\n", encoding="utf-8")


def cie_d65():
    from colour import SDS_ILLUMINANTS

    d65 = SDS_ILLUMINANTS["D65"]
    write(
        "cie_d65",
        [
            "Relative spectral power of CIE standard illuminant D65, average daylight of a correlated colour "
            "temperature of about 6500 K; 100 at 560 nm.",
            "Source: CIE 15:2004, Colorimetry, table T.1; ISO/CIE 11664-2.",
            "Licence: the table is distributed openly by the CIE; taken from the copy in colour-science "
            "(BSD-3-Clause).",
            "Units: nm; 1 (energy per wavelength, relative).",
            "Obtained: tests/reference/make_daylight.py",
        ],
        {"wavelength_nm": d65.wavelengths, "relative_power": d65.values},
        8,
    )


def spectrl2_example(path):
    with Path(path).open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    column = {name: np.array([float(row[name]) for row in rows]) for name in rows[0] if name}
    write(
        "spectrl2_example",
        [
            "One clear sky by the simple spectral model of Bird & Riordan (1984), from the C code spectrl2_2.c.",
            "Source: output of that code through the solar_utils package 0.3, kept as test data of pvlib 0.16.1 "
            "(tests/data/spectrl2_example_spectra.csv). Licence: BSD-3-Clause (pvlib).",
            "Obtained: tests/reference/make_daylight.py",
            "Conditions: 40 N, 80 W, 2020-03-15 10:45:59 UTC-5 (day 75), horizontal plane, apparent zenith "
            "47.912086486816406 deg, relative air mass 1.4899535986910446, pressure 1013 hPa, water 1.42 cm, ozone "
            "0.344 atm-cm, aerosol optical depth at 500 nm 0.1, Angstrom exponent 1.14, aerosol asymmetry 0.65, "
            "ground albedo 0.2.",
            "direct_normal, extraterrestrial (of the day): on a plane facing the sun; diffuse_horizontal; "
            "global_horizontal. Units: nm; all others W m-2 nm-1.",
        ],
        {
            "wavelength_nm": np.round(column["wavelength"] * 1000, 1),
            "extraterrestrial": column["specetr"] / 1000,
            "direct_normal": column["specdir"] / 1000,
            "diffuse_horizontal": column["specdif"] / 1000,
            "global_horizontal": column["specglo"] / 1000,
        },
        7,
    )


if __name__ == "__main__":
    cie_d65()
    spectrl2_example(sys.argv[1])
