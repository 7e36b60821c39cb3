"""Write the tables of fluxes by discrete ordinates that the layers of the column are held against.

    pip install PythonicDISORT
    python tests/reference/make_discrete_ordinates.py

Everything the solver is given stands in this file; no part of the column is used. Takes about half a minute.
"""

from __future__ import annotations

import itertools
import textwrap
import warnings
from pathlib import Path

import numpy as np
from PythonicDISORT.pydisort import pydisort

HERE = Path(__file__).resolve().parents[2] / "yieldsim" / "reference"
STREAMS = 32  # 48 streams change no flux of this table by more than 2e-5
NEARLY_ONE = 1e-10  # the solver wants every single-scattering albedo below 1

# One row per wavelength, made up for this purpose in the likeness of real air: wavelength [nm]; energy of the sun
# that the wavelength stands for [W m-2]; vertical optical depths of air (Rayleigh), ozone and vapour; of haze per
# unit at 500 nm, and its single-scattering albedo; share a cloud drop absorbs of what it takes out of the beam.
AIR = np.array(
    [
        (350, 66.9, 0.6363, 0.1000, 0.0000, 1.502, 0.943, 1e-6),
        (400, 71.0, 0.3641, 0.0000, 0.0000, 1.290, 0.945, 1e-6),
        (450, 94.2, 0.2236, 0.0013, 0.0000, 1.128, 0.944, 1e-6),
        (500, 95.9, 0.1451, 0.0104, 0.0000, 1.000, 0.940, 1e-6),
        (550, 92.8, 0.0983, 0.0317, 0.0000, 0.897, 0.936, 1e-6),
        (600, 88.0, 0.0689, 0.0411, 0.0070, 0.812, 0.930, 2e-6),
        (650, 94.1, 0.0498, 0.0245, 0.0020, 0.742, 0.924, 3e-6),
        (720, 88.9, 0.0329, 0.0064, 0.0284, 0.660, 0.914, 1e-5),
        (780, 88.0, 0.0238, 0.0008, 0.0207, 0.602, 0.906, 2e-5),
        (870, 78.2, 0.0153, 0.0000, 0.0105, 0.532, 0.892, 5e-5),
        (940, 74.3, 0.0112, 0.0000, 0.1772, 0.487, 0.882, 2.5e-4),
        (1050, 98.2, 0.0072, 0.0000, 0.0300, 0.429, 0.865, 1.5e-4),
        (1250, 125.8, 0.0036, 0.0000, 0.2954, 0.352, 0.835, 1e-3),
        (1650, 102.2, 0.0012, 0.0000, 0.2556, 0.256, 0.781, 5e-3),
        (2200, 48.3, 0.0004, 0.0000, 0.1433, 0.185, 0.717, 1.6e-2),
    ]
)
COLUMNS = ("wavelength_nm", "solar_weight", "rayleigh", "ozone", "vapour", "haze", "haze_albedo", "cloud_absorption")
HAZE_ASYMMETRY = 0.65
CLOUD_ASYMMETRY = 0.85
# Shares of the three layers under the ozone, top first; the cloud is in the middle one.
SHARES = {"rayleigh": (0.8, 0.1, 0.1), "vapour": (0.42, 0.18, 0.40), "haze": (0.2, 0.1, 0.7), "cloud": (0.0, 1.0, 0.0)}

ZENITH_DEG = (0.0, 30.0, 60.0, 70.0, 75.0, 80.0)
CLOUD_DEPTH = (0.0, 0.25, 0.5, 0.75, 1.0, 1.5, 2.0, 3.0, 4.0, 5.0, 7.0, 10.0, 15.0, 20.0, 30.0, 50.0)
AOD500 = (0.1, 0.4)
ALBEDO = (0.2, 0.7)

SINGLE_DEPTH = (0.1, 0.25, 0.5, 1.0, 2.0, 3.0, 5.0, 7.0, 10.0, 15.0, 20.0, 30.0, 50.0)
SINGLE_ALBEDO = (1.0, 0.9999, 0.999, 0.99, 0.9)
SINGLE_ASYMMETRY = (0.0, 0.65, 0.85)
SINGLE_ZENITH_DEG = (0.0, 30.0, 60.0, 70.0, 75.0, 80.0, 85.0)

SOURCE = (
    "Source: calculated with PythonicDISORT 1.8 (MIT licence), D. J. X. Ho, PythonicDISORT: a Python reimplementation "
    "of the discrete ordinate radiative transfer package DISORT, J. Open Source Softw. 9 (2024) 6442, "
    f"doi:10.21105/joss.06442; {STREAMS} streams, delta-M.",
    "Licence: figures calculated for this project, as free as it.",
    "Obtained: tests/reference/make_discrete_ordinates.py",
)


def henyey_greenstein(asymmetry):
    return float(asymmetry) ** np.arange(STREAMS + 1)


RAYLEIGH = np.where(np.arange(STREAMS + 1) == 0, 1.0, 0.0) + np.where(np.arange(STREAMS + 1) == 2, 0.1, 0.0)


