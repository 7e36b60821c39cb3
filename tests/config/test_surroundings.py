"""Mountings, grounds and skylines of a study file: forms, defaults, and what is refused with its place."""

import json

import pytest

from yieldsim.config import schema
from yieldsim.config.mounting_schema import KINDS
from yieldsim.errors import InputError
from yieldsim.sky.horizon import Horizon
from yieldsim.study.plan import GroundPlan, MountingPlan

FIXED = "{kind: fixed, tilt_deg: 30, azimuth_deg: 180}"


def refused(loaded, study):
    with pytest.raises(InputError) as caught:
        loaded(study)
    return list(caught.value.problems)


def only(plan):
    return plan.sites[0].mountings[0]


@pytest.mark.parametrize(
    ("text", "plan"),
    [
        ("{tilt_deg: 20, azimuth_deg: 170}", MountingPlan("fixed", "fixed", 20.0, 170.0)),
        (
            "{kind: tracker, row_pitch_m: 6}",
            MountingPlan("tracker", "tracker", axis_azimuth_deg=180.0, max_angle_deg=60.0, row_pitch_m=6.0),
        ),
        (
            "{kind: tracker, axis_azimuth_deg: 10, axis_tilt_deg: 5, max_angle_deg: 50, backtrack: false}",
            MountingPlan(
                "tracker", "tracker", axis_azimuth_deg=10.0, axis_tilt_deg=5.0, max_angle_deg=50.0, backtrack=False
            ),
        ),
        (
            "{kind: vertical, azimuth_deg: 90, row_pitch_m: 9, row_width_m: 1.8, height_m: 1.4}",
            MountingPlan("vertical", "vertical", 90.0, 90.0, row_pitch_m=9.0, row_width_m=1.8, height_m=1.4),
        ),
        (
            "{kind: roof, tilt_deg: 35, azimuth_deg: 200, sky_model: perez}",
            MountingPlan("roof", "roof", 35.0, 200.0, sky_model="perez"),
        ),
    ],
)
def test_each_kind(loaded, minimal, text, plan):
    assert only(loaded(minimal.replace(FIXED, text))) == plan


def test_several_kinds_in_one_study(loaded, minimal):
    several = f"{{plane: {FIXED}, turning: {{kind: tracker}}, fence: {{kind: vertical, azimuth_deg: 90}}}}"
    found = loaded(minimal.replace(FIXED, several)).sites[0].mountings
    assert [(each.name, each.kind) for each in found] == [
        ("plane", "fixed"), ("turning", "tracker"), ("fence", "vertical"),
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("text", "where", "found", "allowed"),
    [
        ("{kind: trackr, row_pitch_m: 6}", "mounting.kind", "'trackr'", "did you mean `tracker`?"),
        ("{kind: 7, tilt_deg: 1, azimuth_deg: 1}", "mounting.kind", "7", "fixed | tracker | vertical | roof"),
        ("{kind: tracker, tilt_deg: 20}", "mounting.tilt_deg", "unknown key `tilt_deg`", ""),
        ("{kind: vertical, azimuth_deg: 90, tilt_deg: 90}", "mounting.tilt_deg", "unknown key `tilt_deg`", ""),
        ("{kind: roof, tilt_deg: 9, azimuth_deg: 9, row_pitch_m: 3}", "mounting.row_pitch_m", "unknown key", ""),
        ("{kind: vertical}", "mounting.azimuth_deg", "no key `azimuth_deg`", "deg clockwise from north"),
        ("{kind: tracker, row_pitch_m: 1.5}", "mounting", "row_pitch_m 1.5", "at least row_width_m, 2"),
        ("{kind: tracker, row_width_m: 5, row_pitch_m: 9}", "mounting", "height_m 1.5", "at least 2.17"),
        ("{kind: vertical, azimuth_deg: 0, height_m: 0.9}", "mounting", "height_m 0.9", "clear the ground"),
        ("{kind: tracker, backtrack: 1}", "mounting.backtrack", "1", "true | false"),
        ("{kind: tracker, sky_model: hay}", "mounting.sky_model", "'hay'", "hay-davies | perez | radiance"),
        ("{kind: tracker, max_angle_deg: 100}", "mounting.max_angle_deg", "100", "from 0 to 90"),
    ],
)
def test_what_cannot_stand(loaded, minimal, text, where, found, allowed):
    problem = refused(loaded, minimal.replace(FIXED, text))[0]
    assert problem.where == where
    assert found in problem.found
    assert allowed in problem.allowed


def test_the_schema_for_editors_knows_every_kind():
    text = json.dumps(schema.json_schema())
    for kind in KINDS:
        assert f'{{"const": "{kind}"' in text or f'"const": "{kind}"' in text


