import json

import pytest

from yieldsim import report
from yieldsim.errors import InputError
from yieldsim.report import reading
from yieldsim.study import store


@pytest.fixture
def folder(tmp_path, factory):
    """A finished study's folder with two sites, without pictures."""
    made = factory.make(["One", "Two"], {"silicon": 1.12, "NA": 1.5, "=1+1": 1.7}, full=True)
    report.write(made, tmp_path, {"monthly"})
    for site, dataset in made.spectra.items():
        store.write_netcdf(tmp_path / "spectra" / f"{store.file_stem(site)}.nc", dataset)
    store.write_json(tmp_path / "run.json", dict(made.run) | {"config": dict(made.resolved)})
    return tmp_path


def test_a_page_made_from_the_files_says_the_same(folder):
    first = (folder / "report.html").read_text(encoding="utf-8")
    (folder / "report.html").unlink()
    files = report.rebuild(folder)
    assert (folder / "report.html") in files
    assert {file.suffix for file in files} == {".html", ".svg", ".png"}
    # The numbers went through 12 digits, the page keeps 7; only the packing of spectra may differ in a last bit.
    strip = lambda text: text.split('<script type="application/json"')[0]  # noqa: E731
    assert strip((folder / "report.html").read_text(encoding="utf-8")) == strip(first)


def test_names_and_reference_come_back(folder):
    back = reading.read_result(folder)
    assert list(back.standard["absorber"]) == ["silicon", "NA", "=1+1"]
    assert back.reference == "silicon"
    assert set(back.spectra) == {"One", "Two"}
    assert list(back.annual["gap_ev"].unique()) == ["1.12", "1.5", "1.7"]


def test_everything_that_is_missing_is_named_at_once(tmp_path):
    with pytest.raises(InputError) as error:
        report.rebuild(tmp_path)
    named = {problem.file.rsplit("/", 1)[-1] for problem in error.value.problems}
    assert named == {"run.json", "annual.csv", "standard.csv", "weather_quality.csv"}


def test_a_table_without_its_columns_is_refused(folder):
    (folder / "annual.csv").write_text("site,mounting\nOne,fixed\n")
    with pytest.raises(InputError, match=r"annual\.csv") as error:
        reading.read_result(folder)
    assert {problem.where for problem in error.value.problems} >= {"absorber", "energy_kwh_m2"}


@pytest.mark.parametrize("content", ["{", "[]", json.dumps("text")])
def test_a_run_file_of_another_kind_is_refused(folder, content):
    (folder / "run.json").write_text(content)
    with pytest.raises(InputError, match=r"run\.json"):
        reading.read_result(folder)


def test_parts_not_kept_may_be_missing(folder):
    for name in ("monthly.csv", "gap_sweep.csv", "by_hour.csv", "responses.csv"):
        (folder / name).unlink()
    back = reading.read_result(folder)
    assert back.monthly is None
    assert back.gap_sweep is None
