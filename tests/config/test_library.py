"""The library's files: every entry reads, every number has a source; what is wrong in a file is named."""

import pytest

from yieldsim.config import library, tree
from yieldsim.config.explain import demand
from yieldsim.errors import InputError


@pytest.mark.parametrize("name", library.names())
def test_every_entry_reads_and_names_its_sources(name):
    entry = library.entry(name)
    assert entry.absorber.name == name
    assert entry.title
    assert {"gap_ev", "external_radiative_efficiency"} <= set(entry.sources)
    for source in [*entry.sources.values(), *(each.source for each in entry.published.values())]:
        assert len(source) > 10  # a reference or the words "representative, from memory"


def test_issue_2_materials_are_there():
    assert {"c-si", "cdte", "cigs", "gaas", "a-si", "perovskite-1.55", "perovskite-1.68"} <= set(library.names())


def test_no_such_entry():
    with pytest.raises(KeyError):
        library.entry("unobtainium")


GOOD = """\
title: A film
gap_ev: {value: 1.5, source: "representative, from memory"}
eqe: {value: {300: 0.5, 700: 0.9, 826: 0.9}, source: "representative, from memory"}
heat_loss: {value: [20, 5], source: "representative, from memory"}
"""


def test_points_may_be_a_mapping_or_pairs():
    pairs = GOOD.replace("{300: 0.5, 700: 0.9, 826: 0.9}", "[[300, 0.5], [700, 0.9], [826, 0.9]]")
    first, second = (
        library._entry("x", demand(library._File, tree.parse(text, "x"))).absorber for text in (GOOD, pairs)
    )
    assert list(first.junctions[0].response.wavelength_nm) == [300, 700, 826]
    assert list(second.junctions[0].response.quantum_efficiency) == [0.5, 0.9, 0.9]
    assert first.heat_loss == (20, 5)


@pytest.mark.parametrize(
    ("change", "where"),
    [
        ((', source: "representative, from memory"}\neqe', "}\neqe"), "gap_ev.source"),
        (("title: A film\n", ""), "title"),
        (("gap_ev: {value: 1.5", "gap_ev: {value: x"), "gap_ev.value"),
        (("heat_loss", "heat_los"), "heat_los"),
        (("[20, 5]", "[20]"), "heat_loss.value"),
    ],
)
def test_what_is_wrong_in_an_entry_is_named(change, where):
    assert change[0] in GOOD
    with pytest.raises(InputError) as caught:
        demand(library._File, tree.parse(GOOD.replace(*change), "library/x.yaml"))
    assert [problem.where for problem in caught.value.problems] == [where]
