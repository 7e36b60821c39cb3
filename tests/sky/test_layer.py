"""The four-stream layer against discrete ordinates, and what must hold of any layer."""

import numpy as np
import pytest

from yieldsim import reference
from yieldsim.sky import layer

LAYERS = reference.table("discrete_ordinates_layer")
AIR = reference.table("discrete_ordinates_air")
SKIES = reference.table("discrete_ordinates")


def moments_of(asymmetry):
    return [np.asarray(asymmetry) ** order for order in range(layer.MOMENTS)]


def one_layer():
    asymmetry, mu = LAYERS["asymmetry"], np.cos(np.radians(LAYERS["zenith_deg"]))
    return layer.four_stream(LAYERS["depth"], LAYERS["single_scattering_albedo"], moments_of(asymmetry), mu)


@pytest.mark.parametrize(("sun_above_deg", "limit"), [(60.0, 0.015), (30.0, 0.06)])
def test_light_below_one_layer(sun_above_deg, limit):
    """Reference: PythonicDISORT, 32 streams, cloud and haze layers over black ground (the table's header).

    Four streams cannot follow a narrow phase function at low sun; what is left of the flux deviates by the limits
    asked.
    """
    solved = one_layer()
    ours = solved.beam + layer.flux(solved.down)
    theirs = LAYERS["direct"] + LAYERS["diffuse"]
    chosen = (LAYERS["zenith_deg"] <= 90 - sun_above_deg) & (LAYERS["single_scattering_albedo"] >= 0.99)
    assert np.max(np.abs(ours / theirs - 1)[chosen]) <= limit


def test_nothing_is_lost_without_absorption():
    """Closed form: what passes and what returns add up to what came, to rounding; every depth, slant and asymmetry."""
    mu = np.cos(np.radians(LAYERS["zenith_deg"]))
    solved = layer.four_stream(LAYERS["depth"], np.ones_like(mu), moments_of(LAYERS["asymmetry"]), mu)
    total = solved.beam + layer.flux(solved.down) + layer.flux(solved.up)
    assert np.max(np.abs(total - 1)) < 1e-10


def test_diffuse_light_is_conserved_too():
    """Each stream's flux leaves again: flux weights times (R + T) give the weights back."""
    solved = layer.four_stream(np.array([0.1, 3.0, 80.0]), np.ones(3), moments_of(np.full(3, 0.85)), np.array(0.5))
    weights = np.array(layer.STREAMS)
    np.testing.assert_allclose(weights @ (solved.back + solved.through), np.broadcast_to(weights, (3, 2)), rtol=1e-10)


def test_pure_absorber_fades_as_an_exponential():
    """Closed form: without scattering, streams pass exp(-tau/mu) and nothing returns."""
    solved = layer.four_stream(np.array([0.3]), np.zeros(1), [np.ones(1), *[np.zeros(1)] * 4], np.array([0.4]))
    np.testing.assert_allclose(np.diagonal(solved.through[0]), np.exp(-0.3 / np.array(layer.STREAMS)), rtol=1e-9)
    np.testing.assert_allclose(solved.back, 0, atol=1e-12)
    assert solved.beam[0] == pytest.approx(np.exp(-0.75))


def test_layers_split_and_add():
    """Invariant: two halves joined are the whole."""
    mu = np.array([0.3, 0.9])
    whole = layer.four_stream(np.array([4.0, 4.0]), np.array([0.99, 0.999]), moments_of(np.full(2, 0.8)), mu)
    half = layer.four_stream(np.array([2.0, 2.0]), np.array([0.99, 0.999]), moments_of(np.full(2, 0.8)), mu)
    ground = np.array([0.3, 0.7])
    np.testing.assert_allclose(layer.add_layers([half, half], ground), layer.add_layers([whole], ground), rtol=1e-9)


def test_resonance_of_beam_and_diffuse_mode_is_smooth():
    """Around the slant where both coincide, the result moves smoothly: no jump beyond that of its neighbours."""
    mu = np.linspace(0.05, 1.0, 4001)
    n = np.ones_like(mu)
    solved = layer.four_stream(3 * n, 0.9 * n, moments_of(0.8 * n), mu)
    light = solved.beam + layer.flux(solved.down)
    assert np.max(np.abs(np.diff(light, 2))) < 1e-5


