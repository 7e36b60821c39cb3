"""Write the table of clear skies on tilted planes, by discrete ordinates, that the split of the sky's light is held to.

    pip install PythonicDISORT
    python tests/reference/make_tilted_skies.py

Everything the solver is given stands in this file and make_discrete_ordinates.py; no part of the column is used. The
radiance of the sky at the ground, direction by direction, is summed over what a plane sees of it. Takes half a minute.
"""

from __future__ import annotations

import itertools
import warnings

import numpy as np
from make_discrete_ordinates import HAZE_ASYMMETRY, NEARLY_ONE, RAYLEIGH, SHARES, SOURCE, write
from PythonicDISORT.pydisort import pydisort
from PythonicDISORT.subroutines import Gauss_Legendre_quad, interpolate

STREAMS = 64  # thin air is bright at its rim: 96 streams change planes by up to 0.12 % of the horizontal, 32 by 2.4 %
MOMENTS = 128  # of the phase function, for the intensity correction; the solver itself takes the first STREAMS
AZIMUTHS = 360
HEIGHTS = 64  # 192 change nothing in five digits

WAVELENGTH_NM = (350.0, 400.0, 450.0, 500.0, 600.0, 700.0, 870.0, 1050.0, 1600.0)
AOD500 = (0.05, 0.084, 0.2, 0.5)  # 0.084: ASTM G173-03
ZENITH_DEG = (30.0, 48.236, 60.0, 75.0)  # 48.236 deg: air mass 1.5
PLANES = tuple(itertools.product((20.0, 37.0, 60.0, 90.0), (0.0, 90.0, 180.0)))

# Haze of two kinds. 1: Henyey-Greenstein. 2: two such terms, one forward and one backward, in the likeness of
# continental haze: first and second moment 0.665 and 0.484, those 6S has for its own at 300 to 370 nm and more forward
# than at 500 (sixs_haze_optics.csv); the third was chosen.
TERMS = {1: ((1.0, HAZE_ASYMMETRY),), 2: ((0.961, 0.706), (0.039, -0.35))}
# Which skies: kind of haze, albedo of the ground, wavelengths, depths of haze; each with all zeniths and planes.
SKIES = (
    (1, 0.2, WAVELENGTH_NM, AOD500),
    (1, 0.0, (400.0, 600.0, 1050.0), (0.084, 0.5)),
    (2, 0.2, WAVELENGTH_NM, (0.084, 0.5)),
)


def rayleigh_depth(wavelength_nm):
    """Return the vertical optical depth of air at sea level, as in Bird & Riordan (1984), eq. 2-4, at air mass 1."""
    um = wavelength_nm / 1000
    return 1 / (um**4 * (115.6406 - 1.3366 / um**2))


def haze_depth(wavelength_nm, aod500):
    return aod500 * (wavelength_nm / 500) ** -1.14


def haze_albedo(wavelength_nm):
    return 0.945 * np.exp(-0.095 * np.log(wavelength_nm / 400) ** 2)


def haze_moments(kind):
    order = np.arange(MOMENTS + 1)
    return sum(share * asymmetry**order for share, asymmetry in TERMS[kind])


def air_moments():
    return np.pad(RAYLEIGH, (0, MOMENTS + 1 - len(RAYLEIGH)))


def radiance(wavelength_nm, aod500, zenith_deg, albedo, kind, streams=STREAMS, heights=HEIGHTS):
    """Return light at the ground over that on a horizontal plane on top.

    Returns
    -------
    direct, diffuse : float, on the horizontal
    cosines, weights : (heights,) array, cosine of the zenith angle of a direction and its share of solid angle
    sky : (heights, AZIMUTHS) array, radiance; the sun stands at azimuth 0, the first column half a step past it
    """
    mu = np.cos(np.radians(zenith_deg))
    of_air, of_haze = rayleigh_depth(wavelength_nm), haze_depth(wavelength_nm, aod500)
    albedo_haze = haze_albedo(wavelength_nm)
    depth, scattered, moments = [], [], []
    for share_air, share_haze in zip(SHARES["rayleigh"], SHARES["haze"], strict=True):
        air, haze = of_air * share_air, of_haze * share_haze
        depth.append(air + haze)
        scattered.append(air + haze * albedo_haze)
        moments.append((air * air_moments() + haze * albedo_haze * haze_moments(kind)) / scattered[-1])
    moments = np.array(moments)
    bottom = np.cumsum(depth)
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="Some delta-scaled single-scattering albedos are very close to 1")
        _, _, down, _, intensity = pydisort(
            bottom,
            np.minimum(np.divide(scattered, depth), 1 - NEARLY_ONE),
            streams,
            moments,
            mu,
            1 / mu,
            0.0,
            NLeg=streams,
            NFourier=streams,
            f_arr=moments[:, streams],
            NT_cor=True,
            BDRF_Fourier_modes=[float(albedo)] if albedo else [],
            cache_asso_leg="mu0",
        )
    diffuse, direct = down(bottom[-1])
    cosines, weights = Gauss_Legendre_quad(heights)
    azimuths = (np.arange(AZIMUTHS) + 0.5) * 2 * np.pi / AZIMUTHS
    # Light that travels along azimuth 0 downwards comes from the sun's side: to look that way is to look at the sun.
    sky = interpolate(intensity, NT_cor="quad")(-cosines, bottom[-1], azimuths)
    return float(direct), float(diffuse), cosines, weights, sky


