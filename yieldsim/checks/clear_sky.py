"""Clear skies against 6S, Bird & Hulstrom and the published example of the simple spectral model."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq

from yieldsim import reference
from yieldsim.checks.record import Outcome, rms, spectral_factor, step_yields
from yieldsim.sky import column, growth, sun
from yieldsim.spectrum import band_wavelengths

Array = NDArray[np.float64]

GAPS_EV = (0.72, 1.12, 1.45, 1.6, 1.8, 2.2)
SIX_S = "6S vector 1.1 (Vermote et al. 1997, Kotchenova et al. 2006), table sixs_clear_skies"
BIRD = "Bird & Hulstrom, SERI/TR-642-761 (1981), through pvlib"
#: Air masses from, to, and the limit [%] of the root mean square over gaps and skies.
AIR_MASSES = ((1.0, 1.51, 0.5), (2.9, 3.1, 0.8), (4.9, 5.1, 1.5))
BEAM_LIMIT = 0.6
LEVEL_LIMIT = 3.0  # two independent sets of gas absorption
#: Conditions of spectrl2_example.csv, from its header.
EXAMPLE = {
    "zenith_deg": 47.912086486816406,
    "pressure": 101300.0,
    "water_cm": 1.42,
    "ozone_atm_cm": 0.344,
    "aod500": 0.1,
}


@dataclass(frozen=True, slots=True, eq=False)
class SixS:
    """Our clear skies beside those of 6S, fed with its haze optics in flat air.

    Parameters
    ----------
    slant : (n,) array [1], air mass of each sky
    total, beam : (n, n_gap) arrays [1], our current per light over 6S's, each relative to its own at air mass 1.5
    level : (n,) array [1], our broadband light over 6S's
    """

    slant: Array
    total: Array
    beam: Array
    level: Array


def seen_at(air_mass: float) -> float:
    """Return the cosine of the zenith at which Kasten & Young's air mass is the given one."""
    if air_mass <= 1.0001:
        return 1.0
    return float(brentq(lambda cosine: float(sun.relative_air_mass(np.array(cosine))) - air_mass, 1e-4, 1.0))


def six_s() -> SixS:
    """Compute every sky of the 6S table with our column.

    6S's air is flat: each sun is put where our curved air has the same air mass.
    """
    conditions, haze = reference.table("sixs_conditions"), reference.table("sixs_haze_optics")
    spectra, n_band = reference.table("sixs_clear_skies"), len(band_wavelengths())
    direct, diffuse = spectra["direct"].reshape(-1, n_band), spectra["diffuse"].reshape(-1, n_band)
    at_500 = np.interp(500.0, haze["wavelength_nm"], haze["extinction"])
    optics = column.optics().replace(
        haze_shape=-np.log(haze["extinction"] / at_500),
        haze_albedo=haze["single_scattering_albedo"],
        haze_asymmetry=haze["asymmetry"],
    )
    slant = 1 / np.cos(np.radians(conditions["zenith_deg"]))
    n = len(slant)
    air = column.Air(
        cos_zenith=np.array([seen_at(float(mass)) for mass in slant]),
        pressure=conditions["pressure"],
        water_cm=conditions["water_cm"],
        ozone_atm_cm=conditions["ozone_atm_cm"],
        aod500=conditions["aod500"],
        angstrom_exponent=np.ones(n),
        albedo=conditions["albedo"],
    )
    passed = column.transmit(air, np.zeros(n), optics)
    top, yields = haze["solar_g173"], step_yields(GAPS_EV)
    standard = (np.abs(slant - 1.5) < 1e-3) & (conditions["water_cm"] == 1.4164) & (conditions["aod500"] == 0.084)
    standard &= (conditions["elevation_km"] == 0) & (conditions["albedo"] == 0.2)
    first = int(np.flatnonzero(standard)[0])

    def relative(ours: Array, theirs: Array) -> Array:
        a, b = spectral_factor(ours * top, yields), spectral_factor(theirs * top, yields)
        return np.asarray((a / a[first]) / (b / b[first]))

    ours, beam = passed.total * optics.factor, passed.beam * optics.factor
    level = (ours @ top) / ((direct + diffuse) @ top)
    return SixS(slant, relative(ours, direct + diffuse), relative(beam, direct), level)


