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


def test_scalar_and_broadcast():
    """A scalar hour equals the same hour among many; a new leading axis changes nothing."""
    many = layer.four_stream(
        np.array([1.0, 5.0]), np.array([0.9, 1.0]), moments_of(np.array([0.5, 0.8])), np.array([0.5, 0.7])
    )
    one = layer.four_stream(np.array(5.0), np.array(1.0), moments_of(np.array(0.8)), np.array(0.7))
    np.testing.assert_allclose(one.back, many.back[1], rtol=1e-12)
    np.testing.assert_allclose(one.down, many.down[1], rtol=1e-12)