class TestGround:
    def plan(self, loaded, minimal, text):
        return (
            loaded(minimal.replace("723170TYA.CSV", f'723170TYA.CSV", ground: {text}, timestamps: "start'))
            .sites[0]
            .ground
        )

    def test_forms(self, loaded, minimal):
        assert self.plan(loaded, minimal, "grass") == GroundPlan(None, "grass")
        assert self.plan(loaded, minimal, "{albedo: 0.25}") == GroundPlan(0.25)
        assert self.plan(loaded, minimal, "{surface: dry-soil, albedo: 0.3}") == GroundPlan(0.3, "dry-soil")
        assert self.plan(loaded, minimal, "{}") == GroundPlan()

    def test_a_measured_surface(self, loaded, minimal, tmp_path):
        """Sorted by wavelength; micrometres and percent are understood."""
        (tmp_path / "roof.csv").write_text("wavelength um,albedo %\n1.1,30\n0.4,5\n0.7,12.5\n", encoding="utf-8")
        plan = self.plan(loaded, minimal, "roof.csv")
        assert plan.surface == "roof.csv"
        assert plan.spectrum[0] == pytest.approx((400.0, 700.0, 1100.0), rel=1e-12)
        assert plan.spectrum[1] == pytest.approx((0.05, 0.125, 0.3), rel=1e-12)

    def test_its_file_is_fingerprinted(self, loaded, minimal, tmp_path):
        (tmp_path / "roof.csv").write_text("400,0.1\n900,0.2\n", encoding="utf-8")
        study = minimal.replace("723170TYA.CSV", '723170TYA.CSV", ground: roof.csv, timestamps: "start')
        assert set(loaded(study).inputs) >= {"roof.csv"}

    @pytest.mark.parametrize(
        ("text", "found", "allowed"),
        [
            ("gras", "'gras'", "did you mean `grass`?"),
            ("dry_soil", "'dry_soil'", "dry-soil"),
            ("gone.csv", "no such file", "looked for"),
        ],
    )
    def test_no_such_surface(self, loaded, minimal, text, found, allowed):
        study = minimal.replace("723170TYA.CSV", f'723170TYA.CSV", ground: {text}, timestamps: "start')
        problem = refused(loaded, study)[0]
        assert problem.where == "sites[0].ground"
        assert found in problem.found
        assert allowed in problem.allowed

    def test_every_bad_row_of_a_file_is_told(self, loaded, minimal, tmp_path):
        (tmp_path / "bad.csv").write_text("nm,albedo\n900,1.2\n400,0.1\n700,-3\n", encoding="utf-8")
        study = minimal.replace("723170TYA.CSV", '723170TYA.CSV", ground: bad.csv, timestamps: "start')
        assert [(p.file, p.line, p.found) for p in refused(loaded, study)] == [
            ("bad.csv", 2, "1.2"), ("bad.csv", 4, "-3"),
        ]  # fmt: skip


class TestHorizon:
    def study(self, minimal, tmp_path, text):
        (tmp_path / "hills.csv").write_text(text, encoding="utf-8")
        return minimal.replace("723170TYA.CSV", '723170TYA.CSV", horizon: hills.csv, timestamps: "start')

    def test_sorted_and_clipped(self, loaded, minimal, tmp_path):
        study = self.study(minimal, tmp_path, "azimuth;elevation\n180;12,5\n90;-2\n270;3\n")
        assert loaded(study).sites[0].horizon == Horizon((90.0, 180.0, 270.0), (0.0, 12.5, 3.0))

    def test_north_twice(self, loaded, minimal, tmp_path):
        study = self.study(minimal, tmp_path, "0,4\n180,1\n360,4\n")
        assert loaded(study).sites[0].horizon == Horizon((0.0, 180.0), (4.0, 1.0))
        study = self.study(minimal, tmp_path, "90,4\n360,7\n")
        assert loaded(study).sites[0].horizon == Horizon((0.0, 90.0), (7.0, 4.0))

    def test_without(self, loaded, minimal):
        assert loaded(minimal).sites[0].horizon is None

    @pytest.mark.parametrize(
        ("text", "line", "where"),
        [("10,5\n-10,5\n", 2, "azimuth"), ("0,5\n20,95\n", 2, "elevation"), ("5,1\n7,2\n5,3\n", 3, "azimuth")],
    )
    def test_no_skyline(self, loaded, minimal, tmp_path, text, line, where):
        problem = refused(loaded, self.study(minimal, tmp_path, text))[0]
        assert (problem.file, problem.line, problem.where) == ("hills.csv", line, where)


def test_dust_has_a_colour(loaded, minimal):
    plan = loaded(minimal + "losses: {soiling: 0.03, soiling_exponent: 0.8}\n")
    assert plan.losses.soiling_exponent == 0.8
    assert set(plan.losses.monthly) == {"soiling"}
    assert plan.resolved["losses"]["soiling_exponent"] == 0.8
