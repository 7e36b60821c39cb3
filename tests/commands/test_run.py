"""The summary of a run, and what is handed to the engine."""

import argparse
import json
from pathlib import Path
from types import SimpleNamespace

import pandas as pd
import pytest

from yieldsim import api
from yieldsim.cli import main
from yieldsim.commands.run import cores, departure, differences, summary, workers
from yieldsim.config import load
from yieldsim.errors import PlaceError
from yieldsim.report import answer


def row(absorber, yields, energy, ranks, site="Saltmarsh Point", mounting="fixed"):
    """Return a row of annual.csv; ranks: by yield, by energy, at standard conditions."""
    return {
        "site": site,
        "mounting": mounting,
        "absorber": absorber,
        "hours": 8760.0,
        "poa_kwh_m2": 1234.5,
        "specific_yield_kwh_kwp": yields,
        "energy_kwh_m2": energy,
        "rank_by_yield": ranks[0],
        "rank_by_energy": ranks[1],
        "rank_at_stc": ranks[2],
    }


ROWS = [
    row("silicon", 1000.0, 210.0, (3, 1, 1)),
    row("cadmium telluride", 1031.0, 191.0, (1, 2, 3)),
    row("perovskite", 1010.0, 190.0, (2, 3, 2)),
]


def test_the_summary_ranks_by_yield_and_sets_it_against_the_reference():
    lines = summary(ROWS, "silicon", Path("out")).splitlines()
    assert lines[0] == "Saltmarsh Point: 1234 kWh/m2 on the plane in 8760 h"
    assert [line.split()[1] for line in lines[2:5]] == ["cadmium", "perovskite", "silicon"]
    assert "+3.1 %" in lines[2]
    assert "+1.0 %" in lines[3]
    assert "%" not in lines[4]  # the reference itself
    assert lines[2].endswith("2 (3)")
    assert lines[4].rstrip().endswith("1")
    assert lines[-1] == "Report out/report.html, tables out/annual.csv and others in out/"


def test_the_departure_from_the_datasheet_ranking_is_a_sentence():
    assert departure(ROWS) == (
        "Per area the order departs from that of the datasheet efficiencies: cadmium telluride 2nd instead of 3rd, "
        "perovskite 3rd instead of 2nd; per kWp they lie 3.1 % apart."
    )


def test_the_order_within_a_tie_of_the_datasheet_is_no_departure():
    rows = [row("one-sided", 900.0, 1.0, (3, 3, 1)), row("two", 950.0, 1.2, (2, 2, 1)), row("b", 990.0, 1.3, (1, 1, 3))]
    assert "b 1st instead of 3rd" in departure(rows)
    assert "one-sided 3rd instead of 1st" in departure(rows)
    assert "two" not in departure(rows)  # second of two that share the first rank


def test_no_departure():
    rows = [row("a", 1000.0, 2.0, (1, 1, 1)), row("b", 950.0, 1.0, (2, 2, 2))]
    assert departure(rows) == (
        "Per area the order is that of the datasheet efficiencies; per kWp they lie 5.3 % apart."
    )


@pytest.mark.parametrize(("number", "said"), [(1, "1st"), (2, "2nd"), (3, "3rd"), (11, "11th"), (21, "21st")])
def test_ordinals(number, said):
    assert f"a {said} instead" in departure([row("a", 1.0, 1.0, (1, number, 99))])


def test_each_site_and_mounting_has_its_own_table():
    rows = [
        row("a", 1.0, 1.0, (1, 1, 1), site, mounting) for site in ("North", "South") for mounting in ("flat", "steep")
    ]
    titles = [line.split(":")[0] for line in summary(rows, "a", Path("o")).splitlines() if "on the plane" in line]
    assert titles == ["North, flat", "North, steep", "South, flat", "South, steep"]


def test_hostile_names_are_shown_as_text():
    text = summary([row("a\x1b[2J", 1.0, 1.0, (1, 1, 1), "s\nite")], "a", Path("o"))
    assert "\x1b" not in text
    assert "s?ite" in text


@pytest.fixture
def engine(monkeypatch):
    """Return the calls that a run makes to the engine, which computes nothing here."""
    calls = []

    def run_study(plan, out, **options):
        calls.append((plan, out, options))
        return SimpleNamespace(annual=pd.DataFrame(ROWS), run={"tables": {"annual.csv": "1", "new.csv": "2"}})

    monkeypatch.setattr(
        api, "load_study", lambda path: SimpleNamespace(name=Path(path).stem, reference="silicon", sites=[None])
    )
    monkeypatch.setattr(api, "run_study", run_study)
    monkeypatch.setattr(answer, "answer", lambda result: SimpleNamespace(winner="A wins.", ranking="Nothing moves."))
    return calls


def test_run_hands_its_options_to_the_engine(engine, capsys):
    assert main(["run", "two-coasts.yaml"]) == 0
    said = capsys.readouterr()
    assert main(["run", "x.yaml", "--out", "there", "--workers", "2", "--fresh", "--quiet"]) == 0
    (_, first, one), (_, second, two) = engine
    assert (first, one["workers"].count, one["fresh"]) == (Path("outputs/two-coasts"), cores(), False)
    assert (second, two["workers"].count, two["fresh"]) == (Path("there"), 2, True)
    assert capsys.readouterr() == ("", "")  # the quiet run says nothing
    assert said.err == ""  # no progress where nobody watches
    assert "Saltmarsh Point" in said.out
    assert said.out.startswith("A wins.\nNothing moves.\n")


