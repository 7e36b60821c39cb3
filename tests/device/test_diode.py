"""The curve of one junction: power point, ends, shape; against pvlib and by properties."""

from dataclasses import astuple

import numpy as np
import pytest
from hypothesis import given, settings
from pvlib.pvsystem import singlediode
from pvlib.singlediode import bishop88_mpp

from tests.strategies import diodes
from yieldsim.constants import THERMAL_EV_PER_K
from yieldsim.device import points
from yieldsim.device.diode import Diode, curve, maximum_power, open_circuit, power_point_start, short_circuit
from yieldsim.device.junction import LEAST_RECOMBINATION_V

THERMAL = THERMAL_EV_PER_K * 298.15


def stacked(seed, n=3000):
    """Return random diodes of 0.01-1500 W/m2, -40 to 100 degC, resistances from none to poor, as arrays."""
    rng = np.random.default_rng(seed)
    temperature, gap, ideality = rng.uniform(233, 373, n), rng.uniform(0.66, 2.3, n), rng.uniform(1, 2, n)
    thermal = THERMAL_EV_PER_K * temperature
    saturation = 5e6 * np.exp(-gap / thermal) * 10 ** rng.uniform(0, 5, n)
    return Diode(
        photocurrent=10 ** rng.uniform(-2, 3.18, n) * rng.uniform(0.1, 0.6, n),
        saturation_current=400 * (saturation / 400) ** (1 / ideality),
        thermal_voltage=ideality * thermal,
        series_resistance=np.where(rng.random(n) < 0.2, 0.0, 10 ** rng.uniform(-6, -3, n)),
        shunt_conductance=np.where(rng.random(n) < 0.2, 0.0, 10 ** rng.uniform(-2, 2, n)),
    )


def test_against_pvlib_singlediode():
    several = stacked(1, 2000)
    shunt = 1 / np.maximum(several.shunt_conductance, 1e-9)
    reference = singlediode(
        several.photocurrent,
        several.saturation_current,
        several.series_resistance,
        shunt,
        several.thermal_voltage,
        method="newton",
    )
    # the limit; pvlib solves by Newton's method to about 1e-7 in voltage
    assert np.abs(maximum_power(several)[0] / reference["p_mp"] - 1).max() < 1e-6
    assert np.abs(open_circuit(several) - reference["v_oc"]).max() < 1e-6
    assert np.abs(short_circuit(several) / reference["i_sc"] - 1).max() < 1e-6


def test_i_layer_recombination_against_pvlib():
    plain = stacked(2, 300)
    keep = plain.thermal_voltage * np.log1p(plain.photocurrent / plain.saturation_current) < 0.9
    diode = Diode(*(value[keep] for value in astuple(plain)[:5]), 0.06, 1.15)
    shunt = 1 / np.maximum(diode.shunt_conductance, 1e-9)
    _, _, power = bishop88_mpp(
        diode.photocurrent,
        diode.saturation_current,
        diode.series_resistance,
        shunt,
        diode.thermal_voltage,
        d2mutau=0.06,
        NsVbi=1.15,
        method="newton",
    )
    assert np.abs(maximum_power(diode)[0] / power - 1).max() < 1e-6  # as above


def test_power_point_against_a_fine_search():
    several = stacked(3, 60)
    power = maximum_power(several)[0]
    share = np.linspace(0, 1, 20001)[:, None]
    current, voltage = curve(several, share * open_circuit(several))
    best = (current * voltage).max(axis=0)
    # a search with steps of 5e-5 of Voc misses the top by less than (n kT/q)^-2 times that squared, 2e-5
    assert np.all(power >= best * (1 - 1e-12))
    assert np.all(power <= best * (1 + 2e-5))


@pytest.mark.parametrize("recombination", [LEAST_RECOMBINATION_V, 1e-5, 1e-4, 1e-3, 1e-2])
def test_power_point_of_an_i_layer_that_cuts_the_curve_off(recombination):
    """Voltages the diode alone would reach are 0.2 to 3.5 V, the field ends at 0.3 to 1 V: far below many of them."""
    rng = np.random.default_rng(5)
    n = 200
    light, thermal = 10 ** rng.uniform(-3, 3, n), rng.uniform(0.02, 0.09, n)
    saturation = light / np.expm1(rng.uniform(0.2, 3.5, n) / thermal)
    resistance, shunt = rng.choice([0, 1e-5, 1e-4], n), rng.choice([0, 1e-6, 0.01], n)
    each = light, saturation, thermal, resistance, shunt, recombination, rng.uniform(0.3, 1.0, n)
    diode = Diode(*each)
    end = open_circuit(diode)
    below = np.concatenate([np.linspace(0, 1, 20001), 1 - np.geomspace(1e-12, 1, 20001)])[:, None] * end
    current, voltage = curve(diode, below)
    power = maximum_power(diode)[0]
    best = (current * voltage).max(axis=0)
    assert np.all(power >= best * (1 - 1e-7))  # the room left below the built-in voltage, 1e-6 V, is held to rounding
    assert np.all(power <= best * (1 + 2e-5))  # what the search may miss, as above
    for i in range(n):
        constants = np.array([resistance[i], shunt[i], recombination, each[6][i]])
        one = points.single_power(light[i : i + 1], saturation[i : i + 1], thermal[i : i + 1], constants)
        assert one[0] == pytest.approx(power[i], rel=1e-7)


