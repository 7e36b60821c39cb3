"""What energy is worth: hour by hour, then over a life; break-even prices fed back; sizes; draws."""

from dataclasses import replace

import numpy as np
import pytest

from yieldsim.study import worth
from yieldsim.study.plan import LossesPlan, WorthPlan

NAMES = ("c-si", "cdte", "cigs", "gaas", "a-si", "perovskite-1.55", "perovskite-1.68")
LOSSES = LossesPlan({"soiling": tuple(0.01 * month for month in range(12))})
PRICES = {name: 0.10 + 0.02 * i for i, name in enumerate(NAMES)}  # invented
TERMS = WorthPlan(
    "EUR", "dc_power", 1000.0, (0.06,), 0.05, 30, PRICES, {}, dict.fromkeys(NAMES, 0.005),
    area_cost_per_m2=40.0, power_cost_per_w=0.25, fixed_cost=50_000.0, yearly_cost_per_w=0.008,
    yearly_cost_per_m2=0.4, yearly_cost=2_000.0,
)  # fmt: skip


@pytest.fixture(scope="module")
def sold(greensboro):
    def rows(plan=TERMS, losses=LOSSES):
        return worth.sold_rows(
            "here", greensboro.sky, greensboro.plane, greensboro.absorbers, greensboro.ratings, losses, plan
        )

    return rows


def efficiency_of(greensboro, i):
    """Efficiency per module area."""
    return greensboro.ratings.terminals[i] * greensboro.absorbers[i].area_fraction / 1000


def table(greensboro, plan, rows, draws=None):
    found = worth.rows(plan, greensboro.absorbers, greensboro.ratings, "c-si", rows, draws)
    return {row["absorber"]: row for row in found}


def test_what_is_sold_is_the_yield(greensboro, sold):
    """Definition: kWh/kWp sold are the account's specific yield; at one price revenue is price times energy."""
    from yieldsim.study import annual, compare

    total = annual.sums(greensboro.plane, greensboro.sky.month, np.full(12, 730.0), 3600, LOSSES)
    area = np.ones(len(NAMES))
    yields = compare.measures(total.year(), greensboro.ratings, area)["specific_yield_kwh_kwp"][:, 0]
    for row, expected in zip(sold(), yields, strict=True):
        assert row["sold_kwh_kwp"] == pytest.approx(expected, rel=1e-12)
        assert row["revenue_per_kwp"] == pytest.approx(0.06 * expected, rel=1e-12)


def test_the_hour_of_generation_counts(greensboro, sold):
    """Direction and closed form: a price of noon only is earned at noon only; twelve prices are those of the months."""
    noon = tuple(1.0 if hour % 24 == 12 else 0.0 for hour in range(8760))
    row = sold(replace(TERMS, energy_price=noon))[0]
    sky = greensboro.sky
    local = (sky.weather.time[sky.lit] + round(sky.weather.utc_offset_h * 3600)) // 3600 % 24
    power = greensboro.plane.power[0] * (1 - 0.01 * sky.month) / greensboro.ratings.terminals[0]
    assert row["revenue_per_kwp"] == pytest.approx(power[local == 12].sum(), rel=1e-12)
    monthly = sold(replace(TERMS, energy_price=tuple(float(month == 6) for month in range(12))))[0]
    assert monthly["revenue_per_kwp"] == pytest.approx(power[sky.month == 6].sum(), rel=1e-12)


def test_a_leap_day_has_a_price(greensboro):
    from yieldsim.weather import cut

    start = 1_709_164_800  # 29 February 2024
    weather = replace(cut(greensboro.sky.weather, 0, 24), time=start + 3600 * np.arange(24), utc_offset_h=0.0)
    sky = replace(greensboro.sky, weather=weather, lit=np.arange(24))
    prices = tuple(float(hour) for hour in range(8760))
    assert worth.prices_at(sky, prices) == pytest.approx(58 * 24 + np.arange(24))
    later = replace(sky, weather=replace(weather, time=weather.time + 86400 * 306))  # 31 December
    assert worth.prices_at(later, prices) == pytest.approx(364 * 24 + np.arange(24))


def test_the_grid_takes_no_more_than_it_takes(greensboro, sold):
    """Closed form: with rated power 2 kW per kW of grid nothing above half of the rating is sold; else all."""
    tight = sold(replace(TERMS, limited_by="grid_power", dc_to_grid=2.0))
    wide = sold(replace(TERMS, limited_by="grid_power", dc_to_grid=0.5))
    power = greensboro.plane.power * (1 - 0.01 * greensboro.sky.month) / greensboro.ratings.terminals[:, None]
    for i, (low, high) in enumerate(zip(tight, wide, strict=True)):
        assert low["sold_kwh_kwp"] == pytest.approx(np.minimum(power[i], 0.5).sum(), rel=1e-12)
        assert high["sold_kwh_kwp"] == pytest.approx(power[i].sum(), rel=1e-12)
        assert low["sold_kwh_kwp"] < 0.9 * high["sold_kwh_kwp"]


