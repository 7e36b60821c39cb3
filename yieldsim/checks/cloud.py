"""Cloud against discrete ordinates, daylight and regressions of measured spectra."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from functools import cache

import numpy as np
from numpy.typing import NDArray

from yieldsim import reference
from yieldsim.checks.clear_sky import seen_at
from yieldsim.checks.record import Outcome, spectral_factor
from yieldsim.device.bank import FOLD_TEMPERATURES, Bank
from yieldsim.device.stack import Absorber
from yieldsim.sky import column, layer
from yieldsim.spectrum import band_wavelengths, integrate_bands

Array = NDArray[np.float64]

ORDINATES = "discrete ordinates, 32 streams (PythonicDISORT, Ho 2024), table discrete_ordinates"
ONE_LAYER = "discrete ordinates, 32 streams (PythonicDISORT, Ho 2024), table discrete_ordinates_layer"
D65 = "CIE standard illuminant D65, table cie_d65"
SUNS_DEG = (0.0, 30.0, 60.0, 70.0, 75.0)  # zenith: sun above 10 deg; 80 deg is reported
#: Library entry -> regressions of its kind (model, key in pvlib) and how far [%] beyond their span ours may lie.
REGRESSIONS: Mapping[str, tuple[tuple[tuple[str, str], ...], float]] = {
    "c-si": ((("pvspec", "monosi"), ("pvspec", "multisi"), ("jrc", "multisi")), 2.0),
    "cdte": ((("pvspec", "fs4-1"), ("pvspec", "fs4-2"), ("jrc", "cdte")), 3.0),
    "cigs": ((("pvspec", "cigs"),), 3.0),
    "a-si": ((("pvspec", "asi"),), 3.0),
}
CLEAR_KEYS: Mapping[str, str] = {"c-si": "monosi", "cdte": "cdte", "cigs": "cigs"}


def moments_of(asymmetry: Array) -> list[Array]:
    """Return the moments of Henyey and Greenstein's phase function."""
    return [np.asarray(asymmetry) ** order for order in range(layer.MOMENTS)]


@cache
def one_layer_deviation() -> Array:
    """Return our light below each layer of the table over the table's, less 1, (n,) [1]."""
    table = reference.table("discrete_ordinates_layer")
    mu = np.cos(np.radians(table["zenith_deg"]))
    solved = layer.four_stream(table["depth"], table["single_scattering_albedo"], moments_of(table["asymmetry"]), mu)
    return np.asarray((solved.beam + layer.flux(solved.down)) / (table["direct"] + table["diffuse"]) - 1)


def lost_without_absorption() -> float:
    """Return the largest share of light lost or made by a layer that does not absorb [1]."""
    table = reference.table("discrete_ordinates_layer")
    mu = np.cos(np.radians(table["zenith_deg"]))
    solved = layer.four_stream(table["depth"], np.ones_like(mu), moments_of(table["asymmetry"]), mu)
    total = solved.beam + layer.flux(solved.down) + layer.flux(solved.up)
    return float(np.max(np.abs(total - 1)))


def column_of(cloud: Array, aod500: float, albedo: float, mu: float) -> Array:
    """Return light on the ground (n_cloud, n_wavelength) [1] under the air of discrete_ordinates_air, by our layers."""
    table = reference.table("discrete_ordinates_air")
    haze_share, vapour_share, air_share = column.HAZE_SHARE, column.WATER_SHARE, column.AIR_SHARE
    layers = []
    for i in range(3):
        air = table["rayleigh"] * air_share[i]
        haze = table["haze"] * aod500 * haze_share[i]
        drops = cloud[:, None] if i == 1 else np.zeros((len(cloud), 1))
        depth = air + haze + table["vapour"] * vapour_share[i] + drops
        hazy, clouded = haze * table["haze_albedo"], drops * (1 - table["cloud_absorption"])
        scattered = air + hazy + clouded
        rayleigh = (1.0, 0.0, column.RAYLEIGH_MOMENT, 0.0, 0.0)
        moments = [
            (hazy * column.HAZE_ASYMMETRY**order + clouded * column.CLOUD_ASYMMETRY**order + air * rayleigh[order])
            / scattered
            for order in range(layer.MOMENTS)
        ]
        layers.append(layer.four_stream(depth, scattered / depth, moments, np.array(mu)))
    return layer.add_layers(layers, np.array(albedo)) * np.exp(-table["ozone"] / mu)


