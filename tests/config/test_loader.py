"""From study file to plan: defaults, overrides, errors that name line and key path, all at once."""

import contextlib
import hashlib
import json
import math
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests import strategies
from yieldsim.config import crosscheck, library, load, schema, site_schema, tree
from yieldsim.config.fields import folded
from yieldsim.config.inputs import pvlib_data
from yieldsim.config.loader import plan_of
from yieldsim.errors import InputError
from yieldsim.readers import READERS
from yieldsim.study import store, sweep
from yieldsim.study.plan import AtmospherePlan, GroundPlan

CONFIGS = sorted((Path(__file__).parents[2] / "configs").glob("*.yaml"))


def refused(loaded, study):
    with pytest.raises(InputError) as caught:
        loaded(study)
    return {problem.where: problem for problem in caught.value.problems}


# ------------------------------------------------------------------------------------------------ good studies


def test_the_smallest_study_gets_every_default(loaded, minimal):
    plan = loaded(minimal)
    assert plan.name == "small"
    assert plan.reference == "silicon"
    assert plan.gap_sweep is None
    assert dict(plan.losses.monthly) == {}
    assert plan.keep == frozenset(schema.PARTS)
    site = plan.sites[0]
    assert [mounting.name for mounting in site.mountings] == ["fixed"]
    assert site.atmosphere == AtmospherePlan()
    assert site.ground == GroundPlan()
    assert not site.allow_gaps
    assert site.latitude_deg is None


@pytest.mark.parametrize("file", CONFIGS, ids=[file.stem for file in CONFIGS])
def test_every_shipped_study_loads(file):
    plan = load(file)
    assert plan.name == file.stem
    assert "invented" in file.read_text(encoding="utf-8")


def test_the_shipped_study_is_five_places_eight_absorbers_56_gaps_of_two_qualities():
    plan = load(next(file for file in CONFIGS if file.stem == "five-climates"))
    assert (len(plan.sites), len(plan.absorbers)) == (5, 8)
    assert len(plan.gap_sweep.gaps_ev) == 56
    assert list(plan.gap_sweep.absorbers) == ["ideal", "realistic"]


def test_paths_are_relative_to_the_study_and_content_is_fingerprinted(loaded, minimal, tmp_path):
    (tmp_path / "weather").mkdir()
    (tmp_path / "weather" / "a.csv").write_bytes(b"content")
    weather = loaded(minimal.replace("pvlib:723170TYA.CSV", "weather/a.csv")).sites[0].weather[0]
    assert Path(weather.path) == tmp_path / "weather" / "a.csv"
    assert weather.shown == "weather/a.csv"
    assert weather.sha256 == hashlib.sha256(b"content").hexdigest()


def test_a_file_that_pvlib_ships(loaded, minimal):
    weather = loaded(minimal).sites[0].weather[0]
    content = (pvlib_data() / "723170TYA.CSV").read_bytes()
    assert weather.path == "pvlib:723170TYA.CSV"
    assert weather.sha256 == hashlib.sha256(content).hexdigest()


def test_several_named_mountings_reach_every_site_unless_it_says_otherwise(loaded, minimal):
    text = minimal.replace(
        "mounting: {kind: fixed, tilt_deg: 30, azimuth_deg: 180}",
        "mounting:\n"
        "  flat: {kind: fixed, tilt_deg: 5, azimuth_deg: 180}\n"
        "  steep: {kind: fixed, tilt_deg: 60, azimuth_deg: 180}",
    ).replace(
        "absorbers:",
        '  - {name: B, weather: "pvlib:703165TY.csv", mounting: steep}\n'
        '  - {name: C, weather: "pvlib:703165TY.csv", mounting: [steep, flat]}\n'
        '  - {name: D, weather: "pvlib:703165TY.csv", mounting: {tilt_deg: 1, azimuth_deg: 2}}\n'
        "absorbers:",
    )
    planes = [[(each.name, each.tilt_deg) for each in site.mountings] for site in loaded(text).sites]
    assert planes == [
        [("flat", 5), ("steep", 60)],
        [("steep", 60)],
        [("steep", 60), ("flat", 5)],
        [("fixed", 1)],
    ]