GRID = replace(TERMS, limited_by="grid_power", size=500.0, dc_to_grid=1.6)
CLIPPED = 2e-4  # of energy: what a cubic between shares 0.05 apart leaves of this year of hours, measured: 1e-4


def clipped(greensboro, share, grid=1 / GRID.dc_to_grid):
    """What silicon sells at a share of its output, hour by hour [kWh/kW]."""
    power = greensboro.plane.power[0] * (1 - 0.01 * greensboro.sky.month) / greensboro.ratings.terminals[0]
    return np.minimum(share * power, grid).sum()


def test_an_old_plant_is_clipped_less(greensboro, sold):
    """Closed form: a life of clipped hours written out year by year; what is clipped hides most of the fading."""
    fading = 0.02
    plan = replace(GRID, fading=dict.fromkeys(NAMES, fading))
    row = table(greensboro, plan, sold(plan))["c-si"]
    years = [800 * clipped(greensboro, (1 - fading) ** n) for n in range(30)]
    present = sum(energy / 1.05 ** (n + 1) for n, energy in enumerate(years))
    assert row["energy_sold_kwh"] == pytest.approx(years[0], rel=1e-12)
    assert row["energy_life_kwh"] == pytest.approx(sum(years), rel=CLIPPED)
    assert row["energy_life_discounted_kwh"] == pytest.approx(present, rel=CLIPPED)
    revenue = (
        row["net_present_value"] + row["capital"] + row["yearly_cost"] * worth.money.present_worth_of_one(0.05, 30)
    )
    assert revenue == pytest.approx(0.06 * present, rel=CLIPPED)
    in_proportion = years[0] * sum((1 - fading) ** n for n in range(30))
    assert row["energy_life_kwh"] > 1.03 * in_proportion


def test_a_good_year_is_clipped_more(greensboro, sold):
    """Closed form: each draw's hours clipped; more light is worth less than its share, less light costs less."""
    rows, shares = sold(GRID), np.array([0.8, 0.93, 1.0, 1.07, 1.22])
    found = worth.sales_of(GRID, rows[0], shares)
    exact = np.array([clipped(greensboro, share) for share in shares])
    assert found.energy == pytest.approx(exact, rel=CLIPPED)
    assert found.energy[2] == rows[0]["sold_kwh_kwp"]  # without spread the study, to the last digit
    assert found.energy[4] < 1.15 * found.energy[2]
    assert found.energy[0] > 0.85 * found.energy[2]


def test_a_grid_that_takes_all_is_no_limit(greensboro, sold):
    """Invariant: an inverter never reached, over life and draws, gives what rated power as the limit gives."""
    wide = replace(GRID, dc_to_grid=0.3, size=1000 / 0.3)
    shares = {("here", "fixed", name): np.linspace(0.7, 1.3, 21) for name in NAMES}
    one, two = table(greensboro, wide, sold(wide), shares), table(greensboro, TERMS, sold(), shares)
    for name in NAMES:
        assert one[name].keys() == two[name].keys()
        for key, value in two[name].items():
            if isinstance(value, float):
                assert one[name][key] == pytest.approx(value, rel=1e-9, abs=1e-5), key


@pytest.mark.parametrize("limited_by", ["area", "dc_power", "grid_power"])
def test_a_break_even_price_fed_back_leaves_no_margin(greensboro, sold, limited_by):
    """Issue: margin 0 to 1e-6 of the plant's revenue, whatever limits the plant."""
    plan = replace(TERMS, limited_by=limited_by, size=5000.0, dc_to_grid=1.3 if limited_by == "grid_power" else 1.0)
    rows = sold(plan)
    before = table(greensboro, plan, rows)
    for name in NAMES[1:]:
        price = before[name]["break_even_price_per_w"]
        again = table(greensboro, replace(plan, per_w=PRICES | {name: price}), rows)
        margin = again[name]["net_present_value"] - again["c-si"]["net_present_value"]
        assert abs(margin) < 1e-6 * again["c-si"]["revenue_first_year"]
        assert again[name]["break_even_price_per_w"] == pytest.approx(price, rel=1e-9)
    assert before["c-si"]["break_even_per_m2"] == pytest.approx(0.0, abs=1e-9)


def test_what_limits_a_plant_is_the_same_for_all(greensboro, sold):
    area = table(greensboro, replace(TERMS, limited_by="area", size=1e4), sold())
    assert {row["area_m2"] for row in area.values()} == {1e4}
    assert len({round(row["power_kw"], 6) for row in area.values()}) == len(NAMES)
    power = table(greensboro, TERMS, sold())
    assert {row["power_kw"] for row in power.values()} == {1000.0}
    plan = replace(TERMS, limited_by="grid_power", size=800.0, dc_to_grid=1.25)
    grid = table(greensboro, plan, sold(plan))
    assert {row["power_kw"] for row in grid.values()} == {1000.0}


