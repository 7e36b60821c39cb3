"""The shortcut against running the year again, hour by hour, with every input moved at once."""

from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

from yieldsim.checks.record import spectral_factor, step_yields
from yieldsim.config import library
from yieldsim.constants import STANDARD_CELL_TEMPERATURE
from yieldsim.device.bank import Bank
from yieldsim.device.junction import moved_to_gap
from yieldsim.device.response import scaled
from yieldsim.device.stack import Absorber
from yieldsim.spectrum import band_wavelengths, reference_bands
from yieldsim.study import chance, chance_device, chance_inputs, chance_light, chance_shortcut, hourly, light
from yieldsim.study.chance_inputs import BY_NAME, OF_JUNCTION, OF_LIGHT, SHAPES, error_shapes, is_ideal
from yieldsim.study.chance_light import Found
from yieldsim.study.chance_shortcut import absorber_owner, junction_owner
from yieldsim.study.chance_year import YearOfChance, spreads_of
from yieldsim.study.plan import ChancePlan, GroundPlan, LossesPlan
from yieldsim.weather import cut

WITHIN = 1e-3  # of a year's energy: what the shortcut may differ from the full rerun


def sample():
    """Return junctions of every kind of curve, a series tandem, one that takes rear light, another glass, a limit."""
    entry = {name: library.entry(name).absorber for name in library.names()}
    silicon, top = entry["c-si"], entry["perovskite-1.68"]
    upper = replace(top.junctions[0], transmits=0.02)
    return (
        silicon,
        entry["cdte"],
        entry["a-si"],
        entry["perovskite-1.68"],
        Absorber("tandem", (upper, *silicon.junctions), coupling=0.3),
        replace(silicon, name="both sides", bifaciality=0.75, incidence_modifier=0.14),
        Absorber("limit", (replace(top.junctions[0], external_radiative_efficiency=1.0, series_resistance_ohm_cm2=0.0,
                                   shunt_resistance_ohm_cm2=float("inf")),)),
    )  # fmt: skip


class Rerun:
    """A station's year, run again in full for a draw."""

    def __init__(self, year, absorbers=None):
        self.sky, self.mounting, self.site = year.sky, year.plane.mounting, year.plan
        self.absorbers = absorbers or sample()
        self.spreads = spreads_of(ChancePlan(), "here", self.absorbers)
        self.drawn = chance_shortcut.dimensions("here", self.absorbers)
        self.found = Found.of(self.site, self.sky)
        moves = {name: self.spreads.site[name] for name in OF_LIGHT}
        lights = chance_light.gather(self.site, self.sky, self.absorbers, [LossesPlan()], moves)
        self.shortcut = chance_shortcut.Shortcut.of(lights[0], self.absorbers, self.spreads, self.drawn)

    def told(self, numbers, shortcut=None):
        """Return what the shortcut says of one draw: energy and standard power of every absorber."""
        energy, rating = (shortcut or self.shortcut).energies(numbers[None])
        return energy[0], rating[0]

    def absorber(self, a, at):
        """Return an absorber with every property moved, and the drift of its power."""
        spread, absorber = self.spreads.absorbers[a], self.absorbers[a]
        junctions = []
        for i, junction in enumerate(absorber.junctions):
            if is_ideal(junction):
                junctions.append(junction)
                continue
            by = {
                name: BY_NAME[name].value(spread[name] * at(name, junction_owner(absorber, i))) for name in OF_JUNCTION
            }
            junction = moved_to_gap(junction, junction.gap_ev + float(by["edge_ev"]))
            better = junction.external_radiative_efficiency * float(by["external_radiative_efficiency"])
            junctions.append(
                replace(
                    junction,
                    response=scaled(junction.response, float(by["response"])),
                    absorptance=junction.absorptance,
                    external_radiative_efficiency=min(better, 1.0),
                    series_resistance_ohm_cm2=junction.series_resistance_ohm_cm2 * float(by["resistances"]),
                    shunt_resistance_ohm_cm2=junction.shunt_resistance_ohm_cm2 / float(by["resistances"]),
                )
            )
        shed = float(BY_NAME["heat_loss"].value(self.spreads.site["heat_loss"] * at("heat_loss", "all")))
        drift = spread["temperature_coefficient"] * at("temperature_coefficient", absorber_owner(absorber))
        cooled = tuple(shed * number for number in absorber.heat_loss)
        return replace(absorber, junctions=tuple(junctions), heat_loss=cooled), drift

    def energies(self, numbers):
        """Return energy and standard power of every absorber, every hour computed."""
        values = dict(zip(self.drawn, numbers, strict=True))

        def at(name, owner, number=0):
            return float(values.get((name, owner, number), 0.0))

        away = {name: self.spreads.site[name] * at(name, "site here") for name in OF_LIGHT}
        sky = chance_light.moved(self.sky, self.found, away)
        made, drifts = zip(*(self.absorber(a, at) for a in range(len(self.absorbers))), strict=True)
        parts, rear = light.plane_parts(sky, self.mounting), light.rear_parts(sky, self.mounting, made)
        faces = hourly.FacesOfYear(sky, parts, rear, None)
        temperature = faces.temperatures(self.mounting, made)
        clear, cloud = (
            self.spreads.site[name] * sum(at(name, "all", k) * error_shapes()[k] for k in range(SHAPES))
            for name in ("model_clear", "model_cloud")
        )
        error = np.exp(clear + (1 - sky.sky.open_share)[:, None] * cloud)
        energy, rating = np.empty((2, len(made)))
        for a, absorber in enumerate(made):
            front, behind = faces.entered(absorber.incidence_modifier)
            bank = Bank.of([absorber])
            currents = bank.currents(coloured(front, error), temperature[a], coloured(behind, error))
            power = bank.terminal_power(currents, temperature[a])[0]
            energy[a] = np.sum(power * (1 + drifts[a] * (temperature[a] - STANDARD_CELL_TEMPERATURE)))
            rating[a] = bank.standard().terminal_power[0]
        return energy, rating


