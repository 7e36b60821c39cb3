"""Datasheets: the model returns the sheet, and refuses what cannot be."""

from dataclasses import replace

import numpy as np
import pytest

from yieldsim.config import library
from yieldsim.device.bank import Bank
from yieldsim.device.datasheet import Sheet, figures, solve
from yieldsim.device.junction import Junction, external_radiative_efficiency_at, standard_photocurrent
from yieldsim.device.response import scaled, step
from yieldsim.device.stack import Absorber

FILM = Junction(1.55, scaled(step(1.55), 0.93))
COLLECTED = standard_photocurrent(FILM.response)


def returned(solved, sheet):
    """Check that figures of a solved junction are those of its sheet, within a thousandth of the issue's 0.1 %."""
    made = figures(solved.junction)
    for name in ("voc_v", "ff", "efficiency", "jsc_a_m2"):
        wanted = getattr(sheet, name)
        if wanted is not None:
            assert getattr(made, name.split("_")[0]) == pytest.approx(wanted, rel=1e-6), name
    return made


@pytest.mark.parametrize(
    "sheet",
    [
        Sheet(voc_v=1.1),
        Sheet(ff=0.8),
        Sheet(voc_v=1.12, ff=0.79),
        Sheet(jsc_a_m2=1.03 * COLLECTED, voc_v=1.12, ff=0.79),
        Sheet(voc_v=1.12, efficiency=0.21),
        Sheet(ff=0.82, efficiency=0.22),
        Sheet(voc_v=1.12, ff=0.79, efficiency=0.215),
        Sheet(jsc_a_m2=250.0, voc_v=1.12, ff=0.79, efficiency=0.2212),
    ],
)
def test_the_model_returns_the_sheet(sheet):
    solved = solve(FILM, sheet)
    if sheet.jsc_a_m2 is not None and sheet.efficiency is not None:
        sheet = replace(sheet, efficiency=None)  # given twice: Jsc, Voc and FF count
    returned(solved, sheet)
    assert (solved.current_factor == 1.0) == (sheet.jsc_a_m2 is None and "current" not in str(solved.findings))


def test_the_bank_agrees():
    solved = solve(FILM, Sheet(jsc_a_m2=260.0, voc_v=1.1, ff=0.78, power_coefficient=-2.1e-3))
    standard = Bank.of([Absorber("film", (solved.junction,))]).standard()
    # the bank interpolates saturation currents: 3e-6 of them, 1e-7 V
    assert standard.open_circuit[0] == pytest.approx(1.1, rel=1e-6)
    assert standard.fill_factor[0] == pytest.approx(0.78, rel=1e-6)
    assert standard.power_temperature_coefficient[0] == pytest.approx(-2.1e-3, rel=1e-3)  # the limit


def test_temperature_coefficients():
    sheet = Sheet(voc_v=1.1, ff=0.8, jsc_coefficient=-3e-4, voc_coefficient=-1.5e-3, power_coefficient=-2e-3)
    solved = solve(FILM, sheet)
    made = figures(solved.junction)
    assert made.jsc_coefficient == pytest.approx(-3e-4, rel=1e-6)
    assert made.power_coefficient == pytest.approx(-2e-3, rel=1e-6)
    assert solved.junction.gap_shift_ev_per_k > 0  # the current falls when hot: the gap widens
    assert any(finding.startswith("voc_coefficient: sheet -0.150%/K, model") for finding in solved.findings)
    by_voltage = figures(solve(FILM, Sheet(voc_v=1.1, voc_coefficient=-1.5e-3)).junction)
    assert by_voltage.voc_coefficient == pytest.approx(-1.5e-3, rel=1e-6)


def test_non_radiative_loss_that_grows_with_heat():
    junction = replace(FILM, external_radiative_efficiency=0.5, nonradiative_drift_per_k=0.05)
    efficiency = external_radiative_efficiency_at(junction, np.array([248.15, 298.15, 348.15]))
    assert efficiency[1] == pytest.approx(0.5, rel=1e-12)
    assert 0 < efficiency[2] < 0.1
    assert 0.9 < efficiency[0] < 1.0  # never above one
    assert figures(junction).voc_coefficient < figures(replace(junction, nonradiative_drift_per_k=0.0)).voc_coefficient
    perfect = replace(FILM, nonradiative_drift_per_k=0.05)
    assert external_radiative_efficiency_at(perfect, 348.15) == 1.0


@pytest.mark.parametrize("area", ["aperture", "module"])
def test_figures_of_a_larger_area_are_brought_to_the_cell(area):
    solved = solve(FILM, Sheet(jsc_a_m2=0.9 * COLLECTED, voc_v=1.1, efficiency=0.2, area=area), area_fraction=0.9)
    made = figures(solved.junction)
    assert made.jsc == pytest.approx(COLLECTED, rel=1e-6)
    assert made.efficiency == pytest.approx(0.2 / 0.9, rel=1e-6)


@pytest.mark.parametrize(
    ("sheet", "words"),
    [
        (Sheet(voc_v=1.4), r"radiative limit of this response, 1\.2"),
        (Sheet(voc_v=1.1, ff=0.95), r"FF of 0\.95 is above 0\.8"),
        (Sheet(ff=1.2), r"ff is 1\.2; it must lie in"),
        (Sheet(voc_v=-1.0, ff=float("nan")), r"voc_v is -1.*ff is nan"),
        (Sheet(jsc_a_m2=1.07 * COLLECTED), r"\+7\.0% off what the response collects; at most 5%"),
        (Sheet(jsc_a_m2=0.93 * COLLECTED), r"-7\.0% off"),
        (Sheet(jsc_a_m2=28.6), "off what the response collects"),  # mA/cm2 taken for A/m2
        (Sheet(efficiency=0.2), "alone does not tell"),
        (Sheet(voc_v=1.1, ff=0.8, jsc_a_m2=250.0, efficiency=0.3), "must agree within 0.5%"),
        (Sheet(voc_v=1.1, efficiency=0.35), "fill factor of 1"),
        (Sheet(voc_v=0.06), "too low for any external radiative efficiency"),
        (Sheet(voc_v=1.1, power_coefficient=-0.015), "power_coefficient of -1.500%/K is out of reach"),
        (Sheet(jsc_coefficient=0.008), "jsc_coefficient of 0.800%/K is out of reach"),
    ],
)
def test_a_sheet_that_cannot_be_is_refused_with_its_limit(sheet, words):
    with pytest.raises(ValueError, match=words):
        solve(FILM, sheet)


def test_a_response_cannot_rise_above_one():
    with pytest.raises(ValueError, match=r"would have to rise to 1\.0"):
        solve(Junction(1.55, step(1.55)), Sheet(jsc_a_m2=1.02 * standard_photocurrent(step(1.55))))


@pytest.mark.parametrize("name", library.names())
def test_every_library_junction_is_found_back_from_its_own_figures(name):
    junction = library.entry(name).absorber.junctions[0]
    made = figures(junction)
    start = replace(junction, external_radiative_efficiency=1.0, series_resistance_ohm_cm2=0.0)
    solved = solve(start, Sheet(jsc_a_m2=made.jsc, voc_v=made.voc, ff=made.ff)).junction
    assert solved.external_radiative_efficiency == pytest.approx(junction.external_radiative_efficiency, rel=1e-4)
    assert solved.series_resistance_ohm_cm2 == pytest.approx(junction.series_resistance_ohm_cm2, rel=1e-4)
