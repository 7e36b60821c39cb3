"""Every entry of the library against what is published of its kind."""

import pytest

from yieldsim.config import library
from yieldsim.constants import STANDARD_IRRADIANCE
from yieldsim.device.bank import Bank


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


@pytest.mark.parametrize("name", library.names())
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
