"""The shipped study of chance, as a user runs it: alone and in two processes."""

from dataclasses import replace
from pathlib import Path

import pandas as pd
import pytest

import yieldsim
from yieldsim.study import chance
from yieldsim.study.chance_inputs import OF_SITE
from yieldsim.study.chance_store import open_draws

STUDY = Path(__file__).resolve().parents[2] / "configs" / "how-sure.yaml"


def fewer():
    """Return the plan with half of its draws, for the tests' sake."""
    plan = yieldsim.load_study(STUDY)
    return replace(plan, chance=replace(plan.chance, draws=200))


@pytest.fixture(scope="module")
def runs(tmp_path_factory):
    """The same study with one process and with two."""
    plan = fewer()
    folders = [tmp_path_factory.mktemp(f"workers{count}") for count in (1, 2)]
    for count, folder in enumerate(folders, start=1):
        result = yieldsim.run_study(plan, folder, workers=count)
    return result, folders


def test_same_seed_same_bytes_with_one_process_and_two(runs):
    """Every table, and every site's draws."""
    _, (one, two) = runs
    names = sorted(path.relative_to(one) for path in [*one.glob("*.csv"), *one.glob("draws/*.nc")])
    assert {Path(f"{name}.csv") for name in chance.TABLES} < set(names)
    assert len([name for name in names if name.suffix == ".nc"]) == 2
    for name in names:
        assert (one / name).read_bytes() == (two / name).read_bytes(), name


def test_tables_hold_together(runs):
    result, (folder, _) = runs
    places = len(result.annual)
    assert len(result.chance) == 2 * places
    assert len(result.head_to_head) == 2 * 2 * 3  # measures, places, pairs of three absorbers
    ranks = result.rank_chance.groupby(["site", "mounting", "measure", "absorber"])["probability"].sum()
    assert ranks.to_numpy() == pytest.approx(1.0)
    assert (result.chance["p90"] <= result.chance["p50"]).all()
    assert (result.chance["p50"] <= result.chance["p10"]).all()
    assert result.chance[["p90", "p50", "p10"]].notna().all().all()
    back = pd.read_csv(folder / "head_to_head.csv")
    assert back["verdict"].isin(["virtually certain", "very likely", "likely", "as likely as not"]).all()


def test_places_scatter_together_as_far_as_they_share_inputs(runs):
    """All inputs that no site owns are shared, the year by 0.4: what they cause of the variance is the correlation,
    within 4 standard errors of 200 draws."""
    result, (folder, _) = runs
    draws = open_draws(folder, ["Saltmarsh Point", "Highmoor"])
    one, other = (found.energy_kwh_m2[:, 0, 0] for found in draws.values())
    told = result.causes
    told = told[(told["absorber"] == "silicon") & (told["other"] == "") & (told["measure"] == "energy_kwh_m2")]
    share = told.set_index(["input", "site"])["total"].unstack().prod(axis=1) ** 0.5
    expected = share.drop(list(OF_SITE)).sum() + 0.4 * share["year"]
    assert 0.2 < expected < 0.8
    found = pd.Series(one).corr(pd.Series(other))
    assert found == pytest.approx(expected, abs=4 * (1 - expected**2) / len(one) ** 0.5)


def test_the_page_speaks_of_chance(runs):
    result, (folder, _) = runs
    page = (folder / "report.html").read_text(encoding="utf-8")
    assert "head_to_head.csv" in page
    assert "beats the next best with a probability" in page
    assert result.resolved["chance"]["draws"] == 400


def test_a_finished_study_is_picked_up(runs):
    """Nothing is drawn anew for the same plan; other draws are another study."""
    _, (folder, _) = runs
    again = yieldsim.run_study(fewer(), folder)
    assert set(again.run["seconds"].values()) == {0.0}