def test_one_number_stands_for_twelve_months(loaded, minimal):
    months = list(range(12))
    plan = loaded(minimal + f"losses: {{soiling: 0.02, snow: {[each / 100 for each in months]}}}\n")
    assert plan.losses.monthly["soiling"] == (0.02,) * 12
    assert plan.losses.monthly["snow"] == tuple(each / 100 for each in months)


def test_an_entry_of_the_library_with_a_field_overridden(loaded, minimal):
    base = library.entry("c-si").absorber
    text = minimal.replace("like: c-si", "like: c-si, series_resistance_ohm_cm2: 2, bifaciality: 0.7")
    absorber = loaded(text).absorbers[0]
    assert absorber.name == "silicon"
    assert absorber.bifaciality == 0.7
    assert absorber.junctions[0].series_resistance_ohm_cm2 == 2
    assert absorber.junctions[0].ideality == base.junctions[0].ideality
    assert absorber.junctions[0].response is base.junctions[0].response


def test_a_library_response_moved_to_another_gap(loaded, minimal):
    absorber = loaded(minimal.replace("like: c-si", "like: perovskite-1.55, gap_ev: 1.62")).absorbers[0]
    base = library.entry("perovskite-1.55").absorber.junctions[0]
    assert absorber.gaps_ev == (1.62,)
    assert absorber.junctions[0].response.wavelength_nm.max() < base.response.wavelength_nm.max()
    assert absorber.junctions[0].external_radiative_efficiency == base.external_radiative_efficiency


def test_a_gap_of_ideal_quality(loaded, minimal):
    absorber = loaded(
        minimal.replace("like: c-si", "gap_ev: 1.34, quality: ideal, incidence_modifier: none")
    ).absorbers[0]
    only = absorber.junctions[0]
    assert absorber.incidence_modifier is None
    assert (only.external_radiative_efficiency, only.ideality, only.series_resistance_ohm_cm2) == (1, 1, 0)
    assert math.isinf(only.shunt_resistance_ohm_cm2)
    assert np.all(only.response.quantum_efficiency == 1)


def test_a_stack(loaded, minimal):
    absorber = loaded(
        minimal.replace("like: c-si", f"{STACK}, terminals: 4, coupling: 0.3, bifaciality: 0.6")
    ).absorbers[0]
    top, bottom = absorber.junctions
    assert absorber.gaps_ev == (1.68, 1.1)
    assert (absorber.terminals, absorber.coupling, absorber.bifaciality) == (4, 0.3, 0.6)
    assert top.transmits == 0.05
    assert bottom.external_radiative_efficiency == 0.01
    assert loaded(minimal.replace("like: c-si", STACK)).absorbers[0].terminals == 2


def test_a_stack_of_the_library(loaded, minimal):
    base = library.entry("perovskite-si-2t").absorber
    absorber = loaded(minimal.replace("like: c-si", "like: perovskite-si-2t, bifaciality: 0.5")).absorbers[0]
    assert absorber.junctions == base.junctions
    assert (absorber.name, absorber.bifaciality, absorber.terminals) == ("silicon", 0.5, base.terminals)


PAIRS = "gap_pairs: {top_ev: [1.5, 1.6, 0.05], bottom_ev: [0.9, 1.0, 0.1]"


def test_pairs_of_gaps(loaded, minimal):
    pairs = loaded(f"{minimal}{PAIRS}, terminals: 2, quality: [ideal, {{like: gaas}}]}}\n").gap_pairs
    assert pairs.pairs_ev == ((1.5, 0.9), (1.5, 1.0), (1.55, 0.9), (1.55, 1.0), (1.6, 0.9), (1.6, 1.0))
    assert list(pairs.absorbers) == [("ideal", 2), ("like gaas", 2)]
    assert [absorber.gaps_ev for absorber in pairs.absorbers["like gaas", 2]] == list(pairs.pairs_ev)
    assert list(loaded(f"{minimal}{PAIRS}}}\n").gap_pairs.absorbers) == [
        ("ideal", 2),
        ("ideal", 4),
        ("realistic", 2),
        ("realistic", 4),
    ]


