"""What the searches for power points are made of, against calculus: in numpy and compiled alike.

A search that steps badly still ends at the right place, only later or by halving, so its ends say little about it.
"""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.special import lambertw

from yieldsim.device import diode, kernel, points, series
from yieldsim.device.diode import Diode

THERMAL = 0.0257
#: Photocurrent, saturation current, thermal voltage; resistance, shunt, recombination and built-in voltage.
KINDS = {
    "plain": (300.0, 1e-11, THERMAL, 0.0, 0.0, 0.0, math.inf),
    "resistances": (250.0, 3e-9, 1.4 * THERMAL, 2e-4, 5.0, 0.0, math.inf),
    "leaky": (2.0, 1e-7, 1.2 * THERMAL, 1e-4, 40.0, 0.0, math.inf),
    "i-layer": (120.0, 1e-13, 1.7 * THERMAL, 1e-4, 0.5, 0.03, 1.1),
}


def plainly(function):
    """Return a compiled function as Python runs it, its module's constants looked up at every call."""
    return getattr(function, "py_func", function)


def numbers(kind):
    jl, j0, a, *rest = KINDS[kind]
    return jl, j0, a, np.array(rest)


def derivatives(form, kind, vj):
    if form == "numpy":
        return diode.derivatives(Diode(*KINDS[kind]), vj)
    return kernel._derivatives(*numbers(kind), vj)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("form", ["numpy", "compiled"])
def test_slope_and_bend_are_derivatives_of_the_current(form, kind):
    """Central differences over 1e-4 V: their error is (h/a)^2/6 and (h/a)^2/12, below 3e-6."""
    h = 1e-4
    for vj in (-0.05, 0.1, 0.4, 0.6):
        low, middle, high = (derivatives(form, kind, vj + step)[0] for step in (-h, 0.0, h))
        _, slope, bend = derivatives(form, kind, vj)
        rounding = 1e-15 * KINDS[kind][0]
        assert slope == pytest.approx((low - high) / (2 * h), rel=5e-6, abs=rounding / h)
        assert bend == pytest.approx((2 * middle - low - high) / h**2, rel=5e-6, abs=10 * rounding / h**2)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("form", ["numpy", "compiled"])
def test_upper_bound_is_where_the_greatest_single_loss_takes_all(form, kind):
    """Each loss alone in closed form: the logarithm, Ohm's law, and the pole of the i-layer less its loss."""
    jl, j0, a, _, shunt, chi, built_in = KINDS[kind]
    alone = [a * math.log(1 + jl / j0), jl / shunt if shunt else math.inf, built_in - chi]
    bound = diode._upper_bound(Diode(*KINDS[kind])) if form == "numpy" else kernel._upper_bound(*numbers(kind))
    assert bound == pytest.approx(min(alone), rel=1e-12)
    assert derivatives(form, kind, bound)[0] <= 1e-12 * jl


def exact_start(ratio):
    """(1 + u) exp(u) = 1 + JL/J0, by the library's Lambert W."""
    return lambertw(math.e * (1 + ratio)).real - 1


@pytest.mark.parametrize("ratio", [0.1, 3.0, 1e3, 1e8, 1e14, 1e25])
def test_first_voltage_is_lamberts(ratio):
    """1e-6, what `power_point_start` promises; in all three forms."""
    jl, a = 200.0, 1.3 * THERMAL
    s = np.zeros(points._N_ROW * points._CHUNK)
    s[points._JL], s[points._J0], s[points._A] = jl, jl / ratio, a
    points._begin(s, 1, np.array([0.0, 0.0, 0.0, math.inf]))
    exact = a * exact_start(ratio)
    assert diode.power_point_start(jl, jl / ratio, a) == pytest.approx(exact, rel=1e-6)
    assert kernel._start(jl, jl / ratio, a) == pytest.approx(exact, rel=1e-6)
    assert s[points._VJ] == pytest.approx(exact, rel=1e-6)
    assert s[points._HIGH] == pytest.approx(a * math.log1p(ratio), rel=1e-8)
    assert s[points._LOW] == 0.0
    assert s[points._INVERSE_A] == pytest.approx(1 / a)


@pytest.mark.parametrize("kind", KINDS)
def test_first_bracket_of_single_junctions(kind):
    """The bound of `diode`; a start too near to it or beyond is replaced by its half."""
    jl, j0, a, constants = numbers(kind)
    s = np.zeros(points._N_ROW * points._CHUNK)
    s[points._JL], s[points._J0], s[points._A] = jl, j0, a
    points._begin(s, 1, constants)
    bound = float(diode._upper_bound(Diode(*KINDS[kind])))
    start = diode.power_point_start(jl, j0, a)
    assert s[points._HIGH] == pytest.approx(bound, rel=1e-8)
    assert s[points._VJ] == pytest.approx(start if start < 0.99 * bound else bound / 2, rel=1e-6)