@cache
def band_over_broadband(zenith_deg: float, aod500: float, albedo: float) -> tuple[Array, Array]:
    """Return cloud depths (n,) and our band over broadband over the table's, less 1, (n, n_wavelength) [1].

    Our cloud depth is first solved for the table's broadband, next to the table's own depth: over bright ground light
    does not fall steadily with the depth, so there may be two.
    """
    air, table = reference.table("discrete_ordinates_air"), reference.table("discrete_ordinates")
    chosen = (table["zenith_deg"] == zenith_deg) & (table["aod500"] == aod500) & (table["albedo"] == albedo)
    depths = np.unique(table["cloud_depth"])
    theirs = (table["direct"] + table["diffuse"])[chosen].reshape(-1, len(depths)).T
    mu, weight = float(np.cos(np.radians(zenith_deg))), air["solar_weight"]
    solved, wanted = depths.copy(), theirs @ weight
    for _ in range(30):  # Newton's steps; where light hardly depends on the depth it does not matter
        got = column_of(solved, aod500, albedo, mu) @ weight
        nudge = solved * 1e-3 + 1e-4
        slope = (column_of(solved + nudge, aod500, albedo, mu) @ weight - got) / nudge
        steep = np.where(np.abs(slope) < 1e-3 * wanted.max(), -np.inf, slope)
        solved = np.clip(solved - (got - wanted) / steep, 0.0, 300.0)
    mine = column_of(solved, aod500, albedo, mu)
    return depths, (mine / (mine @ weight)[:, None]) / (theirs / wanted[:, None]) - 1


def ordinate_outcomes() -> Iterator[Outcome]:
    """Yield the comparison of layers with discrete ordinates."""
    table, off = reference.table("discrete_ordinates_layer"), np.abs(one_layer_deviation())
    pale = table["single_scattering_albedo"] >= 0.99
    for low, high, limit in ((60.0, 90.0, 1.5), (30.0, 60.0, 6.0), (0.0, 30.0, None)):
        sun = 90 - table["zenith_deg"]
        worst = 100 * float(np.max(off[pale & (sun >= low) & (sun <= high)]))
        name = f"light below one layer, sun {low:g} to {high:g} deg, largest deviation"
        yield Outcome("cloud", name, ONE_LAYER, worst, worst, limit)
    lost = lost_without_absorption()
    yield Outcome("cloud", "energy lost without absorption", "closed form: none", lost, lost, 1e-10, "1", "1")
    wavelength = reference.table("discrete_ordinates_air")["wavelength_nm"]
    visible = (wavelength >= 400) & (wavelength <= 1100)
    for suns, limit, words in ((SUNS_DEG, 1.5, "sun above 10 deg"), ((80.0,), None, "sun at 10 deg")):
        cases = [(sun, aod, albedo) for sun in suns for aod in (0.1, 0.4) for albedo in (0.2, 0.7)]
        found = [band_over_broadband(*case) for case in cases]
        worst = 100 * max(float(np.max(np.abs(off[depths >= 0.5][:, visible]))) for depths, off in found)
        name = f"band over broadband, 400-1100 nm, cloud 0.5-50, {words}, largest deviation"
        yield Outcome("cloud", name, ORDINATES, worst, worst, limit)


def light(air_mass: float, water_cm: float, cloud: Array | float = 0.0) -> Array:
    """Return band spectra on the horizontal over the sine of the sun's height, one row a cloud depth, standard air."""
    cloud = np.atleast_1d(np.asarray(cloud, dtype=np.float64))
    each = np.ones(len(cloud))
    air = column.Air(
        seen_at(air_mass) * each, 101325.0 * each, water_cm * each, 0.3438 * each, 0.084 * each, 1.14 * each, 0.2 * each
    )
    optics = column.optics()
    return column.transmit(air, cloud).total * optics.extraterrestrial * optics.factor


def daylight_deviation() -> Array:
    """Return our overcast spectrum over daylight D65, shapes over 400-700 nm, less 1, (n,) [1]."""
    table, wavelength = reference.table("cie_d65"), band_wavelengths()
    visible = (wavelength >= 400) & (wavelength <= 700)
    theirs = integrate_bands(table["wavelength_nm"], table["relative_power"])[visible]
    ours = light(1.6, 1.42, 30.0)[0, visible]
    return np.asarray((ours / ours.sum()) / (theirs / theirs.sum()) - 1)


