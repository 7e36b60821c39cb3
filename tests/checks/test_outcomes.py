"""Every check behind ``yieldsim verify`` lies within its limit here too, and would not if the physics were wrong."""

import numpy as np
import pytest

from yieldsim import api
from yieldsim.checks import clear_sky, cloud
from yieldsim.checks.record import Outcome, spectral_factor, step_yields
from yieldsim.sky import column
from yieldsim.spectrum import reference_bands


@pytest.fixture(scope="module")
def outcomes():
    return list(api.verify())


def test_every_outcome_is_within_its_limit(outcomes):
    beyond = [f"{each.name}: {each.deviation:.3g}, limit {each.limit}" for each in outcomes if not each.passed]
    assert not beyond


def test_every_outcome_says_what_it_is_held_against(outcomes):
    assert len(outcomes) > 60
    assert all(each.source and each.name and np.isfinite(each.value) for each in outcomes)
    assert len({(each.group, each.name) for each in outcomes}) == len(outcomes)


def test_a_limit_is_a_limit():
    def off(deviation, limit):
        return Outcome("g", "n", "s", 1.0, deviation, limit).passed

    assert off(1.0, 1.0)
    assert not off(1.01, 1.0)
    assert off(5.0, None)
    assert not off(float("nan"), None)


@pytest.mark.parametrize(("field", "factor"), [("water", 2.0), ("rayleigh", 1.3), ("mixed_gas", 6.0), ("ozone", 3.0)])
def test_wrong_air_is_found(field, factor, monkeypatch):
    """Each constituent bent by much: the comparison with 6S goes beyond a limit."""
    bent = column.optics().replace(**{field: getattr(column.optics(), field) * factor})
    monkeypatch.setattr(column, "optics", lambda: bent)
    assert any(not each.passed for each in clear_sky.six_s_outcomes())


def test_wrong_cloud_is_found(monkeypatch):
    """Drops that scatter too evenly: bands under cloud leave their limit."""
    cloud.band_over_broadband.cache_clear()
    monkeypatch.setattr(column, "CLOUD_ASYMMETRY", 0.3)
    depths, off = cloud.band_over_broadband(60.0, 0.1, 0.7)
    cloud.band_over_broadband.cache_clear()
    assert np.max(np.abs(off[depths >= 0.5])) > 0.015


def test_spectral_factor_of_the_reference_is_one():
    """Closed form."""
    np.testing.assert_allclose(spectral_factor(reference_bands(), step_yields((0.8, 1.5))), 1.0, rtol=1e-12)


def test_share_outside_a_span():
    """Closed form: 0 inside, else percent of the value."""
    assert cloud.outside(1.0, (0.9, 1.1)) == 0.0
    assert cloud.outside(2.0, (0.9, 1.0)) == pytest.approx(100.0)
    assert cloud.outside(0.5, (1.0, 1.1)) == pytest.approx(100.0)