def test_settled_far_below_the_limit(monkeypatch):
    several = stacked(4, 20000)
    quick = maximum_power(several)[0]
    monkeypatch.setattr("yieldsim.device.diode.NEWTON_STEPS", 80)
    monkeypatch.setattr("yieldsim.device.diode.SETTLED", 0.0)
    assert np.abs(quick / maximum_power(several)[0] - 1).max() < 1e-10  # the promise of the module


def test_start_is_exact_without_resistances():
    ratio = 10.0 ** np.arange(-3, 60, 0.7)
    u = power_point_start(ratio, 1.0, 1.0)
    assert np.abs((u + np.log1p(u)) / np.log1p(ratio) - 1).max() < 1e-6  # the promise of its docstring


def test_open_circuit_of_a_plain_diode_is_the_logarithm():
    diode = Diode(350.0, 1e-15, THERMAL)
    assert open_circuit(diode) == pytest.approx(THERMAL * np.log1p(350.0 / 1e-15), rel=1e-12)  # rounding
    assert short_circuit(diode) == 350.0


def test_dark_is_zero_and_nan_stays_nan():
    diode = Diode(np.array([0.0, np.nan, 300.0, 300.0]), np.array([1e-12, 1e-12, np.nan, 1e-12]), THERMAL, 1e-4, 0.1)
    for values in (*maximum_power(diode), open_circuit(diode), short_circuit(diode)):
        assert values[0] == 0.0
        assert np.isnan(values[1:3]).all()
        assert values[3] > 0


@given(diodes())
@settings(max_examples=80, deadline=None)
def test_curves_fall_and_the_power_point_is_on_them(diode):
    power, at_current, at_voltage = maximum_power(diode)
    opened, short = open_circuit(diode), short_circuit(diode)
    current, voltage = curve(diode, np.linspace(0, opened, 400))
    assert np.all(np.diff(current) <= 0)
    assert np.all(np.diff(voltage) >= 0)
    assert np.diff(current)[-1] < 0
    assert 0 < at_voltage < opened
    assert 0 < at_current <= short * (1 + 1e-12)  # rounding
    assert power >= (current * voltage).max() * (1 - 1e-10)
    assert power == pytest.approx(at_current * at_voltage, rel=1e-12)


@given(diodes())
@settings(max_examples=50, deadline=None)
def test_one_is_the_same_as_one_of_many(diode):
    alone = maximum_power(diode)[0]
    values = [np.array([value, value]) for value in astuple(diode)]
    values[0] = np.array([diode.photocurrent, diode.photocurrent * 1.7])
    assert isinstance(alone, float)
    # neighbours may cost one Newton step more, at 1e-14 from the end
    assert maximum_power(Diode(*values))[0][0] == pytest.approx(alone, rel=1e-12)


@pytest.mark.parametrize(
    ("change", "sign"),
    [
        ({"photocurrent": 310.0}, 1),
        ({"saturation_current": 2e-12}, -1),
        ({"series_resistance": 2e-4}, -1),
        ({"shunt_conductance": 2.0}, -1),
        ({"recombination_voltage": 0.05, "built_in_voltage": 1.2}, -1),
    ],
)
def test_directions(change, sign):
    base = {"photocurrent": 300.0, "saturation_current": 1e-12, "thermal_voltage": THERMAL}
    base |= {"series_resistance": 1e-4, "shunt_conductance": 1.0}
    assert sign * (maximum_power(Diode(**(base | change)))[0] - maximum_power(Diode(**base))[0]) > 0.1


def test_parameters_broadcast():
    power = maximum_power(Diode(np.array([100.0, 200.0]), np.array([[1e-12], [1e-10], [1e-8]]), THERMAL, 1e-4))[0]
    assert power.shape == (3, 2)
    assert power[1, 1] == pytest.approx(maximum_power(Diode(200.0, 1e-10, THERMAL, 1e-4))[0], rel=1e-12)
