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
    assert any("gap_ev" in key or "stack" in key for key in entry.sources)
    for source in [*entry.sources.values(), *(each.source for each in entry.published.values())]:
        assert len(source) > 10  # a reference or the words "representative, from memory"


def test_issue_2_materials_are_there():
    assert {"c-si", "cdte", "cigs", "gaas", "a-si", "perovskite-1.55", "perovskite-1.68"} <= set(library.names())


def test_no_such_entry():
    with pytest.raises(KeyError):
        library.entry("unobtainium")


def read(text):
    return library._entry("x", demand(library._File, tree.parse(text, "library/x.yaml")))


GOOD = """\
title: A film
gap_ev: {value: 1.5, source: "representative, from memory"}
eqe: {value: {300: 0.5, 700: 0.9, 826: 0.9}, source: "representative, from memory"}
heat_loss: {value: [20, 5], source: "representative, from memory"}
"""


def test_points_may_be_a_mapping_or_pairs():
    pairs = GOOD.replace("{300: 0.5, 700: 0.9, 826: 0.9}", "[[300, 0.5], [700, 0.9], [826, 0.9]]")
    first, second = (read(text).absorber for text in (GOOD, pairs))
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
        read(GOOD.replace(*change))
    assert [problem.where for problem in caught.value.problems] == [where]


STACK = """\
title: Two films
stack:
  - like: perovskite-1.68
    gap_ev: {value: 1.7, source: "representative, from memory"}
    transmits: {value: 0.1, source: "representative, from memory"}
  - gap_ev: {value: 1.2, source: "representative, from memory"}
    eqe: {value: [[300, 0.9], [1030, 0.9], [1030, 0]], source: "representative, from memory"}
terminals: {value: 4, source: "representative, from memory"}
coupling: {value: 0.5, source: "representative, from memory"}
bifaciality: {value: 0.7, source: "representative, from memory"}
"""


def test_an_entry_may_be_a_stack():
    entry = read(STACK)
    top, bottom = entry.absorber.junctions
    base = library.entry("perovskite-1.68").absorber.junctions[0]
    assert entry.absorber.gaps_ev == (1.7, 1.2)
    assert (top.transmits, top.ideality) == (0.1, base.ideality)
    assert top.response.wavelength_nm.max() < base.response.wavelength_nm.max()
    assert bottom.external_radiative_efficiency == 1
    assert (entry.absorber.terminals, entry.absorber.coupling, entry.absorber.bifaciality) == (4, 0.5, 0.7)
    assert {"stack[0].transmits", "stack[1].eqe", "coupling"} <= set(entry.sources)


@pytest.mark.parametrize(
    ("change", "where"),
    [
        (("title: Two films", "title: Two films\nideality: {value: 1, source: somewhere}"), ""),
        (("  - like: perovskite-1.68\n    gap_ev", "  - gap_ev"), "stack[0]"),
        (("like: perovskite-1.68", "like: perovskite-1.68\n    eqe: {value: [[1, 1], [2, 1]], source: x}"), "stack[0]"),
        (("coupling", "cuopling"), "cuopling"),
    ],
)
def test_what_is_wrong_in_a_stack_is_named(change, where):
    assert change[0] in STACK
    with pytest.raises(InputError) as caught:
        read(STACK.replace(*change))
    assert [problem.where for problem in caught.value.problems] == [where]
