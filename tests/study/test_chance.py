"""What must hold of the draws as a whole: nothing drawn is the study, ties, nesting, the normal case, several years."""

from dataclasses import replace

import numpy as np
import pytest

from yieldsim.config import library
from yieldsim.study import chance, chance_store, compare
from yieldsim.study.annual import Ratings
from yieldsim.study.chance import Gathered
from yieldsim.study.chance_inputs import BY_NAME, INPUTS, OF_SITE
from yieldsim.study.chance_shortcut import dimensions
from yieldsim.study.chance_year import MEASURES, numbers
from yieldsim.study.plan import ChancePlan, LossesPlan

NOTHING = dict.fromkeys(BY_NAME, 0.0)
Z90 = 1.2815515655446004  # of the standard normal distribution: exceeded downwards with 90 % probability


def named(entry, name):
    return replace(library.entry(entry).absorber, name=name)


TWINS = (named("c-si", "silicon"), named("cdte", "film"), named("cdte", "the same film"))


class Place:
    """A station's year ready for draws."""

    def __init__(self, year, absorbers):
        self.year, self.absorbers = year, absorbers
        self.annual = self.rows(year.sums, absorbers, year)

    @staticmethod
    def rows(sums, absorbers, year):
        from yieldsim.study import annual, hourly

        plane = hourly.plane_year(year.sky, year.plane.mounting, year.parts, absorbers)
        total = annual.sums(plane, year.sky.month, sums.hours, 3600, LossesPlan())
        return compare.annual_rows("here", "fixed", absorbers, Ratings.of(absorbers), total)

    def gathered(self, plan):
        found = Gathered(plan, replace(self.year.plan, name="here"), self.absorbers, LossesPlan())
        found.add(self.year.sky, 1.0)
        return found

    def told(self, plan, yearly=()):
        return self.gathered(plan).told(self.annual, yearly)


@pytest.fixture(scope="module")
def place(greensboro):
    return Place(greensboro, TWINS)


@pytest.fixture(scope="module")
def whole(place):
    """All inputs drawn by their defaults."""
    return place.told(ChancePlan(draws=100, seed=7))


def of(rows, **wanted):
    return [row for row in rows if all(row[name] == value for name, value in wanted.items())]


def test_nothing_drawn_is_the_study_to_the_last_digit(place):
    tables, draws = place.told(ChancePlan(draws=50, spreads=NOTHING))
    for measure in MEASURES:
        for a, row in enumerate(place.annual):
            assert set(getattr(draws, measure)[:, 0, a]) == {row[measure]}
        for row, base in zip(of(tables["chance"], measure=measure), place.annual, strict=True):
            assert row["p90"] == row["p50"] == row["p10"] == row["base"] == base[measure]
    assert tables["causes"] == []
    assert tables["flips"] == []


def test_two_names_for_one_entry_share_their_draws(whole):
    """Exactly one half, and a margin of 0; and the twin is no second that the best could be set against."""
    tables, _ = whole
    for measure in MEASURES:
        twins = [
            row
            for row in of(tables["head_to_head"], measure=measure)
            if "silicon" not in (row["absorber"], row["other"])
        ]
        assert len(twins) == 1
        assert twins[0]["probability"] == 0.5
        assert (twins[0]["margin_p90"], twins[0]["margin_p50"], twins[0]["margin_p10"]) == (0.0, 0.0, 0.0)
        told = of(tables["causes"], measure=measure)
        assert all("silicon" in (row["absorber"], row["other"]) for row in told if row["other"])


def test_independent_equals_are_even(place):
    """Two films alike but for a nano-eV of gap: draws of their own, one half within 4 standard errors."""
    base = TWINS[1].junctions[0]
    other = replace(TWINS[1], name="other", junctions=(replace(base, gap_ev=base.gap_ev + 1e-9),))
    drawn = dimensions("here", (TWINS[1], other))
    found = numbers(ChancePlan(draws=400), drawn, 400)
    one, two = (
        found[:, [place for place, (name, owner, _) in enumerate(drawn) if name == "nameplate"][k]] for k in (0, 1)
    )
    assert np.mean(one > two) == pytest.approx(0.5, abs=4 * 0.5 / np.sqrt(400))


