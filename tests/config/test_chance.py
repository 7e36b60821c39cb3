"""The draws of a study file: what is filled in, what is refused, and where."""

import pytest

from yieldsim import config
from yieldsim.config import chance_schema
from yieldsim.errors import InputError
from yieldsim.study.chance_inputs import BY_NAME, INPUTS, OF_SITE

HEAD = """\
study: sure
mounting: {tilt_deg: 30, azimuth_deg: 180}
sites: [{name: A, weather: "pvlib:723170TYA.CSV"}, {name: B, weather: "pvlib:703165TY.csv"}]
absorbers: [{name: silicon, like: c-si}, {name: film, like: cdte}]
"""


def plan(tmp_path, chance):
    path = tmp_path / "study.yaml"
    path.write_text(HEAD + chance, encoding="utf-8")
    return config.load(path)


def problems(tmp_path, chance):
    with pytest.raises(InputError) as error:
        plan(tmp_path, chance)
    return {problem.where: problem for problem in error.value.problems}


def test_without_the_key_nothing_is_drawn(tmp_path):
    assert plan(tmp_path, "").chance is None


def test_an_empty_section_takes_every_default(tmp_path):
    """All spreads are filled in but that of the year, which several years of weather stand for."""
    found = plan(tmp_path, "chance: {}\n").chance
    assert (found.draws, found.seed, found.margin) == (400, 0, 0.01)
    assert found.spreads == {each.name: each.spread for each in INPUTS if each.name != "year"}
    assert found.correlation == dict.fromkeys(OF_SITE, 0.0)


def test_what_is_given_stands_over_the_defaults(tmp_path):
    text = """\
chance:
  spreads: {water_cm: 0, year: 0.06}
  correlation: {year: 0.4}
  sites: {B: {albedo: 0.5}}
  absorbers: {film: {edge_ev: 0.01}}
"""
    found = plan(tmp_path, text).chance
    assert (found.spreads["water_cm"], found.spreads["year"]) == (0.0, 0.06)
    assert found.correlation == dict.fromkeys(OF_SITE, 0.0) | {"year": 0.4}
    assert found.sites == {"B": {"albedo": 0.5}}
    assert found.absorbers == {"film": {"edge_ev": 0.01}}


def test_one_correlation_holds_for_all_inputs_of_sites(tmp_path):
    assert plan(tmp_path, "chance: {correlation: 1}\n").chance.correlation == dict.fromkeys(OF_SITE, 1.0)


def test_the_resolved_study_gives_the_same_plan(tmp_path):
    first = plan(tmp_path, "chance: {seed: 5, spreads: {edge_ev: 0.001}, correlation: 0.2, sites: {A: {albedo: 0}}}\n")
    again = chance_schema.chance_plan(chance_schema.Chance.model_validate(first.resolved["chance"]))
    assert again == first.chance


@pytest.mark.parametrize(
    ("given", "where", "words"),
    [
        ("draws: 10", "chance.draws", "from 50 to 20000"),
        ("draws: 400.5", "chance.draws", "a whole number"),
        ("seed: -1", "chance.seed", "a whole number"),
        ("margin: 2", "chance.margin", "from 0 to 1"),
        ("spreads: {watter_cm: 0.1}", "chance.spreads.watter_cm", "did you mean `water_cm`?"),
        ("spreads: {year: 3}", "chance.spreads.year", "from 0 to 0.2"),
        ("spreads: {water_cm: -0.1}", "chance.spreads.water_cm", "from 0"),
        ("correlation: 1.5", "chance.correlation", "from 0 to 1"),
        ("correlation: {edge_ev: 0.1}", "chance.correlation.edge_ev", "irradiance, year"),
        ("sites: {C: {albedo: 0}}", "chance.sites.C", "the name of one of the sites"),
        ("sites: {A: {edge_ev: 0}}", "chance.sites.A.edge_ev", "albedo"),
        ("absorbers: {flim: {edge_ev: 0}}", "chance.absorbers.flim", "did you mean `film`?"),
        ("absorbers: {film: {albedo: 0}}", "chance.absorbers.film.albedo", "edge_ev"),
        ("spread: {year: 0.1}", "chance.spread", "did you mean `spreads`?"),
    ],
)
def test_slips_are_told_with_their_place(tmp_path, given, where, words):
    found = problems(tmp_path, f"chance: {{{given}}}\n")
    assert set(found) == {where}
    assert words in found[where].allowed
    assert found[where].line == 5


def test_every_slip_is_told_at_once(tmp_path):
    found = problems(tmp_path, "chance: {draws: 1, spreads: {year: 9}, sites: {C: {}}}\n")
    assert set(found) == {"chance.draws", "chance.spreads.year", "chance.sites.C"}


def test_the_schema_tells_reasons(tmp_path):
    """An editor shows what each spread is by default, and why."""
    schema = chance_schema.Chance.model_json_schema()
    told = schema["$defs"]["Spreads"]["properties"]
    assert set(told) == set(BY_NAME)
    for name, each in BY_NAME.items():
        assert each.reason in told[name]["description"]
        assert f"{each.spread:g} if left out" in told[name]["description"]