def fluxes(depth, albedo, moments, zenith_deg, ground_albedo):
    """Return direct and diffuse light down at the bottom and light up on top, over that on a horizontal plane on top.

    depth, albedo (n_layer,); moments (n_layer, STREAMS + 1) Legendre moments of the phase function, the first 1.
    """
    mu = np.cos(np.radians(zenith_deg))
    bottom = np.cumsum(depth)
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Some delta-scaled single-scattering albedos are very close to 1")
        _, up, down, *_ = pydisort(
            bottom,
            np.minimum(albedo, 1 - NEARLY_ONE),
            STREAMS,
            moments,
            mu,
            1 / mu,
            0.0,
            NLeg=STREAMS,
            only_flux=True,
            f_arr=moments[:, STREAMS],
            BDRF_Fourier_modes=[float(ground_albedo)]
            if ground_albedo
            else [],  # the solver's unit: albedo, not albedo/pi
            cache_asso_leg="mu0",
        )
    diffuse, direct = down(bottom[-1])
    return float(direct), float(diffuse), float(up(0.0))


def column(air, cloud, aod500):
    """Return depth, single-scattering albedo and phase moments of ozone on top and the three layers under it."""
    _, _, rayleigh, ozone, vapour, haze, haze_albedo, absorbed = air
    depth, albedo, moments = [ozone], [0.0], [RAYLEIGH]
    for of_air, of_vapour, of_haze, of_cloud in zip(*SHARES.values(), strict=True):
        parts = [
            (rayleigh * of_air, 1.0, RAYLEIGH),
            (vapour * of_vapour, 0.0, RAYLEIGH),
            (haze * aod500 * of_haze, haze_albedo, henyey_greenstein(HAZE_ASYMMETRY)),
            (cloud * of_cloud, 1 - absorbed, henyey_greenstein(CLOUD_ASYMMETRY)),
        ]
        scattered = sum(t * w for t, w, _ in parts)
        depth.append(sum(t for t, _, _ in parts))
        albedo.append(scattered / depth[-1])
        moments.append(sum(t * w * m for t, w, m in parts) / scattered)
    start = 0 if ozone > 0 else 1  # the solver takes no empty layer
    return np.array(depth[start:]), np.array(albedo[start:]), np.array(moments[start:])


def write(name, header, columns, rows):
    lines = [f"# {line}" for paragraph in header for line in textwrap.wrap(paragraph, 116)] + [",".join(columns)]
    lines += [",".join(f"{value:.7g}" for value in row) for row in rows]
    (HERE / f"{name}.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")


def air():
    shares = "; ".join(f"{name} {'/'.join(str(share) for share in of)}" for name, of in SHARES.items())
    write(
        "discrete_ordinates_air",
        [
            "The air given to the discrete-ordinate solver for discrete_ordinates.csv: invented, in the likeness of "
            "real air. Licence: made for this project.",
            "Obtained: tests/reference/make_discrete_ordinates.py",
            "Ozone is a layer of its own on top, a pure absorber. Below it three layers, top first, share the rest so: "
            f"{shares}. Phase functions: Rayleigh; Henyey-Greenstein with asymmetry {HAZE_ASYMMETRY} (haze) and "
            f"{CLOUD_ASYMMETRY} (cloud). Vapour only absorbs.",
            "rayleigh, ozone, vapour: vertical optical depth; haze: the same per unit at 500 nm; haze_albedo: its "
            "single-scattering albedo; cloud_absorption: 1 less the single-scattering albedo of cloud, whose depth is "
            "alike at all wavelengths; solar_weight: energy a wavelength stands for in broadband sums. Units: nm; W "
            "m-2; all others 1.",
        ],
        COLUMNS,
        AIR,
    )


def columns():
    rows = []
    for air, aod, zenith, albedo, cloud in itertools.product(AIR, AOD500, ZENITH_DEG, ALBEDO, CLOUD_DEPTH):
        rows.append((air[0], aod, zenith, albedo, cloud, *fluxes(*column(air, cloud, aod), zenith, albedo)))
    write(
        "discrete_ordinates",
        [
            "Columns of air with a cloud, by discrete ordinates: light over that on a horizontal plane on top.",
            *SOURCE,
            "The air of each wavelength and how it is laid in layers: discrete_ordinates_air.csv; flat; Lambertian "
            "ground. direct: unscattered, at the ground; diffuse: all other light down at the ground; up: light back "
            "on top. Units: nm; 1; deg; 1; 1; 1; 1; 1.",
        ],
        ("wavelength_nm", "aod500", "zenith_deg", "albedo", "cloud_depth", "direct", "diffuse", "up"),
        rows,
    )


def single_layers():
    rows = []
    for g, omega, zenith, depth in itertools.product(SINGLE_ASYMMETRY, SINGLE_ALBEDO, SINGLE_ZENITH_DEG, SINGLE_DEPTH):
        moments = henyey_greenstein(g)[None]
        rows.append((g, omega, zenith, depth, *fluxes(np.array([depth]), np.array([omega]), moments, zenith, 0.0)))
    write(
        "discrete_ordinates_layer",
        [
            "One homogeneous layer over black ground, by discrete ordinates: light over that on a horizontal plane on "
            "top.",
            *SOURCE,
            "Henyey-Greenstein phase function; an albedo of 1 was calculated as 1 - 1e-10. direct: unscattered, below; "
            "diffuse: all other light down, below; up: light back on top. Units: 1; 1; deg; 1; 1; 1; 1.",
        ],
        ("asymmetry", "single_scattering_albedo", "zenith_deg", "depth", "direct", "diffuse", "up"),
        rows,
    )


if __name__ == "__main__":
    air()
    single_layers()
    columns()
