"""Every entry of the library against what is published of its kind."""

import pytest

from yieldsim.config import library
from yieldsim.constants import STANDARD_IRRADIANCE
from yieldsim.device.bank import Bank
from yieldsim.device.stack import Absorber


@pytest.fixture(scope="module")
def standards():
    entries = [library.entry(name) for name in library.names()]
    return dict(zip(library.names(), zip(entries, _rows(entries), strict=True), strict=True))


def _rows(entries):
    standard = Bank.of([entry.absorber for entry in entries]).standard()
    return list(zip(standard.terminal_power, standard.power_temperature_coefficient, strict=True))


@pytest.mark.parametrize("name", library.names())
def test_efficiency_within_5_percent_of_published(name, standards):
    entry, (power, _) = standards[name]
    efficiency = power / STANDARD_IRRADIANCE
    published = entry.published
    assert ("efficiency" in published) != ("module_efficiency" in published)
    if "module_efficiency" in published:
        efficiency, value = efficiency * entry.absorber.area_fraction, published["module_efficiency"].value
    else:
        value = published["efficiency"].value
    assert efficiency == pytest.approx(value, rel=0.05)  # the limit


# the issue asks it of these; of stacks no datasheet is known to cite
DATASHEETS = [name for name in library.names() if len(library.entry(name).absorber.junctions) == 1]


@pytest.mark.parametrize("name", DATASHEETS)
def test_temperature_coefficient_near_a_typical_datasheet(name, standards):
    entry, (_, coefficient) = standards[name]
    published = entry.published["power_temperature_coefficient_per_k"].value
    assert coefficient == pytest.approx(published, abs=5e-4)  # the limit: 0.05 %/K


# common practice, no source: ranges of the power temperature coefficient [%/K]
@pytest.mark.parametrize(
    ("name", "low", "high"),
    [("c-si", -0.45, -0.25), ("cdte", -0.36, -0.15), ("perovskite-1.55", -0.25, -0.05)],
)
def test_temperature_coefficient_in_the_usual_range(name, low, high, standards):
    assert low < standards[name][1][1] * 100 < high


@pytest.mark.parametrize("name", library.names())
def test_every_value_names_its_source(name, standards):
    entry = standards[name][0]
    for field, source in entry.sources.items():
        assert len(source) > 10, field
    for figure in entry.published.values():
        assert len(figure.source) > 10


def test_the_library_is_whole():
    assert set(library.names()) == {
        "a-si", "c-si", "c-si-heterojunction", "cdte", "cigs", "gaas", "gainp-gaas-2t", "gainp-gaas-gainas-2t",
        "perovskite-1.55", "perovskite-1.68", "perovskite-perovskite-2t", "perovskite-si-2t", "perovskite-si-4t",
    }  # fmt: skip
    sizes = [len(library.entry(name).absorber.junctions) for name in library.names()]
    assert max(sizes) == 3
    assert library.entry("perovskite-si-4t").absorber.terminals == 4


def test_stacks_beat_their_bottom_alone_and_are_near_matched():
    for name in library.names():
        absorber = library.entry(name).absorber
        if len(absorber.junctions) == 1:
            continue
        bottom = Absorber("bottom", absorber.junctions[-1:])
        standard = Bank.of([absorber, bottom]).standard()
        assert standard.efficiency[0] > standard.efficiency[1]
        currents = standard.photocurrent[:-1]
        if absorber.terminals == 2:
            assert currents.max() < 1.2 * currents.min()
