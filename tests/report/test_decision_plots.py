"""Pictures of the decision: the numbers they show, and that names, zero and labels stay in sight."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pandas as pd
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg

from yieldsim.report import canvas, decision_plots, plots

NAMES = {f"absorber with a name of forty signs, {i:03d}": 1.0 + 0.07 * i for i in range(12)}
PLACES = [f"place with a name of forty characters {i:02d}" for i in range(2)]
PICTURES = ("margins", "regret", "break_even", "causes")


@pytest.fixture(scope="module")
def crowd(factory):
    assert {len(name) for name in [*NAMES, *PLACES]} == {40}
    return factory.make(PLACES, NAMES, full=True)


def drawn(name, result):
    with canvas.style():
        figure = plots.PICTURES[name](result)
        FigureCanvasAgg(figure).draw()
    return figure


@pytest.fixture(scope="module")
def figures(crowd):
    return {name: drawn(name, crowd) for name in PICTURES}


def ticks(axes):
    return [label.get_text() for label in axes.get_yticklabels()]


@pytest.mark.parametrize("name", PICTURES)
def test_long_names_are_told_apart_and_stay_on_the_page(name, figures):
    """Twelve absorbers whose names of 40 characters differ in the last one: no two rows alike, nothing cut off."""
    figure = figures[name]
    renderer = figure.canvas.get_renderer()
    page = figure.bbox
    for axes in figure.axes:
        assert len(set(ticks(axes))) == len(ticks(axes)) > 0
        for text in [*axes.get_yticklabels(), *axes.texts, axes.title, *figure.texts]:
            box = text.get_window_extent(renderer)
            assert page.x0 <= box.x0, text.get_text()
            assert box.x1 <= page.x1, text.get_text()
            assert page.y0 <= box.y0, text.get_text()
            assert box.y1 <= page.y1, text.get_text()


@pytest.mark.parametrize("name", ["margins", "break_even", "causes"])
def test_rows_of_names_do_not_touch(name, figures):
    figure = figures[name]
    renderer = figure.canvas.get_renderer()
    for axes in figure.axes:
        boxes = sorted((label.get_window_extent(renderer) for label in axes.get_yticklabels()), key=lambda box: box.y0)
        assert all(above.y0 >= below.y1 - 1 for below, above in pairwise(boxes))


def test_zero_is_in_sight_where_every_margin_is_above(crowd):
    """A margin is read against zero; a picture that starts at the smallest margin makes a lead look like a rout."""
    table = crowd.head_to_head.assign(margin_p90=0.1, margin_p50=0.15, margin_p10=0.2)
    for axes in drawn("margins", replace(crowd, head_to_head=table)).axes:
        low, high = axes.get_xlim()
        assert low < 0 < 20 < high


def test_regrets_are_those_of_the_table(crowd, figures):
    axes = figures["regret"].axes[0]
    table = crowd.regret.set_index(["absorber", "site"])["regret"]
    shown = dict(zip(ticks(axes), axes.get_yticks(), strict=True))
    cells = {text.get_position(): text.get_text() for text in axes.texts}
    for absorber, y in shown.items():
        for j, site in enumerate(PLACES):
            value = 100 * table[absorber, site]
            expected = "best" if value == 0 else "<0.1" if value < 0.05 else f"{value:.1f}"
            assert cells[j + 0.5, y] == expected


def test_an_absorber_without_regret_has_no_row(crowd, figures):
    """Ideal absorbers are no choice: they are not in the table, and the picture says so."""
    limit = next(iter(NAMES))
    kept = crowd.regret[crowd.regret["absorber"] != limit]
    figure = drawn("regret", replace(crowd, regret=kept))
    assert limit not in ticks(figure.axes[0])
    assert any("ideal absorbers left out" in text.get_text() for text in figure.texts)
    assert not any("left out" in text.get_text() for text in figures["regret"].texts)


@pytest.mark.parametrize("scale", [1.0, 1e-3, 12_345.0])
def test_prices_of_any_currency_are_labelled_within_their_panel(scale, crowd):
    """Three digits of the largest, its sign, never a negative zero; labels end inside the axes."""
    names = [column for column in crowd.worth if not str(column).endswith(("_p90", "_p50", "_p10"))]
    values = crowd.worth["break_even_per_m2"].to_numpy() * scale
    values[1] = -1e-9
    figure = drawn("break_even", replace(crowd, worth=crowd.worth[names].assign(break_even_per_m2=values)))
    renderer = figure.canvas.get_renderer()
    labels = [text for axes in figure.axes for text in axes.texts]
    assert len(labels) == len(PLACES) * (len(NAMES) - 1)
    for axes in figure.axes:
        for text in axes.texts:
            box = text.get_window_extent(renderer)
            assert axes.bbox.x0 <= box.x0
            assert box.x1 <= axes.bbox.x1
    told = [float(text.get_text().replace("−", "-").replace(",", "")) for text in labels]
    assert np.max(np.abs(told)) == pytest.approx(np.abs(values).max(), rel=5e-3)
    assert not [text.get_text() for text in labels if text.get_text().strip("+−0.,") == "" and "−" in text.get_text()]


def test_causes_lead_with_the_largest_and_name_no_unit(crowd):
    table = crowd.causes
    table = table.assign(input=table["input"].replace({"aod500": "water_cm", "model_clear": "ozone_atm_cm"}))
    for axes in drawn("causes", replace(crowd, causes=table)).axes:
        assert ticks(axes)[::-1] == ["degradation", "external radiative efficiency", "water", "ozone"]
        widths = [bar.get_width() for bar in axes.patches]
        assert widths == sorted(widths)


@pytest.mark.parametrize("name", PICTURES)
def test_without_its_table_there_is_no_picture(name, crowd):
    table = {"margins": "head_to_head", "regret": "regret", "break_even": "worth", "causes": "causes"}[name]
    for nothing in (None, pd.DataFrame()):
        with canvas.style():
            assert plots.PICTURES[name](replace(crowd, **{table: nothing})) is None


def test_an_ideal_absorber_is_no_pair_s_part(crowd):
    """As in the answer and the regrets: nobody can choose a limit."""
    four, table = list(NAMES)[:4], crowd.head_to_head
    few, limit = table[table["absorber"].isin(four) & table["other"].isin(four)], four[3]
    entries = [{"name": name, "quality": "ideal"} if name == limit else {"name": name} for name in NAMES]
    for resolved, shown in ((crowd.resolved, True), ({**crowd.resolved, "absorbers": entries}, False)):
        for axes in drawn("margins", replace(crowd, head_to_head=few, resolved=resolved)).axes:
            assert any(limit[-3:] in text for text in ticks(axes)) is shown


def test_many_pairs_keep_those_in_most_doubt(crowd):
    """More pairs than a page holds: the ones nearest to even odds, in the table's order, and the picture says so."""
    table = crowd.head_to_head
    here = table[table["measure"] == "energy_kwh_m2"]
    many = pd.concat([here, here.assign(other="another one", probability=0.5)], ignore_index=True)
    figure = drawn("margins", replace(crowd, head_to_head=many))
    assert any("pairs in most doubt" in text.get_text() for text in figure.texts)
    for axes in figure.axes:
        assert len(ticks(axes)) == decision_plots._MOST_ROWS
        assert sum("another one" in text for text in ticks(axes)) == len(NAMES) - 1
