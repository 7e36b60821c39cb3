"""Prices and weights of a study: read, completed, refused with their place."""

import json

import pytest

from yieldsim.config import load, tree
from yieldsim.config.loader import plan_of
from yieldsim.errors import InputError

STUDY = """study: money
mounting: {{tilt_deg: 30, azimuth_deg: 180}}
sites:
  - {{name: One, weather: "pvlib:723170TYA.CSV"}}
  - {{name: Two, weather: "pvlib:703165TY.csv"}}
absorbers: [{{name: silicon, like: c-si}}, {{name: film, like: cdte}}]
{more}
"""
TERMS = "currency: EUR, energy_price_per_kwh: 0.06, discount_rate: 0.05, life_years: 30"


@pytest.fixture
def study(tmp_path):
    def make(more):
        path = tmp_path / "study.yaml"
        path.write_text(STUDY.format(more=more), encoding="utf-8")
        return load(path)

    return make


def problems_of(study, more):
    with pytest.raises(InputError) as caught:
        study(more)
    return caught.value.problems


def test_prices_for_each_absorber(study):
    worth = study(
        f"worth: {{{TERMS}, dc_power_kw: 500, module_price_per_w: {{silicon: 0.1}}, module_price_per_m2: {{film: 30}}, "
        "degradation_per_year: {film: 0.007}}"
    ).worth
    assert worth.module_price_per_m2("silicon", 0.2) == pytest.approx(20.0)
    assert worth.module_price_per_m2("film", 0.2) == 30.0
    assert (worth.degradation("film"), worth.degradation("silicon")) == (0.007, 0.0)
    assert (worth.limited_by, worth.size, worth.energy_price) == ("dc_power", 500.0, (0.06,))


def test_one_price_for_all(study):
    worth = study(f"worth: {{{TERMS}, limited_by: area, area_m2: 1000, module_price_per_w: 0.12}}").worth
    assert worth.per_w == {"silicon": 0.12, "film": 0.12}
    assert (worth.limited_by, worth.size) == ("area", 1000.0)


def test_hourly_prices_come_from_a_file(study, tmp_path):
    (tmp_path / "prices.csv").write_text("price\n" + "\n".join(f"{0.01 * (i % 24):.2f}" for i in range(8760)))
    terms = TERMS.replace("0.06", "prices.csv", 1)
    plan = study(f"worth: {{{terms}, dc_power_kw: 1, module_price_per_w: 0.1}}")
    assert len(plan.worth.energy_price) == 8760
    assert plan.worth.energy_price[25] == 0.01
    assert "prices.csv" in plan.inputs
    (tmp_path / "prices.csv").write_text("price\n" + "\n".join(["0.05"] * 8000))
    (problem,) = problems_of(study, f"worth: {{{terms}, dc_power_kw: 1, module_price_per_w: 0.1}}")
    assert "8000" in problem.found


def test_resolved_reads_again(study, tmp_path):
    plan = study(f"worth: {{{TERMS}, dc_power_kw: 500, module_price_per_w: 0.1}}\nportfolio: {{One: 2, Two: 1}}")
    again = plan_of(tree.parse(json.dumps(plan.resolved), "again"), tmp_path)
    assert again.worth == plan.worth
    assert again.portfolio == plan.portfolio == {"One": 2.0, "Two": 1.0}


@pytest.mark.parametrize(
    ("more", "told"),
    [
        (f"worth: {{{TERMS}, dc_power_kw: 1}}", "no module price"),
        (f"worth: {{{TERMS}, module_price_per_w: 0.1}}", "without `dc_power_kw`"),
        (f"worth: {{{TERMS}, dc_power_kw: 1, area_m2: 5, module_price_per_w: 0.1}}", "beside limited_by"),
        (f"worth: {{{TERMS}, dc_power_kw: 1, module_price_per_w: {{silicon: 0.1}}}}", "no module price for film"),
        (f"worth: {{{TERMS}, dc_power_kw: 1, module_price_per_w: {{silicon: 0.1, flim: 0.1}}}}", "did you mean `film`"),
        (f"worth: {{{TERMS}, dc_power_kw: 1, module_price_per_w: -1}}", "-1"),
        ("worth: {currency: EUR, dc_power_kw: 1, module_price_per_w: 1}", "no key `energy_price_per_kwh`"),
        ("portfolio: {Oen: 1}", "did you mean `One`"),
        ("portfolio: {One: 0, Two: 0}", "no weight above 0"),
        ("portfolio: {One: -2}", "-2"),
        (
            f"worth: {{{TERMS}, dc_power_kw: 1, module_price_per_w: {{silicon: 1, film: 1}}, "
            "module_price_per_m2: {film: 3}}",
            "two prices for film",
        ),
    ],
)
def test_what_cannot_be_is_refused_at_its_place(study, more, told):
    found = problems_of(study, more)
    assert any(told in str(problem) for problem in found), [str(problem) for problem in found]
    assert all(problem.line >= 6 for problem in found)