def yields_at_standard(absorbers: Sequence[Absorber]) -> Array:
    """Return the band yields of absorbers of one junction at 25 degC, (n_absorber, n_band) [A W-1]."""
    return np.asarray(Bank.of(absorbers).yields[len(FOLD_TEMPERATURES) // 2])


def cloud_effect(yields: Array, clearness: float) -> Array:
    """Return the factor at a clear-sky index over that under clear sky, air mass 1.5, (n_absorber,) [1]."""
    clear, cloudy = light(1.5, 1.42), light(1.5, 1.42, np.geomspace(0.05, 200.0, 120))
    index, factors = cloudy.sum(axis=1) / clear.sum(), spectral_factor(cloudy, yields)
    at = np.array([np.interp(-clearness, -index, row) for row in factors.T])
    return np.asarray(at / spectral_factor(clear, yields)[0])


def published_effect(model: str, key: str, clearness: float) -> float:
    """Return the same of a published regression."""
    from pvlib import spectrum as published

    call = getattr(published, f"spectral_factor_{model}")
    return float(call(1.5, clearness, module_type=key) / call(1.5, 1.0, module_type=key))


def outside(value: float, span: Sequence[float]) -> float:
    """Return how far [%] a value lies outside a span; 0 inside."""
    return 100 * max(0.0, min(span) / value - 1, value / max(span) - 1)


def regression_outcomes(library: Mapping[str, Absorber]) -> Iterator[Outcome]:
    """Yield the comparison of the cloud's effect with regressions, and daylight."""
    for name, (models, limit) in REGRESSIONS.items():
        yields = yields_at_standard([library[name]])
        for clearness in (0.2, 0.4, 0.6, 0.8):
            ours = float(cloud_effect(yields, clearness)[0])
            span = [published_effect(model, key, clearness) for model, key in models]
            source = ", ".join(f"spectral_factor_{model} {key}" for model, key in models) + ", pvlib"
            text = f"{name}: factor at clear-sky index {clearness:g} over clear, beyond the span"
            yield Outcome("cloud", text, source, ours, outside(ours, span), limit, "1")
    off = 100 * float(np.max(np.abs(daylight_deviation())))
    yield Outcome("cloud", "overcast spectrum, 400-700 nm, largest deviation of shape", D65, off, off, 8.0)


def clear_factor(yields: Array, air_mass: float, water_cm: float) -> Array:
    """Return the clear-sky factor over that at air mass 1.5 and 1.42 cm of water, (n_absorber,) [1]."""
    here, standard = light(air_mass, water_cm), light(1.5, 1.42)
    return np.asarray(spectral_factor(here, yields)[0] / spectral_factor(standard, yields)[0])


def published_clear(key: str, air_mass: float, water_cm: float) -> tuple[float, float]:
    """Return the same of the two published clear-sky regressions."""
    from pvlib import spectrum as published

    first, second = published.spectral_factor_firstsolar, published.spectral_factor_caballero
    one = first(water_cm, air_mass, module_type=key) / first(1.42, 1.5, module_type=key)
    two = second(water_cm, air_mass, 0.084, module_type=key) / second(1.42, 1.5, 0.084, module_type=key)
    return float(np.squeeze(one)), float(np.squeeze(two))


def clear_regression_outcomes(library: Mapping[str, Absorber]) -> Iterator[Outcome]:
    """Yield the comparison of clear-sky factors with regressions."""
    source = "spectral_factor_firstsolar (Lee & Panchula 2016), _caballero (Caballero et al. 2018), pvlib"
    for name, key in CLEAR_KEYS.items():
        yields = yields_at_standard([library[name]])
        for masses, limit in (((1.0, 1.5, 2.0, 3.0), 2.0), ((4.0, 5.0), None)):
            cases = [(mass, water) for mass in masses for water in (0.5, 1.42, 2.5, 4.0)]
            far = [outside(float(clear_factor(yields, *case)[0]), published_clear(key, *case)) for case in cases]
            text = f"{name}: clear-sky factor, air mass {masses[0]:g}-{masses[-1]:g}, water 0.5-4 cm, beyond the span"
            yield Outcome("clear sky", text, source, max(far), max(far), limit)