@pytest.mark.parametrize(
    ("change", "where", "found"),
    [
        (("1.6, 0.05", "1.4, 0.05"), "gap_pairs", "a range from 1.5 to 1.4"),
        (("bottom_ev: [0.9, 1.0, 0.1]", "bottom_ev: [0.9, 1.5, 0.1]"), "gap_pairs", "with bottom gaps to 1.5"),
        (("1.6, 0.05", "1.6, 0.0001"), "gap_pairs.top_ev[2]", "0.0001"),
        (("1.6, 0.05", "1.6"), "gap_pairs.top_ev", "a list of 2"),
        (("[0.9, 1.0, 0.1]", "[0.1, 1.0, 0.1]"), "gap_pairs", "gap"),
        (("0.05], ", "0.05], terminals: 3, "), "gap_pairs.terminals", "3"),
        (("0.05], ", "0.05], quality: [ideal, ideal], "), "gap_pairs.quality[1]", "'ideal' again"),
        (
            ("[1.5, 1.6, 0.05], bottom_ev: [0.9, 1.0, 0.1]", "[1.5, 3, 0.001], bottom_ev: [0.9, 1.4, 0.001]"),
            "gap_pairs",
            "pairs",
        ),
    ],
)
def test_pairs_that_cannot_be(loaded, minimal, change, where, found):
    assert change[0] in PAIRS
    assert found in refused(loaded, f"{minimal}{PAIRS.replace(*change)}}}\n")[where].found


def test_the_qualities_of_a_sweep_have_names(loaded, minimal):
    text = minimal + (
        "gap_sweep:\n  from_ev: 1\n  to_ev: 1.2\n  step_ev: 0.1\n  quality:\n"
        "    - ideal\n    - {like: gaas}\n    - {like: gaas, ideality: 2}\n"
        "    - {name: poor, external_radiative_efficiency: 1.0e-6, collected: 0.5}\n"
    )
    swept = loaded(text).gap_sweep
    assert swept.gaps_ev == (1.0, 1.1, 1.2)
    assert list(swept.absorbers) == ["ideal", "like gaas", "gaas 2", "poor"]
    assert [absorber.gaps_ev for absorber in swept.absorbers["like gaas"]] == [(1.0,), (1.1,), (1.2,)]
    assert swept.absorbers["gaas 2"][0].junctions[0].ideality == 2
    assert swept.absorbers["poor"][0].junctions[0].response.quantum_efficiency.max() == 0.5


@given(study=strategies.studies())
@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_any_valid_study_loads_and_its_resolved_form_gives_the_same_plan(study, tmp_path):
    plan = plan_of(tree.parse(json.dumps(study), "s"), tmp_path)
    assert [site.name for site in plan.sites] == [site["name"] for site in study["sites"]]
    text = json.dumps(plan.resolved, allow_nan=False)  # JSON-able, and every number finite
    again = plan_of(tree.parse(text, "s"), tmp_path)
    assert again.resolved == plan.resolved
    assert store.fingerprint(again) == store.fingerprint(plan)


# ------------------------------------------------------------------------------------------------- bad studies


STACK = "stack: [{like: perovskite-1.68, transmits: 0.05}, {gap_ev: 1.1, external_radiative_efficiency: 0.01}]"