def test_draws_nest_and_do_not_know_of_other_absorbers_or_sites():
    plan = ChancePlan(draws=800, seed=3, correlation={"year": 0.5})
    drawn = dimensions("here", TWINS[:2])
    long, short = numbers(plan, drawn, 800), numbers(plan, drawn, 400)
    np.testing.assert_array_equal(long[:400], short)
    more = dimensions("here", (named("gaas", "third"), *TWINS[:2]))
    wider = numbers(plan, more, 400)
    np.testing.assert_array_equal(wider[:, [more.index(each) for each in drawn]], short)
    there = dimensions("there", TWINS[:2])
    elsewhere = numbers(plan, there, 400)
    for place, (name, _, _) in enumerate(drawn):
        alike = np.array_equal(short[:, place], elsewhere[:, place])
        assert alike == (BY_NAME[name].owner != "site")  # what a device or the model errs by is the same everywhere
    year = [name for name, _, _ in drawn].index("year")
    assert np.corrcoef(short[:, year], elsewhere[:, year])[0, 1] == pytest.approx(0.5, abs=0.15)


def test_one_normal_input_has_the_closed_form_s_p90(place):
    """The label's tolerance alone moves energy per rated power in proportion: P90 = base (1 - 1.2816 s)."""
    spread = 0.02
    tables, draws = place.told(ChancePlan(draws=400, spreads=NOTHING | {"nameplate": spread}))
    for row in of(tables["chance"], measure="specific_yield_kwh_kwp"):
        assert row["p90"] == pytest.approx(row["base"] * (1 - Z90 * spread), rel=2e-3 * spread * Z90 * 10)
        assert row["p10"] == pytest.approx(row["base"] * (1 + Z90 * spread), rel=2e-3 * spread * Z90 * 10)
        assert row["sd"] == pytest.approx(row["base"] * spread, rel=0.01)
        assert abs(row["p90"] - row["p90_half"]) < 4 * row["p90_error"]
    assert np.ptp(draws.energy_kwh_m2[:, 0, 0]) == 0.0  # per area the label does not count
    (lead,) = of(tables["causes"], measure="specific_yield_kwh_kwp", absorber="silicon", other="")
    assert (lead["input"], lead["first_order"], lead["note"]) == ("nameplate", pytest.approx(1.0, abs=1e-9), "")


def test_response_level_moves_energy_per_area_alone(place):
    """Rated with the same response, a module gives per rated power what it gave: 0.1 % where energy moves by 1.5 %."""
    _, draws = place.told(ChancePlan(draws=50, spreads=NOTHING | {"response": 0.015}))
    for a in range(3):
        energy, specific = (getattr(draws, name)[:, 0, a] for name in ("energy_kwh_m2", "specific_yield_kwh_kwp"))
        assert energy.std() / energy.mean() == pytest.approx(0.015, rel=0.1)
        assert specific.std() / specific.mean() < 1e-3


def test_an_error_by_band_flips_a_lead_the_shortest_way(place):
    """Of all shapes of an error the one that moves the lead most: no single shape ties the two with fewer spreads, and
    a straight line from the middle finds the tie within a fifth."""
    plan = ChancePlan(draws=50, spreads=NOTHING | {"model_clear": 0.05})
    tables, _ = place.told(plan)
    (row,) = of(tables["flips"], measure="specific_yield_kwh_kwp", input="model_clear")
    assert row["found"] == "tie"
    told = of(tables["head_to_head"], measure="specific_yield_kwh_kwp", absorber=row["absorber"], other="silicon")
    scatter = (told[0]["margin_p10"] - told[0]["margin_p90"]) / (2 * Z90)
    base = {each["absorber"]: each["specific_yield_kwh_kwp"] for each in place.annual}
    lead = base[row["absorber"]] / base[row["other"]] - 1
    assert abs(row["spreads"]) == pytest.approx(lead / scatter, rel=0.2)


def test_level_and_year_do_not_tell_absorbers_apart(place):
    """Common to all absorbers of a site: yields scatter by 4 %, the lead not at all."""
    tables, draws = place.told(ChancePlan(draws=100, spreads=NOTHING | {"year": 0.04}))
    assert draws.energy_kwh_m2[:, 0, 0].std() / draws.energy_kwh_m2[:, 0, 0].mean() == pytest.approx(0.04, rel=0.05)
    for row in tables["head_to_head"]:
        assert row["margin_p10"] - row["margin_p90"] < 1e-12
    assert all(row["found"] != "tie" for row in tables["flips"])


def test_causes_sum_to_about_one_where_inputs_hardly_work_together(whole):
    tables, _ = whole
    for absorber in ("silicon", "film"):
        told = of(tables["causes"], measure="energy_kwh_m2", absorber=absorber, other="")
        assert {row["input"] for row in told} == {each.name for each in INPUTS}
        assert sum(row["first_order"] for row in told) == pytest.approx(1.0, abs=0.05)
        assert sum(row["total"] for row in told) == pytest.approx(1.0, abs=0.05)
        largest = max(told, key=lambda row: row["total"])
        assert largest["input"] == "year"
        nameplate = of(told, input="nameplate")[0]
        assert nameplate["total"] == pytest.approx(0.0, abs=1e-9)  # of energy per area


