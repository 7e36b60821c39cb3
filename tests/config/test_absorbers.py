"""Absorbers from measured responses, materials and datasheets, as a study names them."""

import hashlib
import json

import numpy as np
import pytest

from yieldsim.config import library, tree
from yieldsim.config.loader import plan_of
from yieldsim.device import datasheet
from yieldsim.device.gap import steepest_edge_ev
from yieldsim.errors import InputError
from yieldsim.study import store
from yieldsim.units import photon_energy_ev

STUDY = {
    "study": "films",
    "mounting": {"tilt_deg": 30, "azimuth_deg": 180},
    "sites": [{"name": "Greensboro", "weather": "pvlib:723170TYA.CSV"}],
}
SHEET = {"voc_v": 1.10, "ff": 0.80, "jsc_ma_cm2": 24.5}
BASE = library.entry("perovskite-1.55").absorber.junctions[0]


@pytest.fixture
def made(tmp_path):
    """Return what makes the plan of a study with the given absorbers, and proves that its resolved form is the same."""

    def make(*absorbers):
        study = STUDY | {"absorbers": list(absorbers)}
        plan = plan_of(tree.parse(json.dumps(study), "study.yaml"), tmp_path)
        again = plan_of(tree.parse(json.dumps(plan.resolved, allow_nan=False), "again"), tmp_path)
        assert store.fingerprint(again) == store.fingerprint(plan)
        return plan

    return make


@pytest.fixture
def film(tmp_path):
    """Write a response as an instrument would: per cent, falling wavelengths, a comment, a gap; return its numbers."""
    wave = np.arange(320.0, 850.0, 5.0)
    level = np.interp(wave, BASE.response.wavelength_nm, BASE.response.quantum_efficiency)
    rows = [f"{w:g};{100 * q:.3f}".replace(".", ",") for w, q in zip(wave[::-1], level[::-1], strict=True)]
    rows[3] = rows[3].split(";")[0] + ";"
    (tmp_path / "film.csv").write_text("# lamp 7\nnm;EQE %\n" + "\n".join(rows) + "\n", encoding="utf-8")
    return wave, level


def problems_of(made, *absorbers):
    with pytest.raises(InputError) as caught:
        made(*absorbers)
    return caught.value.problems


# ------------------------------------------------------------------------------------------------ measured


def test_a_measured_response_with_its_datasheet(made, film, tmp_path):
    plan = made({"name": "film", "eqe": "film.csv", "datasheet": SHEET})
    only = plan.absorbers[0].junctions[0]
    wave, level = film
    assert only.gap_ev == pytest.approx(steepest_edge_ev(wave, level), abs=0.02)  # the window the edge is smoothed over
    figures = datasheet.figures(only)
    assert figures.voc == pytest.approx(SHEET["voc_v"], rel=1e-3)  # the limit: 0.1 %
    assert figures.ff == pytest.approx(SHEET["ff"], rel=1e-3)
    assert figures.jsc == pytest.approx(10 * SHEET["jsc_ma_cm2"], rel=1e-3)
    assert plan.inputs == {"film.csv": hashlib.sha256((tmp_path / "film.csv").read_bytes()).hexdigest()}
    told = [finding for name, finding in plan.findings if name == "film"]
    for said in ("1 rows without a value", "sorted by wavelength", "per cent", "response scaled by"):
        assert any(said in finding for finding in told), said


def test_a_response_in_amperes_per_watt_is_the_same_film(made, film, tmp_path):
    wave, level = film
    rows = "\n".join(f"{w},{q / photon_energy_ev(w):.9f}" for w, q in zip(wave, level, strict=True))
    (tmp_path / "amperes.csv").write_text(rows, encoding="utf-8")
    quality = {"external_radiative_efficiency": 0.01}
    plan = made(
        {"name": "a", "response": "amperes.csv", **quality}, {"name": "b", "eqe": "film.csv", "gap_ev": 1.5, **quality}
    )
    first, second = (absorber.junctions[0] for absorber in plan.absorbers)
    at = np.linspace(400, 700, 31)
    curves = [np.interp(at, each.response.wavelength_nm, each.response.quantum_efficiency) for each in (first, second)]
    assert np.max(np.abs(curves[0] - curves[1])) < 1e-4  # the digits of the two files
    assert second.gap_ev == 1.5  # as given, over the steepest edge