def test_a_plant_written_out(greensboro, sold):
    """Closed form: one plant's capital, yearly cost, value and cost of energy added up by hand."""
    row = table(greensboro, TERMS, sold())["cdte"]
    efficiency = efficiency_of(greensboro, 1)
    area = 1000 / efficiency
    capital = 1e6 * (PRICES["cdte"] + 0.25) + area * 40 + 50_000
    yearly = 1e6 * 0.008 + area * 0.4 + 2_000
    assert row["capital"] == pytest.approx(capital, rel=1e-12)
    assert row["yearly_cost"] == pytest.approx(yearly, rel=1e-12)
    energy = sold()[1]["sold_kwh_kwp"] * 1000
    output = sum(0.995**n / 1.05 ** (n + 1) for n in range(30))
    costs = sum(1 / 1.05 ** (n + 1) for n in range(30))
    assert row["net_present_value"] == pytest.approx(energy * 0.06 * output - yearly * costs - capital, rel=1e-9)
    assert row["cost_of_energy_per_kwh"] == pytest.approx((capital + yearly * costs) / (energy * output), rel=1e-12)
    assert row["energy_sold_kwh"] == pytest.approx(energy, rel=1e-12)
    assert row["energy_life_kwh"] == pytest.approx(energy * sum(0.995**n for n in range(30)), rel=1e-12)
    assert row["energy_life_discounted_kwh"] == pytest.approx(energy * output, rel=1e-12)
    assert row["revenue_first_year"] == pytest.approx(energy * 0.06, rel=1e-12)
    assert row["net_present_value_per_kwp"] == pytest.approx(row["net_present_value"] / 1000, rel=1e-12)
    assert row["net_present_value_per_m2"] == pytest.approx(row["net_present_value"] / area, rel=1e-12)
    assert row["break_even_per_w"] == pytest.approx(row["break_even_price_per_w"] - PRICES["c-si"], abs=1e-12)
    assert row["hours"] == 8760


def test_prices_per_area_and_per_watt_are_one(greensboro, sold):
    """Invariant: the same price said per area gives the same plant."""
    per_m2 = {name: PRICES[name] * efficiency_of(greensboro, i) * 1000 for i, name in enumerate(NAMES)}
    one, two = (table(greensboro, plan, sold()) for plan in (TERMS, replace(TERMS, per_w={}, per_m2=per_m2)))
    for name in NAMES:
        for key, value in one[name].items():
            if isinstance(value, float):
                assert two[name][key] == pytest.approx(value, rel=1e-9, abs=1e-6), key


def test_intervals_follow_the_draws(greensboro, sold):
    """Without spread every draw is the study; with a common one break-even prices hardly move; P90 <= P10."""
    rows = sold()
    still = {("here", "fixed", name): np.ones(50) for name in NAMES}
    clipped_still = table(greensboro, GRID, sold(GRID), still)["gaas"]
    assert clipped_still["net_present_value_p90"] == clipped_still["net_present_value"]
    found = table(greensboro, TERMS, rows, still)
    for row in found.values():
        for key in worth._WITH_INTERVALS:
            assert {row[f"{key}_{p}"] for p in ("p90", "p50", "p10")} == {row[key]}
    rng = np.random.default_rng(1)
    shared = 1 + 0.05 * rng.standard_normal(400)
    found = table(greensboro, TERMS, rows, dict.fromkeys(still, shared))
    row = found["gaas"]
    assert row["net_present_value_p90"] < row["net_present_value_p50"] < row["net_present_value_p10"]
    wide = row["net_present_value_p10"] - row["net_present_value_p90"]
    assert row["break_even_per_m2_p10"] - row["break_even_per_m2_p90"] < 0.1 * wide / row["area_m2"]
    assert found["c-si"]["break_even_per_m2_p10"] == pytest.approx(0.0, abs=1e-9)


def test_a_better_absorber_may_cost_more(greensboro, sold):
    """Direction: at equal prices per watt, more yield per watt is worth a higher price, and so is a smaller area."""
    plan = replace(TERMS, per_w=dict.fromkeys(NAMES, 0.2), area_cost_per_m2=0.0, yearly_cost_per_m2=0.0)
    found = table(greensboro, plan, sold())
    yields = {row["absorber"]: row["sold_kwh_kwp"] for row in sold()}
    for name in NAMES[1:]:
        row = found[name]
        assert (row["break_even_price_per_m2"] > row["module_price_per_m2"]) == (yields[name] > yields["c-si"])