def coloured(bands, error):
    """Return spectra of another colour and the same sum."""
    wrong = bands * error
    return wrong * (bands.sum(axis=1) / np.maximum(wrong.sum(axis=1), 1e-300))[:, None]


@pytest.fixture(scope="module")
def reruns(greensboro, sand_point):
    return {"greensboro": Rerun(greensboro), "sand_point": Rerun(sand_point)}


@pytest.fixture(scope="module")
def days(greensboro, greensboro_weather):
    """Five days of February, clear and cloudy; a tandem and one that takes rear light through another glass."""
    sky = hourly.site_sky(greensboro.plan, cut(greensboro_weather, 24 * 53, 24 * 58))
    few = SimpleNamespace(plan=greensboro.plan, sky=sky, plane=greensboro.plane)
    return Rerun(few, [each for each in sample() if each.name in ("tandem", "both sides")])


def draws(rerun, count):
    """Return draws within 2.5 spreads; responses only fall, since a response that is measured near 1 cannot rise."""
    numbers = np.clip(np.random.default_rng(1).normal(size=(count, len(rerun.drawn))), -2.5, 2.5)
    for place, (name, _, _) in enumerate(rerun.drawn):
        if name == "response":
            numbers[:, place] = -np.abs(numbers[:, place])
    return numbers


@pytest.mark.parametrize("station", ["greensboro", "sand_point"])
def test_shortcut_is_the_full_rerun(reruns, station):
    """All inputs moved at once, single junctions, a tandem, rear light, another glass: within 0.1 %."""
    rerun = reruns[station]
    zero = np.zeros(len(rerun.drawn))
    base, rating = rerun.energies(zero)
    middle, middle_rating = rerun.told(zero)
    moved = []
    for numbers in draws(rerun, 3):
        there, there_rating = rerun.energies(numbers)
        ours, ours_rating = rerun.told(numbers)
        moved.append(there / base)
        np.testing.assert_allclose(ours / middle, there / base, rtol=WITHIN)
        np.testing.assert_allclose(ours_rating / middle_rating, there_rating / rating, rtol=2e-4)
    assert np.std(moved, axis=0).min() > 5 * WITHIN  # the draws move what is compared by far more