def on_plane(cosines, weights, sky, tilt_deg, azimuth_deg):
    """Return what a plane receives from the directions above both it and the horizon; azimuth from the sun's."""
    tilt, off = np.radians([tilt_deg, azimuth_deg])
    azimuths = (np.arange(AZIMUTHS) + 0.5) * 2 * np.pi / AZIMUTHS
    sines = np.sqrt(1 - cosines**2)
    incidence = np.cos(tilt) * cosines[:, None] + np.sin(tilt) * sines[:, None] * np.cos(azimuths - off)
    return float((weights[:, None] * sky * np.maximum(incidence, 0)).sum() * 2 * np.pi / AZIMUTHS)


def check(diffuse, cosines, weights, sky):
    """Check that the sum over directions is the solver's own flux, and that a uniform sky gives (1 + cos tilt)/2."""
    flux = on_plane(cosines, weights, sky, 0.0, 0.0)
    if abs(flux / diffuse - 1) > 1e-5:
        raise ValueError(f"the radiances sum to {flux}, the solver says {diffuse}")
    for tilt_deg, azimuth_deg in PLANES:
        uniform = on_plane(cosines, weights, np.full_like(sky, 1 / np.pi), tilt_deg, azimuth_deg)
        if abs(uniform - (1 + np.cos(np.radians(tilt_deg))) / 2) > 3e-4:
            raise ValueError(f"a uniform sky gives {uniform} at {tilt_deg} deg")
    if on_plane(cosines, weights, sky, 37.0, 0.0) <= on_plane(cosines, weights, sky, 37.0, 180.0):
        raise ValueError("a plane facing the sun sees less than one facing away: azimuth is off by half a turn")


def tilted_skies():
    rows = []
    for kind, albedo, wavelengths, aods in SKIES:
        for nm, aod, zenith in itertools.product(wavelengths, aods, ZENITH_DEG):
            direct, diffuse, *seen = radiance(nm, aod, zenith, albedo, kind)
            check(diffuse, *seen)
            depths = rayleigh_depth(nm), haze_depth(nm, aod), haze_albedo(nm)
            given = (nm, aod, zenith, albedo, kind, *depths, direct, diffuse)
            rows += [(*given, *plane, on_plane(*seen, *plane)) for plane in PLANES]
    shares = "; ".join(f"{name} {'/'.join(str(s) for s in SHARES[name])}" for name in ("rayleigh", "haze"))
    terms = "; ".join(f"{kind} = " + " + ".join(f"{s} x {g}" for s, g in terms) for kind, terms in TERMS.items())
    write(
        "tilted_skies",
        [
            "Clear skies on tilted planes, by discrete ordinates: light over that on a horizontal plane on top.",
            SOURCE[0].replace("32 streams", f"{STREAMS} streams"),
            *SOURCE[1:-1],
            "Obtained: tests/reference/make_tilted_skies.py",
            "Radiances at the ground with Nakajima & Tanaka's correction, summed over the directions above plane and "
            "horizon. Scalar: polarisation is left out.",
            "The air is invented, in the likeness of real air: no gas absorption, flat, Lambertian ground; three "
            f"layers, top first, share the depths so: {shares}.",
            "haze_kind: phase function of haze, Henyey-Greenstein terms as share x asymmetry: " + terms + ".",
            "rayleigh, haze: vertical optical depths; haze_albedo: single-scattering albedo of haze; direct: "
            "unscattered, diffuse: all other light down at the ground, both on the horizontal; azimuth_deg: of the "
            "plane, from the sun's; sky: diffuse light on the plane from above the horizon, without that from the "
            "ground. Units: nm; 1; deg; 1; 1; 1; 1; 1; 1; 1; deg; deg; 1.",
        ],
        (
            *("wavelength_nm", "aod500", "zenith_deg", "albedo", "haze_kind", "rayleigh", "haze", "haze_albedo"),
            *("direct", "diffuse", "tilt_deg", "azimuth_deg", "sky"),
        ),
        rows,
    )


if __name__ == "__main__":
    tilted_skies()