@pytest.mark.parametrize(
    ("change", "where", "found", "allowed"),
    [
        (("tilt_deg: 30", "tilt_deg: 200"), "mounting.tilt_deg", "200", "from 0 to 90"),
        (("tilt_deg: 30", "tilt_deg: 30, tilt: 30"), "mounting.tilt", "unknown key `tilt`", "did you mean `tilt_deg`?"),
        (("tilt_deg: 30", "tilt_deg: '30 deg'"), "mounting.tilt_deg", "'30 deg'", "a number"),
        (("tilt_deg: 30", "tilt_deg: .nan"), "mounting.tilt_deg", "nan", "a number"),
        (("tilt_deg: 30", "tilt_deg: true"), "mounting.tilt_deg", "true", "a number"),
        (("tilt_deg: 30", f"tilt_deg: {'9' * 400}"), "mounting.tilt_deg", "inf", "a number"),
        (("tilt_deg: 30, ", ""), "mounting.tilt_deg", "no key `tilt_deg`", "deg from horizontal"),
        (("723170TYA.CSV", "723170TYA.csv"), "sites[0].weather", "'pvlib:723170TYA.csv'", "`723170TYA.CSV`"),
        (("pvlib:723170TYA.CSV", "gone.csv"), "sites[0].weather", "no such file 'gone.csv'", "looked for"),
        (("pvlib:723170TYA.CSV", "."), "sites[0].weather", "not a file", "a file"),
        (("pvlib:723170TYA.CSV", "pvlib:../x"), "sites[0].weather", "pvlib:../x", "that pvlib ships"),
        (("like: c-si", "like: csi"), "absorbers[0].like", "'csi'", "did you mean `c-si`?"),
        (("like: c-si", "gap_ev: -1, quality: ideal"), "absorbers[0].gap_ev", "-1", "[eV]"),
        (("like: c-si", "gap_ev: 1.1"), "absorbers[0]", "without its quality", "quality: ideal"),
        (("like: c-si", "like: c-si, quality: ideal"), "absorbers[0]", "beside `like`", "one of them"),
        ((", like: c-si", ""), "absorbers[0]", "no `like`, `eqe`", "where the response comes from"),
        (("like: c-si", "like: c-si, stack: []"), "absorbers[0].stack", "a list of 0", "2 to 6 junctions"),
        (("like: c-si", "climate: wet, like: c-si"), "absorbers[0].climate", "does not take yet", ""),
        (("like: c-si", "like: perovskite-si-2t, ideality: 1"), "absorbers[0]", "`ideality` of perovskite-si-2t", ""),
        (("like: c-si", "stack: [{like: perovskite-si-2t}, {like: c-si}]"), "absorbers[0]", "as a junction", ""),
        (("like: c-si", "like: c-si, terminals: 4"), "absorbers[0]", "which has one junction", ""),
        (("like: c-si", "gap_ev: 1, quality: ideal, coupling: 0.1"), "absorbers[0]", "of one junction", "stack"),
        (("like: c-si", f"like: c-si, {STACK}"), "absorbers[0]", "`stack` beside like", "in the junctions"),
        (("like: c-si", f"{STACK}, terminals: 3"), "absorbers[0].terminals", "3", "2 | 4"),
        (("like: c-si", "stack: [{like: c-si}, {gap_ev: 1.1}]"), "absorbers[0].stack[1]", "without its quality", ""),
        (("like: c-si", "stack: [{like: c-si}, {like: gaas}]"), "absorbers[0]", "must fall from top to bottom", ""),
        (("name: Greensboro", "name: Standard  spectrum"), "", "", ""),
        (("name: Greensboro", "name: STANDARD spectrum"), "sites[0].name", "'STANDARD spectrum'", "another name"),
        (("name: Greensboro", 'name: "a\\u0007b"'), "sites[0].name", "'a\\x07b'", "without control characters"),
        (("study: small", "study: ../small"), "study", "'../small'", "a name"),
        (("study: small", "study: 2024"), "study", "2024", "a name"),
    ],
)
def test_one_thing_wrong(loaded, minimal, change, where, found, allowed):
    assert change[0] in minimal
    if not where:  # near to a refused one, and fine
        assert loaded(minimal.replace(*change))
        return
    problems = refused(loaded, minimal.replace(*change))
    assert list(problems) == [where]
    assert found in problems[where].found
    assert allowed in problems[where].allowed
    assert problems[where].line > 0
    assert problems[where].excerpt