def column_of(table, wavelengths, cloud, aod, albedo, mu):
    """Feed the optical depths of the table's header to our layers."""
    shares = {"rayleigh": (0.8, 0.1, 0.1), "vapour": (0.42, 0.18, 0.4), "haze": (0.2, 0.1, 0.7)}
    layers = []
    for i in range(3):
        air = table["rayleigh"][wavelengths] * shares["rayleigh"][i]
        haze = table["haze"][wavelengths] * aod * shares["haze"][i]
        drops = cloud if i == 1 else np.zeros_like(cloud)
        depth = air + haze + table["vapour"][wavelengths] * shares["vapour"][i] + drops
        hazy, clouded = haze * table["haze_albedo"][wavelengths], drops * (1 - table["cloud_absorption"][wavelengths])
        scattered = air + hazy + clouded
        moments = [
            (hazy * 0.65**order + clouded * 0.85**order + air * (1.0, 0.0, 0.1, 0.0, 0.0)[order]) / scattered
            for order in range(layer.MOMENTS)
        ]
        layers.append(layer.four_stream(depth, scattered / depth, moments, mu))
    return layer.add_layers(layers, albedo) * np.exp(-table["ozone"][wavelengths] / mu)


def band_over_broadband(zenith_deg, aod, albedo):
    """Return deviations (cloud, wavelength) after our cloud depth is solved for the table's broadband."""
    n = len(AIR["wavelength_nm"])
    chosen = (SKIES["zenith_deg"] == zenith_deg) & (SKIES["aod500"] == aod) & (SKIES["albedo"] == albedo)
    depths = np.unique(SKIES["cloud_depth"])
    theirs = (SKIES["direct"] + SKIES["diffuse"])[chosen].reshape(n, len(depths)).T
    mu = np.array(np.cos(np.radians(zenith_deg)))
    weight = AIR["solar_weight"]

    def ours(cloud):
        return column_of(AIR, np.arange(n)[None, :], np.asarray(cloud)[:, None], aod, albedo, mu)

    solved = depths.copy()
    for _ in range(
        30
    ):  # fixed point on 1/T, which is nearly linear in the depth: the root next to the table's own depth
        got, wanted = ours(solved) @ weight, theirs @ weight
        slope = (ours(solved * 1.001 + 1e-4) @ weight - got) / (solved * 0.001 + 1e-4)
        steep = np.where(np.abs(slope) < 1e-3 * wanted.max(), -np.inf, slope)
        solved = np.clip(solved - (got - wanted) / steep, 0.0, 300.0)
    mine = ours(solved)
    return depths, (mine / (mine @ weight)[:, None]) / (theirs / (theirs @ weight)[:, None]) - 1


@pytest.mark.parametrize("zenith_deg", [0.0, 30.0, 60.0, 70.0, 75.0])
@pytest.mark.parametrize("aod", [0.1, 0.4])
@pytest.mark.parametrize("albedo", [0.2, 0.7])
def test_bands_over_broadband_under_cloud(zenith_deg, aod, albedo):
    """Reference: PythonicDISORT, 32 streams. Band over broadband within 1.5 % for 400-1100 nm, cloud 0.5-50, sun >
    10 deg."""
    depths, off = band_over_broadband(zenith_deg, aod, albedo)
    visible = (AIR["wavelength_nm"] >= 400) & (AIR["wavelength_nm"] <= 1100)
    assert np.max(np.abs(off[depths >= 0.5][:, visible])) <= 0.015


def test_scalar_and_broadcast():
    """A scalar hour equals the same hour among many; a new leading axis changes nothing."""
    many = layer.four_stream(
        np.array([1.0, 5.0]), np.array([0.9, 1.0]), moments_of(np.array([0.5, 0.8])), np.array([0.5, 0.7])
    )
    one = layer.four_stream(np.array(5.0), np.array(1.0), moments_of(np.array(0.8)), np.array(0.7))
    np.testing.assert_allclose(one.back, many.back[1], rtol=1e-12)
    np.testing.assert_allclose(one.down, many.down[1], rtol=1e-12)
