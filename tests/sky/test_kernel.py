"""The compiled column is held to the plain numpy form of the same equations."""

import hashlib
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from yieldsim.sky import column, kernel, kernel_layer


def any_air(n, seed, per_band=False):
    """Air from one end to the other: sun at the horizon to overhead, clean and thick, dry and wet, low and high."""
    rng = np.random.default_rng(seed)
    return column.Air(
        cos_zenith=np.cos(np.radians(rng.uniform(0.0, 89.9, n))),
        pressure=rng.uniform(57_000.0, 104_000.0, n),
        water_cm=rng.uniform(0.05, 7.0, n),
        ozone_atm_cm=rng.uniform(0.2, 0.5, n),
        aod500=rng.choice([0.0, 0.01, 0.1, 0.5, 3.0], n),
        angstrom_exponent=rng.uniform(-0.3, 2.5, n),
        albedo=rng.uniform(0.0, 0.95, (n, 122) if per_band else n),
    )


@pytest.mark.parametrize("per_band", [False, True])
@pytest.mark.parametrize("seed", [1, 2])
def test_equals_the_plain_form(seed, per_band):
    """1e-9 of the light above the air: a billionth of the sun; rounding of ill-posed slants is below it."""
    air = any_air(200, seed, per_band)
    cloud = np.random.default_rng(seed).choice([0.0, 0.01, 1.0, 20.0, 300.0], 200)
    compiled, plain = column.transmit(air, cloud), column.transmit_plain(air, cloud)
    for name in ("beam", "total"):
        ours, theirs = getattr(compiled, name), getattr(plain, name)
        assert np.all(np.isfinite(ours))
        assert np.max(np.abs(ours - theirs)) < 1e-9


def test_hours_do_not_know_of_each_other():
    """Bit for bit the same alone, in any block and in any order."""
    air, cloud = any_air(50, 3), np.linspace(0, 30, 50)
    whole = column.transmit(air, cloud)
    for chosen in (slice(7, 8), slice(0, 49), slice(None, None, -1)):
        part = column.transmit(air.only(chosen), cloud[chosen])
        np.testing.assert_array_equal(part.total, whole.total[chosen])
        np.testing.assert_array_equal(part.beam, whole.beam[chosen])


def test_hash_of_the_layers():
    """numba would go on using compiled hours after a change of the layers: put the new hash into kernel.py."""
    source = Path(kernel_layer.__file__).read_bytes()
    assert hashlib.sha256(source).hexdigest() == kernel.LAYER_SHA256


def test_exponential():
    """numpy's own, which is good to half a unit in the last place: 1e-13 from -200 to 700, next to nothing below."""
    for x in (-np.geomspace(1e-300, 200.0, 3000), np.geomspace(1e-300, 700.0, 3000)):
        ours = np.array([kernel_layer.exp(value) for value in x])
        np.testing.assert_allclose(ours, np.exp(x), rtol=1e-13)
    assert 0 < kernel_layer.exp(-1e9) < 1e-80


@pytest.mark.parametrize("water_cm", [0.0, 1e-4, 0.003, 7.0, 300.0])
@pytest.mark.parametrize("pressure", [300.0, 30_000.0, 105_000.0])
def test_paths_beyond_the_tables(water_cm, pressure):
    """Air without vapour, or longer than the tables of the curves of growth, is computed directly."""
    air, n = any_air(40, 5), 40
    air = replace(air, water_cm=np.full(n, water_cm), pressure=np.full(n, pressure))
    compiled, plain = column.transmit(air, np.zeros(n)), column.transmit_plain(air, np.zeros(n))
    assert np.max(np.abs(compiled.total - plain.total)) < 1e-9
    assert np.max(np.abs(compiled.beam - plain.beam)) < 1e-9


def some_bands():
    """Bands from blue to infrared, one next to dark in vapour; not a multiple of those done at once."""
    bare, chosen = column.bare_optics(), [3, 17, 40, 41, 90, 121]
    return bare.replace(**{name: getattr(bare, name)[chosen] for name in column.Optics.__slots__})


@pytest.mark.parametrize("per_band", [False, True])
def test_some_bands_equal_the_plain_form(per_band):
    """As `test_equals_the_plain_form`, on so few bands that it can be run without compiling; one hour is without
    vapour, one has the exponent of the hour before."""
    air, optics, n = any_air(24, 9), some_bands(), 24
    water, exponent = air.water_cm.copy(), air.angstrom_exponent.copy()
    water[0], exponent[2] = 0.0, exponent[1]
    albedo = np.random.default_rng(9).uniform(0.0, 0.95, (n, 6) if per_band else n)
    air = replace(air, water_cm=water, angstrom_exponent=exponent, albedo=albedo)
    cloud = np.resize([0.0, 0.0, 0.01, 1.0, 20.0, 300.0], n)
    compiled, plain = column.transmit(air, cloud, optics), column.transmit_plain(air, cloud, optics)
    assert np.max(np.abs(compiled.total - plain.total)) < 1e-9
    assert np.max(np.abs(compiled.beam - plain.beam)) < 1e-9


def test_few_bands_are_those_of_many():
    """A choice of bands gives what all bands give there: no band knows of another."""
    air, cloud, chosen = any_air(30, 6), np.linspace(0, 30, 30), np.array([3, 17, 40, 41, 90, 121])
    some = column.optics().replace(**{name: getattr(column.optics(), name)[chosen] for name in column.Optics.__slots__})
    whole, part = column.transmit(air, cloud), column.transmit(air, cloud, some)
    np.testing.assert_allclose(part.total, whole.total[:, chosen], rtol=1e-12)
    np.testing.assert_allclose(part.beam, whole.beam[:, chosen], rtol=1e-12)