def test_a_tie_is_a_tie(place):
    """At the value told, and with all else in its middle, the two give the same."""
    plan = ChancePlan(draws=50, seed=7)
    gathered = place.gathered(plan)
    tables, _ = gathered.told(place.annual, [])
    ties = [row for row in tables["flips"] if row["found"] == "tie" and row["input"] == "nameplate"]
    beyond = [row for row in tables["flips"] if row["found"] != "tie"]
    assert beyond
    assert all(np.isnan(row["value"]) for row in beyond)
    base = {row["absorber"]: row["specific_yield_kwh_kwp"] for row in place.annual}
    assert ties
    for row in ties:
        first, second = base[row["absorber"]], base[row["other"]]
        wanted = second / first if row["of"] == row["absorber"] else first / second
        assert row["value"] == pytest.approx(wanted, rel=1e-6)
        assert row["spreads"] == pytest.approx((wanted - 1) / BY_NAME["nameplate"].spread, rel=1e-4)


def test_several_years_are_drawn_among(place):
    """Three years at 0.9, 1 and 1.1 of the mean: draws take no other value; a given spread stands above them."""
    yearly = [
        row | {"year": year, "energy_kwh_m2": row["energy_kwh_m2"] * level}
        for year, level in ((2001, 0.9), (2002, 1.0), (2003, 1.1))
        for row in place.annual
    ]
    spreads = {name: 0.0 for name in BY_NAME if name != "year"}
    _, draws = place.told(ChancePlan(draws=300, spreads=spreads), yearly)
    shares, counts = np.unique(
        np.round(draws.energy_kwh_m2[:, 0, 0] / place.annual[0]["energy_kwh_m2"], 9), return_counts=True
    )
    assert shares.tolist() == [0.9, 1.0, 1.1]
    assert counts == pytest.approx([100, 100, 100], abs=10)
    _, still = place.told(ChancePlan(draws=50, spreads=NOTHING), yearly)
    assert np.ptp(still.energy_kwh_m2[:, 0, 0]) == 0.0


def test_spreads_of_one_absorber_and_one_site_are_their_own(place):
    plan = ChancePlan(draws=50, spreads=NOTHING, absorbers={"film": {"response": 0.03}}, sites={"there": {"year": 0.1}})
    _, draws = place.told(plan)
    scatter = np.ptp(draws.energy_kwh_m2[:, 0], axis=0)
    assert scatter[0] == scatter[2] == 0.0
    assert scatter[1] > 0


def test_the_order_of_p90_p50_p10(whole):
    """P90 is exceeded with 90 % probability, so it is the least of the three."""
    tables, draws = whole
    for row in tables["chance"]:
        assert row["p90"] < row["p50"] < row["p10"]
        values = getattr(draws, row["measure"])[:, 0, [absorber.name for absorber in TWINS].index(row["absorber"])]
        assert np.mean(values > row["p90"]) == pytest.approx(0.9, abs=0.01)


def test_draws_on_disk_are_the_draws(whole, tmp_path):
    _, draws = whole
    chance_store.write_draws(tmp_path, "here", draws)
    back = chance_store.open_draws(tmp_path, ["here", "elsewhere"])
    assert set(back) == {"here"}
    for measure in MEASURES:
        np.testing.assert_array_equal(getattr(back["here"], measure), getattr(draws, measure))
    assert (back["here"].mountings, back["here"].absorbers) == (draws.mountings, draws.absorbers)


def test_tables_are_complete(whole):
    tables, _ = whole
    assert set(tables) == set(chance.TABLES)
    assert len(tables["rank_chance"]) == 2 * 3 * 3
    assert OF_SITE[0] == "irradiance"
    for rows in tables.values():
        assert rows
        assert all(row["site"] == "here" and row["mounting"] == "fixed" for row in rows)


@pytest.mark.parametrize("share", [0.5, 0.1])
def test_error_of_a_quantile(share):
    """Closed form for evenly spread draws between 0 and 1: the standard deviation of how many lie below, over n."""
    found = chance.quantile_error(np.linspace(0, 1, 10_001), share)
    assert found == pytest.approx(np.sqrt(share * (1 - share) / 10_001), rel=1e-3)