def test_everything_wrong_is_told_at_once_in_the_order_of_the_file(loaded):
    text = """\
study: a/b
mounting: {kind: fixed, tilt_deg: 200, azimuth_deg: 180}
sites:
  - {name: A, weather: gone.csv}
  - {name: a, weather: "pvlib:703165TY.csv", wether: x}
absorbers:
  - {name: x, gap_ev: -1, quality: ideal}
  - {name: X, like: c-si}
reference: z
losses: {soiling: 20}
climate: {}
"""
    with pytest.raises(InputError) as caught:
        loaded(text)
    assert [(problem.line, problem.where) for problem in caught.value.problems] == [
        (1, "study"),
        (2, "mounting.tilt_deg"),
        (4, "sites[0].weather"),
        (5, "sites[1].wether"),
        (5, "sites[1].name"),
        (7, "absorbers[0].gap_ev"),
        (8, "absorbers[1].name"),
        (9, "reference"),
        (10, "losses.soiling"),
        (11, "climate"),
    ]
    assert all(problem.file.endswith("study.yaml") for problem in caught.value.problems)


@pytest.mark.parametrize("pair", [("Köln", "KÖLN"), ("Straße", "STRASSE"), ("e\u0301", "\u00e9"), ("ﬁ", "fi")])
def test_names_that_differ_by_case_or_form_alone_are_one_name(loaded, minimal, pair):
    text = (
        minimal.replace("name: silicon, like: c-si", f"name: {pair[0]}, like: c-si")
        + f"  - {{name: {pair[1]}, like: cdte}}\n"
    )
    assert "again" in refused(loaded, text)["absorbers[1].name"].found


def test_a_site_without_any_mounting(loaded, minimal):
    text = minimal.replace("mounting: {kind: fixed, tilt_deg: 30, azimuth_deg: 180}\n", "")
    assert "no mounting" in refused(loaded, text)["sites[0]"].found


def test_one_file_twice_for_a_site(loaded, minimal):
    text = minimal.replace('"pvlib:723170TYA.CSV"', '["pvlib:723170TYA.CSV", "pvlib:723170TYA.CSV"]')
    assert "again" in refused(loaded, text)["sites[0].weather[1]"].found


def test_what_the_device_refuses_is_told_at_its_place(loaded, minimal):
    text = minimal.replace("like: c-si", "like: a-si, recombination_v: 0.4")
    problem = refused(loaded, text)["absorbers[0]"]
    assert "recombination_v" in problem.found
    assert problem.line == 6


@pytest.mark.parametrize(("text", "found"), [("", "nothing"), ("- a", "a list of 1"), ("7", "7")])
def test_a_study_that_is_no_mapping(loaded, text, found):
    problem = refused(loaded, text)[""]
    assert problem.found == found
    assert "study, mounting, sites" in problem.allowed


@given(strategies.broken_studies())
@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_whatever_is_wrong_is_named_and_nothing_else_happens(tmp_path, broken):
    study, named = broken
    text = json.dumps(study).replace("Infinity", ".inf").replace("NaN", ".nan")
    with pytest.raises(InputError) as caught:
        plan_of(tree.parse(text, "s.yaml"), tmp_path)
    wheres = [problem.where for problem in caught.value.problems]
    assert set(named) <= set(wheres)
    assert all(problem.line == 1 for problem in caught.value.problems)  # JSON on one line: each knows its place


SCRAPS = [
    "{",
    "}",
    "[",
    "]",
    ":",
    "- ",
    "\n",
    "  ",
    "null",
    ".nan",
    "-1",
    "'",
    "&a ",
    "*a",
    "!x ",
    "<<: ",
    "\t",
    "\0",
    "é",
    "#",
]


@given(
    edits=st.lists(st.tuples(st.integers(0, 400), st.integers(0, 8), st.sampled_from(SCRAPS)), min_size=1, max_size=4)
)
@settings(max_examples=80, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_a_study_damaged_anywhere_is_read_or_refused(tmp_path, minimal, edits):
    text = minimal
    for place, cut, scrap in edits:
        text = text[:place] + scrap + text[place + cut :]
    with contextlib.suppress(InputError):  # anything else fails the test
        assert plan_of(tree.parse(text, "s.yaml"), tmp_path).sites


# ------------------------------------------------------------------------------------- agreement with other parts


def test_formats_are_those_of_the_readers():
    assert set(site_schema.FORMATS) == set(READERS)


def test_the_reserved_site_name_is_the_sweeps_own():
    assert folded(sweep.STANDARD_SITE) in crosscheck.RESERVED
