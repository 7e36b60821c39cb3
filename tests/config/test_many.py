"""Sites by the hundred: tables and grids written out as sites, and what is wrong with them, row by row."""

import json

import pytest

from yieldsim.config import load, tree
from yieldsim.config.loader import plan_of
from yieldsim.config.many import Cell
from yieldsim.config.schema import json_schema
from yieldsim.errors import InputError

REST = """
mounting: {tilt_deg: 30, azimuth_deg: 180}
absorbers: [{name: silicon, like: c-si}]
"""
CELLS = [Cell(i, j, 40.0 + 0.5 * i, 8.0 + 0.5 * j, 100.0 * i) for i in range(3) for j in range(2)]


@pytest.fixture
def study(tmp_path):
    def make(sites, table=None, name="sites.csv", cells=CELLS):
        if table is not None:
            (tmp_path / name).write_text(table, encoding="utf-8")
        (tmp_path / "grid.nc").write_bytes(b"stands for a grid")
        path = tmp_path / "study.yaml"
        path.write_text(f"study: many\nsites: {sites}\n{REST}", encoding="utf-8")
        return load(path, lambda _path, _shown: cells)

    return make


def problems_of(make, *args, **more):
    with pytest.raises(InputError) as caught:
        make(*args, **more)
    return caught.value.problems


def test_a_row_is_a_site(study):
    table = """# invented
name,weather,latitude_deg,longitude_deg,elevation_m,aod500,ground,allow_gaps
One,pvlib:723170TYA.CSV,,,,0.1,grass,
Two,pvlib:703165TY.csv,55.3,-160.5,7,,,true
"""
    plan = study("{table: sites.csv, atmosphere: {water_cm: 1.5, aod500: 0.3}}", table)
    one, two = plan.sites
    assert (one.name, one.weather[0].shown, one.ground.surface) == ("One", "pvlib:723170TYA.CSV", "grass")
    assert (one.atmosphere.aod500[0], one.atmosphere.water_cm[0]) == (0.1, 1.5)
    assert (two.latitude_deg, two.elevation_m, two.allow_gaps, two.atmosphere.aod500[0]) == (55.3, 7.0, True, 0.3)
    assert "monthly" in plan.keep


def test_rows_on_a_grid_take_the_nearest_cell(study):
    plan = study("{table: sites.csv, grid: grid.nc}", "name;latitude_deg;longitude_deg\nHere;40.6;8.4\nThere;41;8\n")
    assert [site.weather[0].cell for site in plan.sites] == [(1, 1), (2, 0)]
    assert [site.elevation_m for site in plan.sites] == [100.0, 200.0]
    assert plan.sites[0].latitude_deg == 40.6


def test_a_grid_is_its_cells(study):
    plan = study("{grid: grid.nc}")
    assert [site.name for site in plan.sites][:2] == ["40N 8E", "40N 8.5E"]
    assert [site.weather[0].cell for site in plan.sites] == [(cell.row, cell.column) for cell in CELLS]
    assert plan.keep == frozenset({"annual"})  # unless told otherwise


def test_resolved_reads_again(study, tmp_path):
    plan = study("{grid: grid.nc}")
    again = plan_of(tree.parse(json.dumps(plan.resolved), "again"), tmp_path)
    assert again.sites == plan.sites
    assert again.keep == plan.keep


def test_every_wrong_row_is_named_with_its_line(study):
    table = "name,weather,tilt\nOne,pvlib:723170TYA.CSV,3\n"
    (problem,) = problems_of(study, "{table: sites.csv}", table)
    assert (problem.file, problem.line, problem.where) == ("sites.csv", 1, "tilt")
    table = """name,weather,latitude_deg,allow_gaps
One,pvlib:723170TYA.CSV,north,
Two,pvlib:723170TYA.CSV,,maybe
Three,pvlib:723170TYA.CSV,40,,5
"""
    found = problems_of(study, "{table: sites.csv}", table)
    assert [(problem.file, problem.line, problem.where) for problem in found] == [
        ("sites.csv", 2, "latitude_deg"), ("sites.csv", 3, "allow_gaps"), ("sites.csv", 4, ""),
    ]  # fmt: skip


def test_what_a_site_refuses_is_told_of_the_row(study):
    table = "name,weather,latitude_deg\n\n# a remark\nOne,pvlib:723170TYA.CSV,95\nOne,nowhere.csv,40\n"
    found = problems_of(study, "{table: sites.csv}", table)
    assert {(problem.file, problem.line) for problem in found} == {("sites.csv", 4), ("sites.csv", 5)}
    assert any("95" in problem.found for problem in found)
    assert any("nowhere.csv" in problem.found for problem in found)


def test_a_place_off_the_grid_is_refused(study):
    table = "name,latitude_deg,longitude_deg\nFar,50,8\nNo place,,\n"
    found = problems_of(study, "{table: sites.csv, grid: grid.nc}", table)
    assert [problem.line for problem in found] == [2, 3]


def test_places_either_side_of_the_date_line_are_near(study):
    cells = [Cell(0, 0, -17.0, 179.5), Cell(0, 1, -17.0, -180.0), Cell(0, 2, -17.0, -179.5)]
    table = "name,latitude_deg,longitude_deg\nWest,-17,179.9\nEast,-17,-179.9\n"
    plan = study("{table: sites.csv, grid: grid.nc}", table, cells=cells)
    assert [site.weather[0].cell for site in plan.sites] == [(0, 1), (0, 1)]


@pytest.mark.parametrize("sites", ["{grid: grid.nc}", "{table: sites.csv, grid: grid.nc}"])
def test_a_grid_without_weather_is_refused(study, sites):
    (problem,) = problems_of(study, sites, "name,latitude_deg,longitude_deg\nHere,40,8\n", cells=[])
    assert (problem.file, problem.found) == ("grid.nc", "no cell with weather")


@pytest.mark.parametrize(
    ("sites", "told"),
    [
        ("{}", "neither"),
        ("{tabel: sites.csv}", "tabel"),
        ("{table: 3}", "3"),
        ("{table: missing.csv}", "no such file"),
    ],
)
def test_what_is_neither_is_refused(study, sites, told):
    found = problems_of(study, sites)
    assert any(told in str(problem) for problem in found)


def test_a_grid_needs_what_reads_it(tmp_path):
    path = tmp_path / "study.yaml"
    path.write_text(f"study: many\nsites: {{grid: grid.nc}}\n{REST}", encoding="utf-8")
    with pytest.raises(InputError, match="cannot read grids"):
        load(path)


def test_schema_offers_all_three():
    sites = json_schema()["properties"]["sites"]["anyOf"]
    assert sites[0]["type"] == "array"
    assert set(sites[1]["properties"]) >= {"table", "grid", "mounting"}