@pytest.mark.parametrize(("kind", "steps"), [("plain", 1), ("resistances", 2), ("leaky", 2), ("i-layer", 5)])
def test_steps_to_the_power_point_are_few(kind, steps, monkeypatch):
    """Newton's on the logarithm double the digits: 1e-9 after two, after five where it starts from half the bound."""
    jl, j0, a, constants = numbers(kind)
    start = diode.power_point_start(jl, j0, a)
    exact = float(diode.rewarded_point(Diode(*KINDS[kind]), start, 0.0, 0.0, 1.0))
    s = np.zeros(points._N_ROW * points._CHUNK)
    s[points._JL], s[points._J0], s[points._A], s[points._ACTIVE] = jl, j0, a, 1.0
    points._begin(s, 1, constants)
    taken = next(k for k in range(1, 20) if points._step(s, 1, constants) == 0)
    assert taken <= steps + 1  # the last shows that nothing moves any more
    assert s[points._VJ] == pytest.approx(exact, rel=1e-9)
    monkeypatch.setattr(kernel, "_NEWTON_STEPS", steps)
    monkeypatch.setattr(diode, "NEWTON_STEPS", steps)
    assert plainly(kernel._point)(jl, j0, a, constants, start, 0.0, 0.0, 1.0) == pytest.approx(exact, rel=1e-9)
    assert diode.rewarded_point(Diode(*KINDS[kind]), start, 0.0, 0.0, 1.0) == pytest.approx(exact, rel=1e-9)


@pytest.mark.parametrize("kind", KINDS)
def test_a_rewarded_point_earns_most(kind):
    """Definition: power and what the emitted light earns below together fall to either side of it."""
    jl, j0, a, constants = numbers(kind)
    start, reward, emission, kt = diode.power_point_start(jl, j0, a), 0.9, 0.2 * j0, 1.1 * a
    compiled = kernel._point(jl, j0, a, constants, start, reward, emission, kt)
    for vj in (compiled, float(diode.rewarded_point(Diode(*KINDS[kind]), start, reward, emission, kt))):

        def earned(at):
            current = derivatives("numpy", kind, at)[0]
            return current * (at - current * constants[0]) + reward * emission * math.expm1(at / kt)

        assert earned(vj) > earned(vj - 1e-5)
        assert earned(vj) > earned(vj + 1e-5)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("form", ["numpy", "compiled"])
@pytest.mark.parametrize("guess", [None, 0.3, 5.0])
def test_voltage_at_carries_the_current(form, kind, guess):
    """The inverse of the curve: forward to near open circuit, and driven backwards where a shunt lets it."""
    jl, j0, a, constants = numbers(kind)
    for current in (0.0, 0.5 * jl, 0.97 * jl, 0.999 * jl, *((1.01 * jl, 2.0 * jl) if constants[1] > 0 else ())):
        if form == "numpy":
            vj = float(diode.voltage_at(Diode(*KINDS[kind]), current, guess))
        else:
            vj = kernel._voltage_at(jl, j0, a, constants, current, math.nan if guess is None else guess)
        assert derivatives(form, kind, vj)[0] == pytest.approx(current, abs=1e-9 * jl)


def test_a_current_that_cannot_be_carried_has_no_voltage():
    jl, j0, a, constants = numbers("plain")
    for current in (jl + j0, 2 * jl):
        assert kernel._voltage_at(jl, j0, a, constants, current, math.nan) == diode.NO_VOLTAGE
        assert diode.voltage_at(Diode(*KINDS["plain"]), current) == diode.NO_VOLTAGE
    assert kernel._voltage_at(jl, j0, a, constants, jl + 0.5 * j0, math.nan) > -30 * a


def three(coupled):
    """Three junctions from the top down, their emission and kT/q."""
    rows = [
        (210.0, 1e-13, THERMAL, 1e-4, 2.0),
        (205.0, 1e-10, 1.2 * THERMAL, 0.0, 1.0),
        (220.0, 1e-7, THERMAL, 2e-4, 3.0),
    ]
    emission = [1e-14, 3e-11, 0.0] if coupled else [0.0, 0.0, 0.0]
    return [Diode(*row) for row in rows], emission


def state(form, current, coupled):
    """Return voltages, less first and second derivative by the current, and slopes, each (3,)."""
    diodes, emission = three(coupled)
    if form == "numpy":
        links = [series.Link(each, light, THERMAL) for each, light in zip(diodes, emission, strict=True)]
        found = series.state_at(links, np.array([current]))
        return np.array([found.voltage[:, 0], found.fall[:, 0], found.bend[:, 0], found.slope[:, 0]])
    rows = np.full((4, 3), np.nan)
    kernel._state(*arrays(diodes), np.array(emission), THERMAL, current, rows)
    return rows


