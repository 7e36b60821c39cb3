"""The ledger: exhaustive, and each fate in its place."""

import numpy as np
import pytest

from yieldsim import spectrum
from yieldsim.config import library
from yieldsim.device import account
from yieldsim.device.junction import Junction
from yieldsim.device.response import step
from yieldsim.device.stack import Absorber
from yieldsim.study import hourly, ledger
from yieldsim.study.plan import LossesPlan

NAMES = ("site", "mounting", "absorber")


@pytest.fixture(scope="module")
def rows(greensboro):
    paid = hourly.light_paid(greensboro.plane, greensboro.absorbers, greensboro.sky.month)
    losses = LossesPlan({"soiling": (0.02,) * 12, "wiring": (0.015,) * 12})
    return ledger.ledger_rows("here", "fixed", greensboro.absorbers, paid, losses, 3600)


def test_sums_to_the_light(rows, greensboro):
    """Invariant: every kWh on the cell plane is in exactly one fate, to 1e-9."""
    light = greensboro.plane.plane_of_array.sum() / 1000
    for row in rows:
        total = sum(value for name, value in row.items() if name not in NAMES)
        assert total == pytest.approx(light, rel=1e-9)


def test_delivered_is_the_year_s_energy(rows, greensboro):
    for row, delivered in zip(rows, greensboro.sums.year().delivered[:, 0], strict=True):
        assert row["delivered"] == pytest.approx(delivered / 1000, rel=1e-9)


def test_no_fate_gives_energy_back(rows):
    """Nothing but mismatch may be negative, and that is zero for one junction (to rounding of sums)."""
    for row in rows:
        assert all(value > -1e-9 for name, value in row.items() if name not in NAMES)
        assert row["mismatch"] == pytest.approx(0.0, abs=1e-9)


def test_wider_gaps_leave_more_below_and_less_heat(rows):
    by_name = {row["absorber"]: row for row in rows}
    assert by_name["a-si"]["below_gap"] > by_name["cdte"]["below_gap"] > by_name["c-si"]["below_gap"]
    assert by_name["a-si"]["thermalised"] < by_name["cdte"]["thermalised"] < by_name["c-si"]["thermalised"]


def test_losses_are_taken_in_order(rows):
    for row in rows:
        before = row["delivered"] + row["wiring"] + row["soiling"]
        assert row["soiling"] == pytest.approx(0.02 * before, rel=1e-9)
        assert row["wiring"] == pytest.approx(0.015 * 0.98 * before, rel=1e-9)


def test_shares_of_an_ideal_step():
    """Closed form: a step collects every photon above its gap and none below; the standard splits accordingly."""
    shares = account.front_shares(Absorber("x", (Junction(1.34, step(1.34)),)))
    np.testing.assert_allclose(shares.below + shares.missed + shares.collected, 1.0, rtol=1e-12)
    np.testing.assert_allclose(shares.missed, 0.0, atol=1e-12)
    light = spectrum.reference_bands()
    # Below 1.34 eV (925.3 nm) ASTM G173-03 holds 31.5 % of its energy: the trapezoid sum of the standard's own table.
    from yieldsim import reference
    from yieldsim.units import wavelength_nm

    table = reference.table("astm_g173_03")
    fine = np.unique(np.append(table["wavelength_nm"], wavelength_nm(1.34)))
    red = fine >= wavelength_nm(1.34)
    values = np.interp(fine, table["wavelength_nm"], table["global"])
    assert light @ shares.below == pytest.approx(np.trapezoid(values[red], fine[red]), rel=1e-6)


def test_ideal_cell_loses_nothing_but_what_physics_takes(greensboro):
    """An ideal step at the radiative limit: nothing uncollected, no non-radiative loss, no resistance."""
    ideal = (Absorber("ideal", (Junction(1.34, step(1.34)),)),)
    year = hourly.plane_year(greensboro.sky, greensboro.plane.mounting, greensboro.parts, ideal)
    paid = hourly.light_paid(year, ideal, greensboro.sky.month)
    row = ledger.ledger_rows("here", "fixed", ideal, paid, LossesPlan(), 3600)[0]
    for fate in ("uncollected", "nonradiative_voltage", "resistance", "mismatch"):
        assert row[fate] == pytest.approx(0.0, abs=1e-3)  # kWh/m2 of 1700: the saturation current's table, 3e-6


def test_stacks_and_rear_light_close_too(greensboro):
    """Invariant for a series stack lit from both sides."""
    top = Junction(1.68, step(1.68), external_radiative_efficiency=1e-3)
    bottom = library.entry("c-si").absorber.junctions[0]
    stack = (Absorber("stack", (top, bottom), bifaciality=0.7),)
    year = hourly.plane_year(greensboro.sky, greensboro.plane.mounting, greensboro.parts, stack)
    paid = hourly.light_paid(year, stack, greensboro.sky.month)
    row = ledger.ledger_rows("here", "fixed", stack, paid, LossesPlan(), 3600)[0]
    total = sum(value for name, value in row.items() if name not in NAMES)
    assert total == pytest.approx(paid.incident[0] / 1000, rel=1e-9)
    assert row["mismatch"] > 0
