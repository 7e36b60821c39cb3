import dataclasses
import json
import re
from html.parser import HTMLParser

import numpy as np
import pytest

from yieldsim.report import answer, page
from yieldsim.report import payload as payload_module
from yieldsim.report.payload import payload

HOSTILE = [
    "<script>alert(1)</script>", "\"'><img src=x onerror=alert(1)>", "</script><b>", "{{ 7*7 }}", "🌞 sun & moon",
    "مرحبا", "x" * 200, "<!-- a", "${alert(1)}",
]  # fmt: skip


class _Reader(HTMLParser):
    """Collects elements, their text, and scripts, as a browser would take them apart."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.tags, self.texts, self.attributes = [], [], []
        self._in_script = False
        self.feed(text)

    def handle_starttag(self, tag, attributes):
        self.tags.append(tag)
        self.attributes += [(tag, name, value) for name, value in attributes]
        self._in_script = tag in ("script", "style")

    def handle_endtag(self, tag):
        self._in_script = False

    def handle_data(self, data):
        if not self._in_script:
            self.texts.append(data)


@pytest.fixture(scope="module")
def html(full):
    return page.render(full)


def test_the_page_asks_nothing_of_a_network(html):
    read = _Reader(html)
    assert not {"link", "img", "iframe", "object"} & (set(read.tags) - {"link"})
    for tag, name, value in read.attributes:
        if name in ("src", "href", "action", "data"):
            assert not re.match(r"(https?:)?//", value or ""), (tag, name, value)
    assert "@import" not in html
    assert "url(" not in re.search(r"<style>(.*?)</style>", html, re.DOTALL)[1]


def test_the_page_stays_small(html):
    assert len(html.encode()) < 6e6  # the bound for the shipped study, which has these dimensions


def test_the_same_result_gives_the_same_page(full, html):
    assert page.render(full) == html


def test_the_order_is_the_reader_s(html):
    found = re.findall(r'<section id="(\w+)"', html)
    assert found == ["answer", "glance", "place", "gaps", "chance", "data", "method", "limits"]


def test_parts_that_a_result_lacks_do_not_appear(study):
    found = page.render(study)
    for id_ in ("ledger", "gap_pairs", "chance", "chance-range", "duel", "worth-chart"):
        assert f'id="{id_}"' not in found, id_
    assert "ledger.csv" not in found
    bare = dataclasses.replace(study, monthly=None, gap_sweep=None, spectra={}, responses=None, by_hour=None)
    found = page.render(bare)
    for id_ in ("monthly", "gaps", "hours", "spectrum"):
        assert f'id="{id_}"' not in found, id_


def test_every_chart_has_a_table_and_a_file_beside_it(html, full):
    figures = re.findall(r'<figure class="chart".*?</figure>', html, re.DOTALL)
    assert len(figures) == 15
    files = {name for name, _ in full.tables()} | {"spectra/"}
    for figure in figures:
        assert "<summary>" in figure
        assert re.search(r'<a href="([^"]+)"', figure)[1] in files


def test_the_answer_s_sentences_are_on_the_page(html, full):
    texts = "".join(_Reader(html).texts)
    said = answer.answer(full)
    for sentence in (said.winner, said.certainty, said.ranking):
        assert sentence in texts


def test_the_table_at_a_glance_holds_the_numbers_of_the_result(html, full):
    table = re.search(r'<table class="glance".*?</table>', html, re.DOTALL)[0]
    cells = re.findall(r"<td[^>]*><b>([^<]*)</b>", table)
    wanted = []
    for name in full.standard["absorber"]:
        own = full.annual[full.annual["absorber"] == name]
        wanted += [f"{100 * own['stc_efficiency'].iloc[0]:.2f} %", *(f"{value:,.1f}" for value in own["energy_kwh_m2"])]
    assert cells == wanted


def test_hostile_names_are_text_and_nothing_else(factory):
    made = factory.make(HOSTILE, {name: 1.0 + 0.1 * i for i, name in enumerate(HOSTILE)}, full=True)
    made = dataclasses.replace(made, study=HOSTILE[0])
    plain = factory.make(
        [f"s{i}" for i in range(len(HOSTILE))], {f"a{i}": 1.0 + 0.1 * i for i in range(len(HOSTILE))}, full=True
    )
    hostile, tame = _Reader(page.render(made)), _Reader(page.render(plain))
    assert hostile.tags == tame.tags
    assert [entry[:2] for entry in hostile.attributes] == [entry[:2] for entry in tame.attributes]
    texts = "".join(hostile.texts)
    for name in HOSTILE:
        assert name in texts


def test_a_site_says_where_it_lies_and_what_its_weather_says_of_itself(html):
    texts = " ".join("".join(_Reader(html).texts).split())
    assert "40.00° N, 15.00° E, 100 m. made_up.csv. Invented, for tests." in texts


def test_no_text_ends_the_script_that_holds_the_data():
    text = page.script_json({"a": "</script><!--", "b": "\u2028&"})
    assert not re.search("[<>&\u2028]", text)
    assert json.loads(text) == {"a": "</script><!--", "b": "\u2028&"}


def test_pairs_of_today_and_films_are_those_of_the_tables(full):
    tree = payload(full)
    table = full.gap_pair_materials
    for pairs in tree["gap_pairs"]:
        assert [each["name"] for each in pairs["materials"]] == list(dict.fromkeys(table["material"]))
    assert tree["gap_pairs"][0]["materials"][0]["behind_best"] == pytest.approx(table["behind_best"].iloc[0], rel=1e-6)
    films = tree["generation"]
    assert len(films) == len(full.generation.groupby(["absorber", "junction"]))
    assert {film["junctions"] for film in films} == {2}
    assert sum(len(film["depth_um"]) for film in films) == len(full.generation)


def test_the_charts_numbers_are_those_of_the_tables(full):
    tree = payload(full)
    assert json.loads(json.dumps(tree, allow_nan=False)) == tree
    first = full.annual[(full.annual["site"] == tree["places"][1]["site"])].set_index("absorber")
    for a, absorber in enumerate(tree["absorbers"]):
        for key in ("energy_kwh_m2", "spectral_factor"):
            # 7 significant digits are kept
            assert tree["annual"][key][1][a] == pytest.approx(first.loc[absorber["name"], key], rel=1e-6)
    hours = np.array(tree["by_hour"][1]).sum(axis=1)
    # 288 numbers of 5 digits each
    np.testing.assert_allclose(
        hours, first.loc[[a["name"] for a in tree["absorbers"]], "specific_yield_kwh_kwp"], rtol=1e-4
    )


def test_a_study_of_many_places_keeps_its_page_bounded(factory):
    most = payload_module.MOST_PLACES
    made = factory.make([f"site {i}" for i in range(most + 5)], {"a": 1.1, "b": 1.5}, full=True)
    tree = payload(made)
    assert len(tree["places"]) == len(tree["by_hour"]) == most
    assert {curve["place"] for curve in tree["gap_sweep"]} == {-1, *range(most)}
    assert max(row["place"] for row in tree["worth"]) == most - 1
    assert sum(len(day["hours"]) for one in tree["spectra"] for day in one["days"]) <= payload_module.MOST_SPECTRA
    assert f"the first {most} of {most + 5} places" in page.render(made)


def test_packed_spectra_come_apart_to_the_light_on_the_plane(full):
    import base64

    tree = payload(full)
    dataset = full.spectra[tree["places"][0]["site"]]
    at = 0
    for day in tree["spectra"][0]["days"]:
        for scale, text in day["light"]:
            light = np.frombuffer(base64.b64decode(text), "<u2") * scale
            truth = dataset["plane_of_array"].values[0, at]
            # half a step of 1/65535 of the brightest band, and the rounding of the scale
            assert np.abs(light - truth).max() <= 0.51 * truth.max() / 65535
            at += 1
    assert at == dataset.sizes["time"]


def test_a_month_without_light_leaves_a_gap_and_no_error(study):
    dark = study.monthly.copy()
    dark.loc[dark["month"] == 12, ["spectral_factor", "performance_ratio"]] = np.nan
    tree = payload(dataclasses.replace(study, monthly=dark))
    assert tree["monthly"]["spectral_factor"][0][0][11] is None
    json.dumps(tree, allow_nan=False)


def test_page_s_palette_is_that_of_the_pictures():
    from yieldsim.report.marks import COLOURS, DASHES

    script = page._asset("page.js")
    assert f"number % {len(COLOURS)}" in script
    assert len(re.search(r"const DASHES = \[(.*?)\];", script)[1].split(",")) == len(DASHES)


def test_the_libraries_carry_their_licence():
    for name in ("d3.min.js", "plot.min.js"):
        assert "Permission to use, copy, modify, and/or distribute" in page._asset(name)[:1500]
