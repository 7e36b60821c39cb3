"""The starter study and the JSON Schema."""

import json

import pytest
from hypothesis import given, settings

from tests import strategies
from yieldsim.cli import main
from yieldsim.config import load
from yieldsim.config.schema import NOT_YET, json_schema


def test_the_starter_loads_as_it_stands(tmp_path, capsys):
    file = tmp_path / "my first.yaml"
    assert main(["new", str(file)]) == 0
    assert str(file) in capsys.readouterr().out
    plan = load(file)
    assert plan.name == "my-first"
    assert (
        plan.sites[0].weather[0].path == "pvlib:723170TYA.CSV"
    )  # from an installed package: no file of the repository


@pytest.mark.parametrize("name", ["ü.yaml", "..yaml", "a.b.c", "x" * 120 + ".yaml"])
def test_the_starter_has_a_name_whatever_the_file_is_called(tmp_path, name):
    file = tmp_path / name
    assert main(["new", str(file)]) == 0
    assert load(file).name


def test_new_overwrites_nothing(tmp_path, capsys):
    file = tmp_path / "a.yaml"
    file.write_text("mine", encoding="utf-8")
    assert main(["new", str(file)]) == 1
    assert file.read_text(encoding="utf-8") == "mine"
    assert "a file of that name" in capsys.readouterr().err


def test_new_in_no_folder(tmp_path, capsys):
    assert main(["new", str(tmp_path / "gone" / "a.yaml")]) == 1
    assert "no such folder" in capsys.readouterr().err


def test_lines_behind_a_comment_sign_are_study_too(tmp_path):
    """What the starter offers in comments must be right once the comment sign is taken away."""
    file = tmp_path / "a.yaml"
    main(["new", str(file)])
    text = file.read_text(encoding="utf-8")
    mounting = "mounting: {kind: fixed, tilt_deg: 36, azimuth_deg: 180}"
    offered = [line for line in text.splitlines() if line.lstrip().startswith("# ") and ("{" in line or "_deg" in line)]
    assert len(offered) >= 5
    for line in offered:
        text = text.replace(line, line.replace("#   ", "", 1) if line.startswith("#   ") else line.replace("# ", "", 1))
    lines = [line for line in text.splitlines() if not line.startswith(mounting)]
    file.write_text("\n".join(lines).replace("#   mounting:", "mounting:"), encoding="utf-8")
    plan = load(file)
    assert [each.name for each in plan.sites[0].mountings] == ["flat", "steep", "tracker", "fence"]
    assert plan.sites[0].ground.surface == "grass"
    assert plan.sites[0].atmosphere.water_cm == (1.4,) * 12
    assert [absorber.name for absorber in plan.absorbers][-2:] == ["my film", "tandem"]


def test_schema_prints_json(capsys):
    assert main(["schema"]) == 0
    schema = json.loads(capsys.readouterr().out)
    assert schema == json.loads(json.dumps(json_schema()))
    assert schema["$schema"].endswith("2020-12/schema")
    assert schema["required"] == ["study", "sites", "absorbers"]
    assert not set(NOT_YET) & set(schema["properties"])


def _numbers(schema):
    if isinstance(schema, dict):
        if schema.get("type") == "number":
            yield schema
        for value in schema.values():
            yield from _numbers(value)
    elif isinstance(schema, list):
        for value in schema:
            yield from _numbers(value)


def test_every_number_of_the_schema_has_a_range():
    numbers = list(_numbers(json_schema()))
    assert len(numbers) > 30
    assert all("minimum" in number for number in numbers)


@given(study=strategies.studies())
@settings(max_examples=30, deadline=None)
def test_the_schema_takes_what_the_loader_takes(study):
    jsonschema = pytest.importorskip("jsonschema", reason="jsonschema is not installed")
    jsonschema.Draft202012Validator(json_schema()).validate(study)


def test_the_schema_refuses_slips():
    jsonschema = pytest.importorskip("jsonschema", reason="jsonschema is not installed")
    validator = jsonschema.Draft202012Validator(json_schema())
    good = {
        "study": "x",
        "mounting": {"tilt_deg": 30, "azimuth_deg": 180},
        "sites": [{"name": "a", "weather": "b.csv"}],
        "absorbers": [{"name": "c", "like": "c-si"}],
    }
    assert validator.is_valid(good)
    for wrong in (
        {"mounting": {"tilt_deg": 200, "azimuth_deg": 180}},
        {"sites": []},
        {"stdy": 1},
        {"absorbers": [{"name": "c", "like": "unobtainium"}]},
        {"losses": {"soiling": [0.1] * 11}},
        {"study": "a/b"},
    ):
        assert not validator.is_valid(good | wrong)