def test_the_sheet_may_be_per_module(made, film):
    sheet = {"voc_v": 1.10, "ff": 0.80, "jsc_ma_cm2": 24.5 * 0.93, "area": "module"}
    plan = made(
        {"name": "cell", "eqe": "film.csv", "datasheet": SHEET},
        {"name": "module", "eqe": "film.csv", "datasheet": sheet, "area_fraction": 0.93},
    )
    cell, module = (absorber.junctions[0] for absorber in plan.absorbers)
    assert module.series_resistance_ohm_cm2 == pytest.approx(cell.series_resistance_ohm_cm2, rel=1e-6)
    assert plan.absorbers[1].area_fraction == 0.93


def test_a_library_entry_brought_to_a_sheet(made):
    plan = made({"name": "mine", "like": "c-si", "datasheet": {"voc_v": 0.70, "power_coefficient_per_k": -0.003}})
    figures = datasheet.figures(plan.absorbers[0].junctions[0])
    assert figures.voc == pytest.approx(0.70, rel=1e-3)
    assert figures.power_coefficient == pytest.approx(-0.003, rel=1e-3)


@pytest.mark.parametrize(
    ("sheet", "beside", "refused"),
    [
        ({"voc_v": 0.70}, "series_resistance_ohm_cm2", False),
        ({"ff": 0.80}, "external_radiative_efficiency", False),
        ({"ff": 0.80}, "series_resistance_ohm_cm2", True),
        ({"voc_v": 0.70, "efficiency": 0.21}, "series_resistance_ohm_cm2", True),
        ({"ff": 0.80, "efficiency": 0.21}, "external_radiative_efficiency", True),
        ({"jsc_coefficient_per_k": 5e-4}, "gap_shift_ev_per_k", True),
        ({"voc_v": 0.70}, "nonradiative_drift_per_k", False),
        ({"voc_coefficient_per_k": -0.003}, "nonradiative_drift_per_k", True),
    ],
)
def test_what_a_sheet_solves_cannot_be_given_beside_it(made, sheet, beside, refused):
    value = 5e-3 if beside == "external_radiative_efficiency" else 1e-4
    absorber = {"name": "mine", "like": "c-si", "datasheet": sheet, beside: value}
    if refused:
        assert f"`{beside}` beside a datasheet" in problems_of(made, absorber)[0].found
    else:
        assert getattr(made(absorber).absorbers[0].junctions[0], beside) == value


def test_layers_of_a_stack_may_be_measured(made, film):
    plan = made(
        {
            "name": "tandem",
            "stack": [{"eqe": "film.csv", "external_radiative_efficiency": 0.01, "transmits": 0.1}, {"like": "c-si"}],
        }
    )
    top, bottom = plan.absorbers[0].junctions
    assert top.transmits == 0.1
    assert bottom.gap_ev == library.entry("c-si").absorber.gaps_ev[0]
    assert {name for name, _ in plan.findings} == {"tandem, junction 1"}


# ------------------------------------------------------------------------------------------------ materials


def test_a_wafer_by_its_thickness(made):
    wafer = {"name": "c-si", "thickness_um": 110, "trapping": "lambertian"}
    plan = made({"name": "wafer", "material": wafer, "quality": "ideal"})
    current = datasheet.figures(plan.absorbers[0].junctions[0]).jsc / 10
    # Richter et al. 2013, IEEE J. Photovoltaics 3, 1184: 43.3 mA/cm2 at 110 um; from memory; the limit 1 %
    assert current == pytest.approx(43.3, rel=0.01)


def test_a_material_of_ones_own(made, tmp_path):
    (tmp_path / "alpha.csv").write_text("nm,alpha\n700,1e3\n300,1e5\n720,0\n", encoding="utf-8")
    mine = {"absorption": "alpha.csv", "thickness_um": 1}
    plan = made(
        {"name": "thin", "material": mine, "reflection": 0.1, "external_radiative_efficiency": 1e-3, "gap_ev": 1.75}
    )
    only = plan.absorbers[0].junctions[0]
    at_300 = np.interp(300, only.response.wavelength_nm, only.response.quantum_efficiency)
    assert at_300 == pytest.approx(0.9 * (1 - np.exp(-10)), rel=1e-9)  # 1e5 /cm over 1 um, behind 10 % reflection
    assert only.reflection == 0.1
    assert only.gap_ev == 1.75
    assert "alpha.csv" in plan.inputs