def test_what_the_engine_cannot_do_here_is_2(engine, monkeypatch, capsys):
    def full(plan, out, **options):
        raise PlaceError("cannot write out/annual.csv: No space left on device")

    monkeypatch.setattr(api, "run_study", full)
    assert main(["run", "x.yaml"]) == 2
    assert "No space left" in capsys.readouterr().err


# ----------------------------------------------------------------------------------------------- repeating a run


@pytest.fixture
def recorded(tmp_path):
    """Return the run.json of a run, and the plan it was made from."""
    (tmp_path / "year.csv").write_bytes(b"weather")
    study = tmp_path / "study.yaml"
    study.write_text(
        "study: again\nmounting: {tilt_deg: 30, azimuth_deg: 180}\nsites: [{name: a, weather: year.csv}]\n"
        "absorbers: [{name: b, like: c-si}]\n",
        encoding="utf-8",
    )
    plan = load(study)
    record = tmp_path / "elsewhere" / "run.json"
    record.parent.mkdir()
    content = {
        "folder": plan.folder,
        "config": dict(plan.resolved),
        "inputs": {file.shown: file.sha256 for site in plan.sites for file in site.weather},
        "versions": {"numpy": "0.1", "no-such-package": "1.0"},
    }
    record.write_text(json.dumps(content), encoding="utf-8")
    return record


def test_a_run_is_repeated_from_its_record_and_what_differs_is_said(engine, recorded, capsys):
    assert main(["run", "--from", str(recorded), "--quiet"]) == 0
    ((plan, out, _),) = engine
    assert (plan.name, plan.sites[0].name, out) == ("again", "a", Path("outputs/again"))
    err = capsys.readouterr().err
    assert "then 0.1" in err
    assert "no-such-package not installed, then 1.0" in err
    assert "content of" not in err
    assert "as it resolves" not in err


def test_the_tables_are_compared_with_the_record_s(engine, recorded, capsys):
    content = json.loads(recorded.read_text(encoding="utf-8"))
    for then, told in (
        (None, "holds no hashes"),
        ({"annual.csv": "0", "new.csv": "2"}, "differs: annual.csv has other content"),
        ({"annual.csv": "1"}, "differs: new.csv is new"),
        ({"annual.csv": "1", "new.csv": "2", "old.csv": "3"}, "differs: old.csv is not made any more"),
        ({"annual.csv": "1", "new.csv": "2"}, "Repeated: all 2 tables"),
    ):
        recorded.write_text(json.dumps(content | {"tables": then}), encoding="utf-8")
        assert main(["run", "--from", str(recorded)]) == 0
        said = capsys.readouterr()
        assert told in said.out + said.err
        assert ("Repeated" in said.out) is ("Repeated" in told)
    assert all(options["fresh"] for _, _, options in engine)


def test_other_weather_and_another_library_are_told(engine, recorded, capsys):
    content = json.loads(recorded.read_text(encoding="utf-8"))
    del content["config"]["absorbers"][0]["ideality"]  # as if the library had changed since
    content["config"]["absorbers"][0]["gap_ev"] = 1.13
    recorded.write_text(json.dumps(content), encoding="utf-8")
    (Path(content["folder"]) / "year.csv").write_bytes(b"other weather")
    assert main(["run", "--from", str(recorded), "--quiet"]) == 0
    err = capsys.readouterr().err
    assert "differs: content of year.csv" in err
    assert "differs: the study as it resolves" in err


def test_nothing_differs_when_nothing_does(recorded):
    plan = load(recorded.parents[1] / "study.yaml")
    before = json.loads(recorded.read_text(encoding="utf-8"))
    del before["versions"]
    assert [line for line in differences(plan, before) if not line.startswith(("yieldsim", "python", "platform"))] == []


@pytest.mark.parametrize(
    ("content", "said"),
    [
        ("no json", "not JSON"),
        ("[]", "no study"),
        ('{"config": {"study": "x"}}', "no key `sites`"),
        ("[" * 100_000, "not JSON"),
    ],
)
def test_what_is_no_record_is_refused(tmp_path, capsys, content, said):
    file = tmp_path / "run.json"
    file.write_text(content, encoding="utf-8")
    assert main(["run", "--from", str(file)]) == 1
    assert said in capsys.readouterr().err


def test_processes_from_1_to_1024():
    assert [workers(text) for text in ("1", "1024")] == [1, 1024]
    for text in ("0", "1025", "-1", "2.0", "two", "２"):
        with pytest.raises(argparse.ArgumentTypeError):
            workers(text)


@pytest.mark.parametrize("words", [[], ["x.yaml", "--from", "run.json"]])
def test_a_study_or_a_record(words, capsys):
    assert main(["run", *words]) == 1
    assert "either STUDY.yaml or --from run.json" in capsys.readouterr().err
