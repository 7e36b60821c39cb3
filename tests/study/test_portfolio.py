"""Several sites at once: regrets, the best on average, the smallest worst regret, one gap for all."""

import pytest

from yieldsim.study import portfolio
from yieldsim.study.sweep import STANDARD_SITE

ENERGY = {
    ("dry", "silicon"): 400.0, ("dry", "film"): 380.0, ("dry", "tandem"): 300.0,
    ("wet", "silicon"): 200.0, ("wet", "film"): 240.0, ("wet", "tandem"): 239.0,
}  # fmt: skip
ANNUAL = {
    "site": [site for site, _ in ENERGY],
    "mounting": ["fixed"] * 6,
    "absorber": [name for _, name in ENERGY],
    "energy_kwh_m2": list(ENERGY.values()),
    "specific_yield_kwh_kwp": [5 * value for value in ENERGY.values()],
}


def by_absorber(weights, measure="energy_kwh_m2"):
    rows = portfolio.portfolio_rows(portfolio.regret_rows(ANNUAL, weights))
    return {row["absorber"]: row for row in rows if row["measure"] == measure}


def test_weights():
    assert portfolio.weights_of(["a", "b"], None) == {"a": 0.5, "b": 0.5}
    assert portfolio.weights_of(["a", "b", "c"], {"a": 3, "c": 1}) == {"a": 0.75, "b": 0.0, "c": 0.25}


def test_regret_is_what_the_best_has_more():
    """Definition: 1 - value over the best at the same place; 0 for the best."""
    rows = portfolio.regret_rows(ANNUAL, {"dry": 0.5, "wet": 0.5})
    found = {(row["site"], row["absorber"]): row["regret"] for row in rows if row["measure"] == "energy_kwh_m2"}
    assert found["dry", "silicon"] == 0.0
    assert found["dry", "film"] == pytest.approx(0.05)
    assert found["wet", "silicon"] == pytest.approx(40 / 240)
    assert found["wet", "film"] == 0.0


def test_an_ideal_absorber_is_no_choice():
    """Definition: what no device reaches is not set against what can be bought, unless too little is left."""
    rows = portfolio.regret_rows(ANNUAL, {"dry": 0.5, "wet": 0.5}, ["silicon"])
    assert {row["absorber"] for row in rows} == {"film", "tandem"}
    found = {(row["site"], row["absorber"]): row["regret"] for row in rows if row["measure"] == "energy_kwh_m2"}
    assert found["dry", "film"] == 0.0
    assert found["dry", "tandem"] == pytest.approx(1 - 300 / 380)
    assert portfolio.choices(["a", "b", "c"], ["b", "c"]) == {"a", "b", "c"}


def test_who_is_best_on_average_and_who_regrets_least():
    """Closed form: means and worst regrets by hand; who wins nowhere is told."""
    found = by_absorber({"dry": 0.5, "wet": 0.5})
    assert found["silicon"]["mean_value"] == pytest.approx(300.0)
    assert found["film"]["mean_value"] == pytest.approx(310.0)
    assert [found[name]["best_on_average"] for name in ("silicon", "film", "tandem")] == [0, 1, 0]
    assert found["film"]["worst_regret"] == pytest.approx(0.05)
    assert found["film"]["worst_site"] == "dry"
    assert [found[name]["smallest_worst_regret"] for name in ("silicon", "film", "tandem")] == [0, 1, 0]
    assert [found[name]["wins_nowhere"] for name in ("silicon", "film", "tandem")] == [0, 0, 1]
    assert [found[name]["wins"] for name in ("silicon", "film", "tandem")] == [1, 1, 0]


def test_weights_turn_the_choice():
    found = by_absorber({"dry": 0.9, "wet": 0.1})
    assert found["silicon"]["best_on_average"] == 1
    alone = by_absorber({"dry": 1.0, "wet": 0.0})  # a site without weight does not count
    assert alone["film"]["wins_nowhere"] == 1
    assert alone["silicon"]["worst_regret"] == 0.0


def test_one_gap_for_all_sites():
    """Closed form: two curves with unlike peaks; the weighted sum's peak, and what it costs either."""
    gaps = [1.1, 1.2, 1.3, 1.4]
    curves = {"dry": [10.0, 12.0, 11.0, 8.0], "wet": [5.0, 6.0, 8.0, 9.0], STANDARD_SITE: [1.0, 2.0, 3.0, 4.0]}
    sweep = {
        "site": [site for site in curves for _ in gaps],
        "mounting": ["fixed" if site != STANDARD_SITE else "" for site in curves for _ in gaps],
        "quality": ["ideal"] * 12,
        "gap_ev": gaps * 3,
        "energy_kwh_m2": [value for curve in curves.values() for value in curve],
    }
    rows = {row["site"]: row for row in portfolio.gap_rows(sweep, {"dry": 0.5, "wet": 0.5})}
    assert set(rows) == {"dry", "wet"}
    assert {row["gap_ev"] for row in rows.values()} == {1.3}  # 9.5 against 7.5, 9, 8.5
    assert (rows["dry"]["own_gap_ev"], rows["wet"]["own_gap_ev"]) == (1.2, 1.4)
    assert rows["dry"]["cost"] == pytest.approx(1 / 12)
    assert rows["wet"]["cost"] == pytest.approx(1 / 9)
    heavy = {row["site"]: row for row in portfolio.gap_rows(sweep, {"dry": 0.95, "wet": 0.05})}
    assert heavy["dry"]["gap_ev"] == 1.2