def test_a_few_days_by_the_shortcut_are_their_full_rerun(days):
    """As for the years, where each class holds but an hour or two."""
    zero = np.zeros(len(days.drawn))
    base, rating = days.energies(zero)
    middle, middle_rating = days.told(zero)
    np.testing.assert_allclose(middle, base, rtol=5e-3)  # classes alone: power is not straight in what they average
    for numbers in draws(days, 3):
        there, there_rating = days.energies(numbers)
        ours, ours_rating = days.told(numbers)
        np.testing.assert_allclose(ours / middle, there / base, rtol=WITHIN)
        np.testing.assert_allclose(ours_rating / middle_rating, there_rating / rating, rtol=2e-4)


@pytest.mark.parametrize("pair", chance_light.TOGETHER)
def test_inputs_that_work_on_each_other(reruns, pair):
    """One and a half spreads of both, to one side and to opposite ones, within 0.1 %; without the product terms up to
    0.3 %."""
    rerun = reruns["greensboro"]
    zero = np.zeros(len(rerun.drawn))
    base, middle = rerun.energies(zero)[0], rerun.told(zero)[0]
    for second in (1.5, -1.5):
        numbers = zero.copy()
        numbers[[rerun.drawn.index((name, "site here", 0)) for name in pair]] = 1.5, second
        np.testing.assert_allclose(rerun.told(numbers)[0] / middle, rerun.energies(numbers)[0] / base, rtol=WITHIN)


def test_bright_ground_stays_ground(greensboro):
    """Over snow of albedo 0.8 the ground moves by its odds: between 0 and 1 at any spread, by about 0.04 at one; the
    shortcut holds within 0.1 % also there, where light thrown to and fro bends the answer most."""
    site = replace(greensboro.plan, ground=GroundPlan(albedo=0.8))
    sky = hourly.site_sky(site, greensboro.weather)
    rerun = Rerun(SimpleNamespace(plan=site, sky=sky, plane=greensboro.plane))
    for spreads, least, most in ((1.0, 0.83, 0.85), (-1.0, 0.74, 0.77), (20.0, 0.99, 1.0), (-20.0, 0.0, 0.05)):
        ground = chance_light.moved(sky, rerun.found, {"albedo": spreads * BY_NAME["albedo"].spread}).air.albedo
        assert least < ground.min() <= ground.max() < most
    zero = np.zeros(len(rerun.drawn))
    base, middle = rerun.energies(zero)[0], rerun.told(zero)[0]
    for spreads in (2.5, -2.5):
        numbers = zero.copy()
        numbers[rerun.drawn.index(("albedo", "site here", 0))] = spreads
        np.testing.assert_allclose(rerun.told(numbers)[0] / middle, rerun.energies(numbers)[0] / base, rtol=WITHIN)


@pytest.mark.parametrize("station", ["greensboro", "sand_point"])
def test_the_farthest_draws_stay_sane(reruns, station):
    """Everything four spreads off at once, to either side: far-fetched, but a yield."""
    rerun = reruns[station]
    corners = np.random.default_rng(4).choice([-1.0, 1.0], size=(40, len(rerun.drawn))) * chance_inputs.FARTHEST
    energy, rating = rerun.shortcut.energies(corners)
    middle = rerun.told(np.zeros(len(rerun.drawn)))
    for found, usual in ((energy, middle[0]), (rating, middle[1])):
        assert np.all((found / usual > 0.4) & (found / usual < 1.7))


def test_an_absorber_that_is_not_off_is_the_bank_s(reruns):
    """Without offsets the power is that of `Bank`, coupled tandem and rear light too, to rounding of ln J0's table."""
    rerun = reruns["greensboro"]
    found, light_of = rerun.shortcut, rerun.shortcut.light
    for a, absorber in enumerate(rerun.absorbers):
        for count in (2, 4) if len(absorber.junctions) > 1 else (2,):
            kind = replace(absorber, terminals=count)
            bank = Bank.of([kind])
            g, temperature = found.glass[a], light_of.temp_air + light_of.rise[a]
            front, rear = light_of.front[g], light_of.rear[g]
            wanted = bank.terminal_power(bank.currents(front, temperature, rear), temperature)[0]
            each = np.ones(len(kind.junctions))
            made = chance_device.device(kind, tuple(0.005 * each))
            off = chance_device.Offsets(0 * each, each, each, each, 0.0)
            np.testing.assert_allclose(chance_device.power(made, off, front, rear, temperature), wanted, rtol=1e-9)