# --------------------------------------------------------------------------------------------------- refused


@pytest.mark.parametrize(
    ("fields", "where", "said"),
    [
        ({"eqe": "film.csv"}, "absorbers[0]", "without its quality"),
        ({"eqe": "film.csv", "datasheet": {"jsc_ma_cm2": 24.5}}, "absorbers[0]", "without its quality"),
        ({"eqe": "film.csv", "like": "c-si"}, "absorbers[0]", "`like` and `eqe`"),
        ({"eqe": "gone.csv", "quality": "ideal"}, "absorbers[0].eqe", "no such file"),
        ({"eqe": "pvlib:723170TYA.CSV", "quality": "ideal"}, "absorbers[0].eqe", "pvlib:"),
        ({"eqe": "film.csv", "datasheet": SHEET, "ideality": 1, "quality": "ideal"}, "absorbers[0]", "beside"),
        ({"eqe": "film.csv", "datasheet": SHEET, "series_resistance_ohm_cm2": 1}, "absorbers[0]", "solved from"),
        ({"eqe": "film.csv", "datasheet": {}}, "absorbers[0].datasheet", "without figures"),
        ({"eqe": "film.csv", "datasheet": {"voc_v": 1.1, "ff": 80}}, "absorbers[0].datasheet.ff", "80"),
        (
            {"like": "c-si", "datasheet": {"power_coefficient_per_k": -0.35}},
            "absorbers[0].datasheet.power_coefficient_per_k",
            "-0.35",
        ),
        ({"eqe": "film.csv", "datasheet": SHEET | {"ff": 0.95}}, "absorbers[0]", "above"),  # no such fill factor
        ({"eqe": "film.csv", "datasheet": SHEET | {"voc_v": 1.5}}, "absorbers[0]", "radiative limit"),
        (
            {"eqe": "film.csv", "datasheet": SHEET | {"jsc_ma_cm2": 20}},
            "absorbers[0]",
            "off what the response collects",
        ),
        ({"material": {"thickness_um": 1}, "quality": "ideal"}, "absorbers[0].material", "neither"),
        (
            {"material": {"name": "silicon", "thickness_um": 1}, "quality": "ideal"},
            "absorbers[0].material.name",
            "silicon",
        ),
        (
            {"material": {"name": "c-si", "thickness_um": -1}, "quality": "ideal"},
            "absorbers[0].material.thickness_um",
            "-1",
        ),
        (
            {"stack": [{"eqe": "film.csv", "datasheet": SHEET | {"area": "module"}}, {"like": "c-si"}]},
            "absorbers[0].stack[0]",
            "area in a stack",
        ),
    ],
)
def test_what_cannot_be_is_refused_at_its_place(made, film, fields, where, said):
    (problem,) = problems_of(made, {"name": "film", **fields})
    assert problem.where == where
    assert said in problem.found
    assert problem.line == 1


def test_text_in_a_response_is_named_by_file_and_row(made, tmp_path):
    (tmp_path / "bad.csv").write_text("nm,EQE\n300,0.1\n310,high\n320,0.2\n", encoding="utf-8")
    (problem,) = problems_of(made, {"name": "film", "eqe": "bad.csv", "quality": "ideal"})
    assert (problem.file, problem.line, problem.found) == ("bad.csv", 3, "'high'")


def test_what_every_absorber_lacks_is_told_at_once(made, film, tmp_path):
    (tmp_path / "flat.csv").write_text("\n".join(f"{w},0.5" for w in range(300, 400, 10)), encoding="utf-8")
    problems = problems_of(
        made,
        {"name": "a", "eqe": "film.csv", "datasheet": SHEET | {"voc_v": 1.5}},
        {"name": "b", "eqe": "flat.csv", "quality": "ideal"},
    )
    assert [problem.where for problem in problems] == ["absorbers[0]", "absorbers[1]"]
    assert "flat.csv: the curve ends" in problems[1].found
