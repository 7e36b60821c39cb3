import dataclasses

import pandas as pd
import pytest

from yieldsim.report import answer as answers


def _annual(rows):
    """Return an annual table from (site, absorber, energy, rank at standard conditions)."""
    table = pd.DataFrame(rows, columns=["site", "absorber", "energy_kwh_m2", "rank_at_stc"])
    return table.assign(mounting="fixed", specific_yield_kwh_kwp=[1000.0 + energy for energy in table["energy_kwh_m2"]])


TWO_PLACES = [
    ("Dry", "red", 300.0, 1), ("Dry", "blue", 290.0, 2), ("Dry", "green", 250.0, 3),
    ("Wet", "red", 200.0, 1), ("Wet", "blue", 210.0, 2), ("Wet", "green", 150.0, 3),
]  # fmt: skip


def test_a_place_orders_by_energy_and_knows_its_lead():
    dry, wet = answers.places(_annual(TWO_PLACES))
    assert (dry.best, wet.best) == ("red", "blue")
    assert dry.lead == pytest.approx(300 / 290 - 1, rel=1e-12)  # the same division
    assert dry.overtakings() == []
    ((ahead, behind, margin),) = wet.overtakings()
    assert (ahead, behind) == ("blue", "red")
    assert margin == pytest.approx(0.05, rel=1e-12)  # 210 over 200


def test_the_mounting_is_named_only_where_there_are_several():
    table = _annual(TWO_PLACES)
    assert [place.name for place in answers.places(table)] == ["Dry", "Wet"]
    both = pd.concat([table, table.assign(mounting="tracker")])
    assert [place.name for place in answers.places(both)][:2] == ["Dry (fixed)", "Wet (fixed)"]


def _answer(study, rows, **more):
    return answers.answer(dataclasses.replace(study, annual=_annual(rows), **more))


def test_the_sentences_say_who_wins_where_by_how_much_and_where_the_datasheet_order_fails(study):
    said = _answer(study, TWO_PLACES)
    assert "red at Dry (by 3.4 %)" in said.winner
    assert "blue at Wet (by 5.0 %)" in said.winner
    assert "every lead named here is larger" in said.certainty
    assert "1 of 2 places (Wet)" in said.ranking
    assert "blue (datasheet rank 2) comes out 5.0 % ahead of red (datasheet rank 1) at Wet" in said.ranking


def test_the_span_of_yields_per_rated_power_is_told_against_the_reference(study):
    # made-up yields are 1000 and the energy: at Dry 1290/1300 and 1250/1300, at Wet 1210/1200 and 1150/1200
    said = _answer(
        study, TWO_PLACES, resolved={"reference": "red"}, standard=pd.DataFrame({"absorber": ["red", "blue"]})
    )
    assert "against red lies between −4.2 % (green at Wet) and +0.8 % (blue at Wet)" in said.ranking


@pytest.mark.parametrize("entry", [{"quality": "ideal"}, {"stack": [{"quality": "ideal"}, {"quality": "ideal"}]}])
def test_an_ideal_absorber_is_no_choice(study, entry):
    resolved = {"absorbers": [{"name": "red", **entry}, {"name": "blue"}, {"name": "green", "stack": [{"like": "x"}]}]}
    said = _answer(study, TWO_PLACES, resolved=resolved)
    assert "blue yields the most at every one" in said.winner
    assert said.winner.endswith("Left out as ideal, which no device is: red.")
    alone = _answer(study, TWO_PLACES, resolved={"absorbers": [{"name": name, **entry} for name in ("red", "blue")]})
    assert "red at Dry" in alone.winner


def test_one_winner_everywhere_is_said_with_the_span_of_its_lead(study):
    rows = [row if row[:2] != ("Wet", "blue") else ("Wet", "blue", 190.0, 2) for row in TWO_PLACES]
    said = _answer(study, rows)
    assert "red yields the most at every one of the 2 places" in said.winner
    assert "3.4 % (Dry) to 5.3 % (Wet)" in said.winner
    assert said.ranking.startswith("At no place does the order")


def test_a_small_lead_counts_as_a_draw(study):
    said = _answer(study, [("Dry", "red", 300.0, 1), ("Dry", "blue", 299.0, 2)])
    assert "every lead named here is that small" in said.certainty


def test_a_single_absorber_has_nothing_to_beat(study):
    said = _answer(study, [("Dry", "red", 300.0, 1)])
    assert "nothing to compare" in said.winner
    assert "Without a second absorber" in said.certainty


@pytest.mark.parametrize("turned", [False, True])
def test_the_probability_is_read_either_way_round(study, turned):
    pair = ("blue", "red", 0.2) if turned else ("red", "blue", 0.8)
    duels = pd.DataFrame([("Dry", "fixed", *pair)], columns=["site", "mounting", "absorber", "other", "probability"])
    said = _answer(study, TWO_PLACES[:3], head_to_head=duels)
    assert "probability of 80.0 %" in said.certainty


def test_the_least_sure_lead_is_told_in_words(study):
    """Of two measures energy per area counts, as everywhere in the answer."""
    columns = ["site", "mounting", "measure", "absorber", "other", "probability", "above", "probability_above",
               "margin_p90", "margin_p50", "margin_p10", "verdict"]  # fmt: skip
    duels = pd.DataFrame(
        [
            ("Dry", "fixed", "specific_yield_kwh_kwp", "red", "blue", 0.55, 0.01, 0.2, -0.02, 0.01, 0.03, "no word"),
            ("Dry", "fixed", "energy_kwh_m2", "red", "blue", 0.93, 0.01, 0.81, 0.002, 0.015, 0.029, "very likely"),
        ],
        columns=columns,
    )
    said = _answer(study, TWO_PLACES[:3], head_to_head=duels).certainty
    assert "probability of 93.0 %." in said
    assert "red ahead of blue is very likely: by 1.5 %, with a probability of 80 % between 0.2 % and 2.9 %" in said
    assert "by more than 1.0 % with 81.0 %" in said


def test_long_lists_are_counted():
    assert answers.listed(["a"]) == "a"
    assert answers.listed(["a", "b"]) == "a and b"
    assert answers.listed(list("abcdefg")) == "a, b, c, d and 3 more"


def test_a_percentage_is_never_a_negative_zero():
    assert answers.percent(-0.0001) == "0.0 %"