def arrays(diodes):
    columns = ("photocurrent", "saturation_current", "thermal_voltage")
    each = [np.array([getattr(one, name) for one in diodes]) for name in columns]
    rest = [[one.series_resistance, one.shunt_conductance, 0.0, math.inf] for one in diodes]
    return *each, np.array(rest)


@pytest.mark.parametrize("coupled", [False, True])
@pytest.mark.parametrize("form", ["numpy", "compiled"])
@pytest.mark.parametrize("current", [120.0, 195.0])
def test_fall_and_bend_are_derivatives_of_the_voltages(form, current, coupled):
    """Central differences over 0.05 A/m2; voltages settle to 1e-15 V there, which the second divides by 0.0025."""
    h = 0.05
    low, middle, high = (state(form, current + step, coupled) for step in (-h, 0.0, h))
    np.testing.assert_allclose(middle[1], (low[0] - high[0]) / (2 * h), rtol=2e-4)
    np.testing.assert_allclose(middle[2], (2 * middle[0] - low[0] - high[0]) / h**2, rtol=2e-3)
    if not coupled:
        np.testing.assert_allclose(middle[1], 1 / middle[3], rtol=1e-12)


@pytest.mark.parametrize("move", [-0.04, -1e-3, 1e-6, 0.02])
def test_a_step_follows_the_limiting_junction_s_own_curve(move):
    """Diode and shunt in closed form: the current changes by what the curve says of the voltage moved, however far."""
    diodes, _ = three(False)
    links = [series.Link(each, np.zeros(1), THERMAL) for each in diodes]
    now = np.array([190.0])
    found = series.state_at(links, now)
    i = int(np.argmax(found.fall[:, 0]))
    wanted = diode.derivatives(diodes[i], found.voltage[i, 0] + move)[0] - now[0]
    _, j0, a, _ = arrays(diodes)
    change, moved = kernel._newton_step(state("compiled", now[0], False), j0, a, move / found.fall[i, 0])
    trial, also = series._newton_step(links, found, now, np.array([move / found.fall[i, 0]]))
    assert moved == pytest.approx(move, rel=1e-9, abs=0)
    assert also[0] == pytest.approx(move, rel=1e-9, abs=0)
    assert change == pytest.approx(wanted, rel=1e-7)
    assert trial[0] - now[0] == pytest.approx(wanted, rel=1e-7)


def hourly(diodes, emission):
    """Return them as links of one hour."""
    return [
        series.Link(replace(one, photocurrent=np.array([one.photocurrent])), np.array([light]), THERMAL)
        for one, light in zip(diodes, emission, strict=True)
    ]


@pytest.mark.parametrize("coupled", [False, True])
def test_steps_to_the_power_point_of_a_stack_are_few(coupled, monkeypatch):
    """1e-10 of the power after two."""
    diodes, emission = three(coupled)
    jl, j0, a, constants = arrays(diodes)
    exact = series.maximum_power(hourly(diodes, emission))[0][0]
    monkeypatch.setattr(kernel, "_SERIES_STEPS", 2)
    monkeypatch.setattr(series, "NEWTON_STEPS", 2)
    room = np.empty((4, 3))
    found = plainly(kernel._series)(jl, j0, a, constants, np.array(emission), THERMAL, jl.sum(), room)
    assert found == pytest.approx(exact, rel=1e-10)
    assert series.maximum_power(hourly(diodes, emission))[0][0] == pytest.approx(exact, rel=1e-10)


@pytest.mark.parametrize("light", [(210.0, 205.0, 220.0), (40.0, 205.0, 220.0), (0.0, 205.0, 220.0)])
def test_first_current_of_a_stack(light):
    """The numpy form's, within 8 % of the one at the power point where all junctions are lit; no voltage is guessed."""
    diodes = [replace(one, photocurrent=each) for one, each in zip(three(False)[0], light, strict=True)]
    jl, j0, a, constants = arrays(diodes)
    room = np.zeros((4, 3))
    found = kernel._first_current(jl, j0, a, constants, sum(light), room)
    links = hourly(diodes, [0.0, 0.0, 0.0])
    assert found == pytest.approx(
        series._start([series._lit(link, np.array([sum(light)])) for link in links])[0], rel=1e-9, abs=0
    )
    assert np.isnan(room[0]).all()
    if min(light) > 0:
        assert found == pytest.approx(series.maximum_power(links)[1][0], rel=0.08)
