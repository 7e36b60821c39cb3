"""Spectral factors of library absorbers against regressions that others fitted to spectra, all through pvlib."""

import numpy as np
import pytest
from pvlib import spectrum as published
from scipy.optimize import brentq

from yieldsim import spectrum
from yieldsim.config import library
from yieldsim.device.bank import FOLD_TEMPERATURES, Bank
from yieldsim.sky import column, sun

NAMES = ("c-si", "cdte", "cigs", "a-si")
CLEAR_KEYS = {"c-si": "monosi", "cdte": "cdte", "cigs": "cigs"}


@pytest.fixture(scope="module")
def yields():
    return Bank.of([library.entry(name).absorber for name in NAMES]).yields[len(FOLD_TEMPERATURES) // 2]


def at_air_mass(mass):
    return brentq(lambda c: float(sun.relative_air_mass(np.array(c))) - mass, 1e-3, 1.0) if mass > 1.0001 else 1.0


def light(mass, water_cm, cloud=0.0):
    """Band spectra on the horizontal over the sine of the sun's height, one row a cloud."""
    cloud = np.atleast_1d(np.asarray(cloud, dtype=float))
    each = np.ones(len(cloud))
    air = column.Air(
        at_air_mass(mass) * each, 101325.0 * each, water_cm * each, 0.3438 * each, 0.084 * each, 1.14 * each, 0.2 * each
    )
    return column.transmit(air, cloud).total * column.optics().extraterrestrial * column.optics().factor


def factor(bands, yields):
    standard = spectrum.reference_bands() @ yields.T / spectrum.reference_bands().sum()
    return bands @ yields.T / bands.sum(axis=-1)[..., None] / standard


@pytest.mark.parametrize("name", CLEAR_KEYS)
@pytest.mark.parametrize("mass", [1.0, 1.5, 2.0, 3.0])
@pytest.mark.parametrize("water_cm", [0.5, 1.42, 2.5, 4.0])
def test_clear_sky_factor(name, mass, water_cm, yields):
    """References: spectral_factor_firstsolar (Lee & Panchula 2016) and spectral_factor_caballero (2018), each
    relative to its
    own value at air mass 1.5 and 1.42 cm: ours lies in the span of the two widened by 2 %, which is how far they and
    the
    cells they stand for differ. At air mass 4 and 5 the span is left by up to 4 % (dry CIGS and c-Si below, wet CdTe
    above,
    on the horizontal; on a plane facing the sun, nearer to their data, only dry CIGS, by 1 %)."""
    i, key = NAMES.index(name), CLEAR_KEYS[name]
    ours = factor(light(mass, water_cm), yields)[0, i] / factor(light(1.5, 1.42), yields)[0, i]
    one = published.spectral_factor_firstsolar(water_cm, mass, module_type=key)
    one = float(np.squeeze(one / published.spectral_factor_firstsolar(1.42, 1.5, module_type=key)))
    two = published.spectral_factor_caballero(water_cm, mass, 0.084, module_type=key)
    two = float(np.squeeze(two / published.spectral_factor_caballero(1.42, 1.5, 0.084, module_type=key)))
    assert 0.98 * min(one, two) <= ours <= 1.02 * max(one, two)


REGRESSIONS = {
    "c-si": ([("pvspec", "multisi"), ("jrc", "multisi")], 0.02),
    "cdte": ([("pvspec", "fs4-1"), ("pvspec", "fs4-2"), ("jrc", "cdte")], 0.03),
    "cigs": ([("pvspec", "cigs")], 0.03),
    "a-si": ([("pvspec", "asi")], 0.03),
}


@pytest.mark.parametrize("name", REGRESSIONS)
@pytest.mark.parametrize("clearness", [0.2, 0.4, 0.6, 0.8])
def test_cloud_effect(name, clearness, yields):
    """References: spectral_factor_pvspec (Pelland et al. 2020), spectral_factor_jrc (Huld et al. 2009), factor at a
    clear-sky
    index over that at 1, air mass 1.5, water of the standard: inside the span widened by 2 or 3 %. Measured cloudy
    air also
    holds more water, which the regressions include and this comparison leaves out. The two CdTe fits differ by 6 %."""
    models, width = REGRESSIONS[name]
    depths = np.geomspace(0.05, 200.0, 120)
    clear, cloudy = light(1.5, 1.42), light(1.5, 1.42, depths)
    index = cloudy.sum(axis=1) / clear.sum()
    i = NAMES.index(name)
    ours = np.interp(-clearness, -index, factor(cloudy, yields)[:, i]) / factor(clear, yields)[0, i]
    found = []
    for model, key in models:
        call = getattr(published, f"spectral_factor_{model}")
        found.append(float(call(1.5, clearness, module_type=key) / call(1.5, 1.0, module_type=key)))
    assert (1 - width) * min(found) <= ours <= (1 + width) * max(found)