def six_s_outcomes() -> Iterator[Outcome]:
    """Yield the comparison with 6S by air mass."""
    skies = six_s()
    for low, high, limit in AIR_MASSES:
        chosen = (skies.slant >= low) & (skies.slant <= high)
        off = 100 * rms(skies.total[chosen] - 1)
        name = f"current per light, air mass {low:g} to {high:g}, {int(chosen.sum())} skies, rms over gaps 0.72-2.2 eV"
        yield Outcome("clear sky", name, SIX_S, off, off, limit)
    for low, high, _ in AIR_MASSES:
        chosen = (skies.slant >= low) & (skies.slant <= high)
        off = 100 * rms(skies.beam[chosen] - 1)
        yield Outcome(
            "clear sky", f"the same for the beam alone, air mass {low:g} to {high:g}", SIX_S, off, off, BEAM_LIMIT
        )
    off = 100 * float(np.max(np.abs(skies.level - 1)[skies.slant <= 5.1]))
    yield Outcome(
        "clear sky", "broadband light on the ground, up to air mass 5, largest deviation", SIX_S, off, off, LEVEL_LIMIT
    )


def bird_deviation(elevation_deg: float, aod500: float) -> tuple[float, float]:
    """Return our GHI and DNI over those of Bird & Hulstrom's model with the same inputs [1]."""
    from pvlib import clearsky

    zenith = 90.0 - elevation_deg
    cosine = np.array([np.cos(np.radians(zenith))])
    each = np.ones(1)
    air = column.Air(
        cosine, 101325.0 * each, 1.4164 * each, 0.3438 * each, aod500 * each, 1.14 * each, 0.2 * each
    )  # fmt: skip
    passed, optics = column.transmit(air, np.zeros(1)), column.optics()
    top = optics.extraterrestrial * optics.factor
    bird = clearsky.bird(
        zenith,
        float(sun.relative_air_mass(cosine)[0]),
        aod500 * (380 / 500) ** -1.14,
        aod500,
        1.4164,
        0.3438,
        101325.0,
        float(optics.extraterrestrial.sum()),
        albedo=0.2,
    )
    ghi, dni = float(passed.total[0] @ top * cosine[0]), float(passed.beam[0] @ top)
    return ghi / float(bird["ghi"]), dni / float(bird["dni"])


def bird_outcomes() -> Iterator[Outcome]:
    """Yield the comparison with Bird & Hulstrom's broadband model."""
    for heights, hazes, limits, words in (
        ((35.0, 45.0, 60.0, 90.0), (0.05, 0.1, 0.2), (5.0, 7.0), "sun above 30 deg, AOD <= 0.2"),
        ((20.0, 30.0, 60.0, 90.0), (0.05, 0.2, 0.4), (10.0, 10.0), "sun down to 20 deg, AOD <= 0.4"),
    ):
        ratios = np.array([bird_deviation(height, haze) for height in heights for haze in hazes])
        for name, ratio, limit in zip(("GHI", "DNI"), ratios.T, limits, strict=True):
            off = 100 * float(np.max(np.abs(ratio - 1)))
            yield Outcome("clear sky", f"clear {name}, {words}, largest deviation", BIRD, off, off, limit)


def example_beam() -> tuple[Array, Array]:
    """Return the beam of the published example and ours from Bird & Riordan's own coefficients, (n_band,) each.

    The beam is rebuilt with the Rayleigh and ozone depths, air masses and curves of growth that the column uses.
    """
    example, bird = reference.table("spectrl2_example"), reference.table("bird_riordan_1984")
    mass = float(sun.relative_air_mass(np.array(np.cos(np.radians(EXAMPLE["zenith_deg"])))))
    air_path = mass * EXAMPLE["pressure"] / column.BIRD_PRESSURE
    depth: Array = column.bare_optics().rayleigh * air_path
    depth = depth + EXAMPLE["aod500"] * (bird["wavelength_nm"] / 500.0) ** -1.14 * mass
    depth = depth + growth.water_depth(bird["water"], np.array(EXAMPLE["water_cm"] * mass))
    depth = depth + growth.mixed_gas_depth(bird["mixed_gas"], np.array(air_path))
    ozone_mass = float(sun.ozone_air_mass(np.array(np.cos(np.radians(EXAMPLE["zenith_deg"])))))
    depth = depth + bird["ozone"] * EXAMPLE["ozone_atm_cm"] * ozone_mass
    return example["direct_normal"], example["extraterrestrial"] * np.exp(-depth)


def example_outcomes() -> Iterator[Outcome]:
    """Yield the comparison with the published example, bands above 1 % of the brightest."""
    published, ours = example_beam()
    bright = published > 0.01 * published.max()
    off = 100 * float(np.max(np.abs(ours / published - 1)[bright]))
    source = "spectrl2_2.c's example, kept in pvlib's tests, table spectrl2_example"
    yield Outcome("clear sky", "shared coefficients: direct beam by band, largest deviation", source, off, off, 0.2)