@pytest.mark.parametrize("station", ["greensboro", "sand_point"])
def test_unmoved_sky_is_the_study_s_own(reruns, station):
    """What each hour was found to be is read back from the finished sky: closing again gives the same spectra."""
    rerun = reruns[station]
    again = chance_light.moved(rerun.sky, rerun.found, {})
    for name in ("beam", "diffuse", "aod500"):
        np.testing.assert_allclose(getattr(again.sky, name), getattr(rerun.sky.sky, name), rtol=1e-6, atol=1e-9)


def test_classes_keep_the_light(reruns):
    rerun = reruns["greensboro"]
    faces = hourly.FacesOfYear(rerun.sky, light.plane_parts(rerun.sky, rerun.mounting), None, None)
    found = rerun.shortcut.light
    for g, (glass, _) in enumerate(hourly.by_front(rerun.absorbers)):
        np.testing.assert_allclose(found.weight @ found.front[g], faces.entered(glass)[0].sum(axis=0), rtol=1e-9)
    assert found.front.shape[1] < 250


def test_parts_of_a_year_are_the_year(reruns, greensboro_weather):
    """A year of minutes comes month by month: quarters, closed on their own and told more coarsely, give the ratios of
    the whole within 0.2 %; months of their own haze make most of the difference."""
    rerun = reruns["greensboro"]
    moves = {name: rerun.spreads.site[name] for name in OF_LIGHT}
    n = len(greensboro_weather)
    lights = []
    for k in range(4):
        sky = hourly.site_sky(rerun.site, cut(greensboro_weather, k * n // 4, (k + 1) * n // 4))
        lights.append(chance_light.gather(rerun.site, sky, rerun.absorbers, [LossesPlan()], moves, 0.25)[0])
    parts = chance_light.joined(lights)
    assert parts.weight[-1] == 0.0
    assert np.count_nonzero(parts.weight == 0) == 1
    shortcut = chance_shortcut.Shortcut.of(parts, rerun.absorbers, rerun.spreads, rerun.drawn)
    zero = np.zeros(len(rerun.drawn))
    for numbers in draws(rerun, 2):
        whole = rerun.told(numbers)[0] / rerun.told(zero)[0]
        np.testing.assert_allclose(rerun.told(numbers, shortcut)[0] / rerun.told(zero, shortcut)[0], whole, rtol=2e-3)


def test_a_thinned_year_keeps_whole_days(reruns):
    rerun = reruns["greensboro"]
    fewer, found = chance_light.thinned(rerun.sky, rerun.found, len(rerun.sky.lit) // 3 + 1)
    days = [np.unique((sky.weather.time[sky.lit] - 5 * 3600) // 86400) for sky in (rerun.sky, fewer)]
    assert len(days[1]) == pytest.approx(len(days[0]) / 3, abs=1.5)
    assert len(found.own) == len(fewer.lit) == len(fewer.sky.aod500) == len(fewer.sun.lit)
    again = chance_light.moved(fewer, found, {})
    # Expected haze of months comes from fewer clear days now; light of hours that tell their own is as it was.
    np.testing.assert_allclose(again.sky.beam[found.own], fewer.sky.beam[found.own], rtol=1e-6, atol=1e-9)


def test_directions(reruns):
    """More water, more haze of a bluer kind, more ozone: less for wide gaps than for silicon; better cooling: more."""
    rerun = reruns["greensboro"]
    zero = np.zeros(len(rerun.drawn))
    base = rerun.told(zero)[0]

    def gain(name, owner):
        numbers = zero.copy()
        numbers[rerun.drawn.index((name, owner, 0))] = 1.0
        return rerun.told(numbers)[0] / base - 1

    silicon, _, amorphous, wide, *_ = range(len(rerun.absorbers))
    assert np.all(gain("heat_loss", "all") > 0)
    assert np.all(gain("albedo", "site here") > 0)
    both = len(rerun.absorbers) - 2
    assert gain("albedo", "site here")[both] > 2 * gain("albedo", "site here")[silicon]  # rear light is ground light
    for name in ("angstrom_exponent", "ozone_atm_cm"):
        found = gain(name, "site here")
        assert found[amorphous] < found[wide] < found[silicon]
    found = gain("water_cm", "site here")  # the beam's sum is kept: what infrared loses the visible gains
    assert found[amorphous] > found[silicon]


def test_the_model_s_error_is_sized_by_the_checks():
    """Current per light over gaps of 0.72-2.2 eV: 0.4 % rms in clear air, as against 6S over all its skies (0.36 %);
    0.7 % with that of cloud, between discrete ordinates (0.2-0.6) and regressions (0.3-1.5)."""
    from yieldsim.checks import clear_sky

    z = np.random.default_rng(0).normal(size=(2, 4000, SHAPES))
    errors = [
        BY_NAME[name].spread * (draw @ error_shapes())
        for name, draw in zip(("model_clear", "model_cloud"), z, strict=True)
    ]
    yields = step_yields(clear_sky.GAPS_EV)

    def scatter(error):
        return float(np.sqrt(np.mean(np.var(spectral_factor(np.exp(error) * reference_bands(), yields), axis=0))))

    skies = clear_sky.six_s()
    six_s = float(np.sqrt(np.mean((skies.total[skies.slant <= 5.1] - 1) ** 2)))
    assert scatter(errors[0]) == pytest.approx(six_s, rel=0.25)
    assert 0.006 < scatter(errors[0] + errors[1]) < 0.008


def test_error_shapes_are_smooth_and_of_unit_size():
    """Neighbouring bands err alike, and one spread of all shapes together is one in the mean over the light."""
    shapes = error_shapes()
    light_share = reference_bands() / reference_bands().sum()
    assert np.sum(shapes**2 @ light_share) == pytest.approx(1.0, rel=1e-12)
    assert np.abs(np.diff(shapes, axis=1)).max() < 0.25


def test_every_input_has_a_reason_and_a_range():
    for each in chance_inputs.INPUTS:
        assert each.reason
        assert each.words
        assert 0 < each.spread <= each.highest
        middle, step = each.value(0.0), each.value(1e-3)
        assert middle == (0.0 if each.kind == "step" else 1.0)
        assert step > middle
        assert np.all(each.value(chance_inputs.FARTHEST * -each.highest) > (-np.inf if each.kind == "step" else 0))
    assert len(chance_inputs.BY_NAME) == len(chance_inputs.INPUTS)


def test_unmoved_days_are_the_study_s_own(days):
    again = chance_light.moved(days.sky, days.found, {})
    for name in ("beam", "diffuse", "aod500"):
        np.testing.assert_allclose(getattr(again.sky, name), getattr(days.sky.sky, name), rtol=1e-6, atol=1e-9)
    assert days.found.hourly
    assert days.found.tells.sum() > 5  # whose haze holds still around a high sun
    assert np.all(days.found.own[days.found.tells])


def test_haze_that_is_fixed_is_never_solved(days):
    """What the study says of haze stands: no hour tells its own, and moving the expected haze moves every hour's."""
    site = replace(days.site, atmosphere=replace(days.site.atmosphere, haze="fixed"))
    sky = hourly.site_sky(site, days.sky.weather)
    found = Found.of(site, sky)
    assert not found.hourly
    assert not np.any(found.own | found.tells)
    more = chance_light.moved(sky, found, {"aod500": np.log(1.5)})
    np.testing.assert_allclose(more.sky.aod500, 1.5 * sky.sky.aod500, rtol=1e-12)


def test_classes_of_days_keep_light_and_time(days):
    """Invariants: light behind each glass, intervals, and the light that comes with the sun hidden."""
    kept = days.shortcut.light
    faces = hourly.FacesOfYear(days.sky, light.plane_parts(days.sky, days.mounting), None, None)
    for g, (glass, _) in enumerate(hourly.by_front(days.absorbers)):
        np.testing.assert_allclose(kept.weight @ kept.front[g], faces.entered(glass)[0].sum(axis=0), rtol=1e-9)
    total = faces.front.total()
    assert kept.weight.sum() == pytest.approx(np.count_nonzero(total))
    brought = kept.weight * kept.front[0].sum(axis=1)
    hidden = np.average(1 - days.sky.sky.open_share, weights=total)
    assert np.average(kept.cloudy, weights=brought) == pytest.approx(hidden, rel=0.05)  # glass takes more of low sun
    air = days.sky.weather["temp_air"][days.sky.lit] + 273.15
    assert np.average(kept.temp_air, weights=brought) == pytest.approx(np.average(air, weights=total), abs=0.1)
    assert np.all(kept.rise[:, :-1] > 0)
    assert np.all(kept.rise[:, -1] == 0)
    assert kept.temp_air[-1] == STANDARD_CELL_TEMPERATURE
    assert kept.front[0, -1].sum() == pytest.approx(1000.0)


def test_two_stretches_joined_hold_both(days, greensboro_weather):
    """Invariant: light and time of the parts, and the standard spectrum once, at the end."""
    moves = {"water_cm": 0.1, "angstrom_exponent": 0.2}
    parts = []
    for first, last in ((24 * 53, 24 * 55), (24 * 55, 24 * 58)):
        sky = hourly.site_sky(days.site, cut(greensboro_weather, first, last))
        parts += chance_light.gather(days.site, sky, days.absorbers, [LossesPlan()], moves, 0.25)
    whole = chance_light.joined(parts)
    n = len(whole.weight)
    assert n == sum(len(part.weight) for part in parts) - 1
    assert whole.weight[-1] == 0
    for name in ("front", "rear"):
        light_of = [np.einsum("gcb,c->gb", getattr(part, name), part.weight) for part in (whole, *parts)]
        np.testing.assert_allclose(light_of[0], light_of[1] + light_of[2], rtol=1e-12)
    np.testing.assert_array_equal(whole.front[:, -1], parts[1].front[:, -1])
    for name, axis in (("front_moves", 2), ("rear_moves", 2), ("rise", 1), ("cloudy", 0), ("temp_air", 0)):
        values = getattr(whole, name)
        assert values.shape[axis] == n
        head = np.take(values, range(len(parts[0].weight) - 1), axis=axis)
        np.testing.assert_array_equal(head, np.delete(getattr(parts[0], name), -1, axis=axis))
    assert len(whole.front_moves) == 2 * 2 + 1
    assert whole.together == ((0, 1),)
    assert chance_light.joined(parts[:1]) is parts[0]


@pytest.mark.parametrize("drifts", [True, False])
@pytest.mark.parametrize("kind", [0, 1])
def test_devices_that_are_not_off_are_the_bank_s(days, kind, drifts):
    """To rounding of ln J0's table; also where no edge drifts with temperature, and the responses are one."""
    absorber = days.absorbers[kind]
    if not drifts:
        still = tuple(replace(each, gap_shift_ev_per_k=0.0) for each in absorber.junctions)
        absorber = replace(absorber, junctions=still)
    kept, bank = days.shortcut.light, Bank.of([absorber])
    temperature = kept.temp_air + kept.rise[kind]
    front, rear = kept.front[0], kept.rear[0]
    wanted = bank.terminal_power(bank.currents(front, temperature, rear), temperature)[0]
    each = np.ones(len(absorber.junctions))
    made = chance_device.device(absorber, tuple(0.005 * each))
    assert made.drifts is drifts
    off = chance_device.Offsets(0 * each, each, each, each, 0.0)
    np.testing.assert_allclose(chance_device.power(made, off, front, rear, temperature), wanted, rtol=1e-9)
    warmer = replace(off, temperature_coefficient=1e-3)
    there = wanted * (1 + 1e-3 * (temperature - STANDARD_CELL_TEMPERATURE))
    np.testing.assert_allclose(chance_device.power(made, warmer, front, rear, temperature), there, rtol=1e-9)


def test_error_shapes_tie_bands_as_far_as_they_reach():
    """Definition: two bands err alike by exp(-(d/reach)^2/2) of their distance; what the shapes leave out is 2 % of the
    variance over the light, and one that is far from the light is told least well."""
    shapes, share = error_shapes(), reference_bands() / reference_bands().sum()
    place = np.log(band_wavelengths())
    wanted = np.exp(-(((place[:, None] - place) / 0.35) ** 2) / 2)
    off = share @ (shapes.T @ shapes - wanted) ** 2 @ share
    assert np.sqrt(off) < 0.03


YIELDS, ENERGIES = (1000.0, 990.0), (250.0, 150.0)  # invented; the second absorber is the second best


def tables(days, absorbers, yearly=(), **plan):
    """Return all tables of draws of these days, and the draws."""
    found = chance.Gathered(ChancePlan(seed=3, **plan), days.site, absorbers, LossesPlan())
    found.add(days.sky, 1.0)
    annual = [
        {"mounting": "fixed", "absorber": each.name, "specific_yield_kwh_kwp": per_kw, "energy_kwh_m2": energy}
        for each, per_kw, energy in zip(absorbers, YIELDS, ENERGIES, strict=False)
    ]
    return found.told(annual, yearly)


@pytest.fixture(scope="module")
def of_draws(days):
    return tables(days, days.absorbers, draws=100)


def test_rows_tell_of_the_draws(of_draws):
    """Definitions, from the draws themselves: quantiles, means, who leads how often, by how much, in which rank."""
    found, draws = of_draws
    for row in found["chance"]:
        values = getattr(draws, row["measure"])[:, 0, draws.absorbers.index(row["absorber"])]
        np.testing.assert_allclose([row["p90"], row["p50"], row["p10"]], np.quantile(values, [0.1, 0.5, 0.9]))
        assert (row["mean"], row["sd"]) == pytest.approx((values.mean(), values.std()))
        assert row["p50_half"] == pytest.approx(np.median(values[:50]))
        assert row["p90_half"] == pytest.approx(np.quantile(values[:50], 0.1))
        assert row["base"] == pytest.approx(np.median(values), rel=0.02)
    for row in found["head_to_head"]:
        i, j = (draws.absorbers.index(row[name]) for name in ("absorber", "other"))
        values = getattr(draws, row["measure"])[:, 0]
        assert row["probability"] == np.mean(values[:, i] > values[:, j])
        assert row["probability_above"] == np.mean(values[:, i] > 1.01 * values[:, j])
        assert row["margin_p50"] == pytest.approx(np.median(values[:, i] / values[:, j] - 1))
        first = next(r for r in found["rank_chance"] if (r["measure"], r["absorber"], r["rank"]) == (
            row["measure"], row["absorber"], 1))  # fmt: skip
        assert first["probability"] == row["probability"]


def test_flips_are_ties(days, of_draws):
    """Definition: with the input so many spreads away and all else in its middle, the best two give the same."""
    found, _ = of_draws
    names = [each.name for each in days.absorbers]
    base = np.array([YIELDS, ENERGIES])
    year = YearOfChance.of(days.shortcut.light, days.absorbers, days.spreads, days.drawn, base, None)
    one = [row for row in found["flips"] if row["found"] == "tie" and not row["input"].startswith("model")]
    assert {row["measure"] for row in one} == {"specific_yield_kwh_kwp"}  # energies are too far apart
    assert len(one) > 4
    for row in one:
        assert (row["absorber"], row["other"]) == tuple(names)
        which = [
            owner for owner, said in chance_shortcut.owners(row["input"], "here", days.absorbers) if said == row["of"]
        ]
        away = np.zeros((1, len(days.drawn)))
        away[0, [days.drawn.index((row["input"], owner, 0)) for owner in which]] = row["spreads"]
        assert np.count_nonzero(away) == 1
        first, second = year.values(away)[0, 0]
        assert first == pytest.approx(second, rel=1e-4)
        spread = {**days.spreads.site, **days.spreads.absorbers[0]}[row["input"]]
        assert row["value"] == pytest.approx(float(BY_NAME[row["input"]].value(spread * row["spreads"])))


def test_slopes_are_those_of_the_draws(days):
    """Central differences at a spread to either side; an input of the other absorber moves nothing."""
    base = np.array([YIELDS, ENERGIES])
    year = YearOfChance.of(days.shortcut.light, days.absorbers, days.spreads, days.drawn, base, None)
    slopes = year.slopes()
    np.testing.assert_allclose(year.values(np.zeros((1, len(days.drawn))))[:, 0], base, rtol=1e-12)
    level = days.drawn.index(("nameplate", absorber_owner(days.absorbers[0]), 0))
    assert slopes[0, level, 0] == pytest.approx(YIELDS[0] * BY_NAME["nameplate"].spread, rel=1e-3)
    assert slopes[1, level, 0] == 0.0  # energy per area knows no label
    assert slopes[0, level, 1] == 0.0
    ageing = days.drawn.index(("degradation", absorber_owner(days.absorbers[1]), 0))
    assert slopes[1, ageing, 1] != 0.0
    assert slopes[1, ageing, 0] == 0.0
    assert year.best_two(0) == (0, 1)
    assert set(year.active()) == {name for name, _, _ in days.drawn}


def test_one_absorber_alone_has_causes_but_no_rival(days):
    found, draws = tables(days, days.absorbers[:1], draws=25)
    assert found["flips"] == []
    assert found["head_to_head"] == []
    assert {row["other"] for row in found["causes"]} == {""}
    assert {row["probability"] for row in found["rank_chance"]} == {1.0}
    assert draws.energy_kwh_m2.shape == (25, 1, 1)


def test_years_of_a_file_are_drawn_as_they_are(days):
    """Invariant: with nothing else drawn each draw is one of the years' energies over their mean, times the study's."""
    yearly = [
        {"mounting": "fixed", "absorber": each.name, "year": year, "energy_kwh_m2": energy}
        for year, share in ((2001, 0.9), (2002, 1.0), (2003, 1.1))
        for each, energy in zip(days.absorbers, (share * 240.0, share**2 * 160.0), strict=True)
    ]
    nothing = {name: 0.0 for name in BY_NAME if name != "year"}
    _, draws = tables(days, days.absorbers, yearly, draws=60, spreads=nothing)
    shares = np.array([[0.9, 0.81], [1.0, 1.0], [1.1, 1.21]]) / [1.0, np.mean([0.81, 1.0, 1.21])]
    found = np.unique(np.round(draws.energy_kwh_m2[:, 0], 9), axis=0)
    np.testing.assert_allclose(found, shares * ENERGIES, rtol=1e-9)
    assert np.unique(draws.energy_kwh_m2[:, 0, 0], return_counts=True)[1].min() > 10


def test_only_lossless_junctions_stand_for_a_limit():
    """A limit has every loss at its least: one resistance or a little dark recombination, and it is a device."""
    limit = sample()[-1].junctions[0]
    assert is_ideal(limit)
    for change in (
        {"external_radiative_efficiency": 0.9}, {"series_resistance_ohm_cm2": 0.1},
        {"shunt_resistance_ohm_cm2": 1e9},
    ):  # fmt: skip
        assert not is_ideal(replace(limit, **change))


def test_which_year_is_drawn_hangs_on_the_year_alone(days):
    """Two draws that differ in other numbers of no spread give the same; other numbers of the year, other years."""
    spreads = spreads_of(ChancePlan(spreads=dict.fromkeys(BY_NAME, 0.0)), "here", days.absorbers)
    years = np.array([[0.9, 0.8], [1.0, 1.0], [1.1, 1.2]])
    base = np.array([YIELDS, ENERGIES])
    year = YearOfChance.of(days.shortcut.light, days.absorbers, spreads, days.drawn, base, years)
    own = days.drawn.index(("year", "site here", 0))
    numbers = np.zeros((6, len(days.drawn)))
    others = [place for place, (name, _, _) in enumerate(days.drawn) if name in ("nameplate", "degradation")]
    numbers[:, others] = np.random.default_rng(2).normal(size=(6, len(others)))
    numbers[:, own] = -2.0, -2.0, 0.0, 0.0, 2.0, 2.0
    found = year.values(numbers)[1] / base[1]
    np.testing.assert_allclose(found, np.repeat(years, 2, axis=0), rtol=1e-9)
