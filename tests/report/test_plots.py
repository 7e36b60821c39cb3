import itertools

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.text import Text

from yieldsim.report import canvas, marks, plots

LONG_SITES = (
    "Amber Mesa on the dry inland plateau, 40", "Saltmarsh Point, temperate sea side 40 ch", "Highmoor $x_1$ <b>",
)  # fmt: skip
TWELVE = {f"absorber of a long name no {i:02d}": 0.75 + 0.11 * i for i in range(12)}


@pytest.fixture(scope="module")
def crowded(factory):
    return factory.make(LONG_SITES, TWELVE, full=True)


def _boxes(figure):
    """Return (text, box, rotation) of all that is written in a figure [pixels]."""
    renderer = FigureCanvasAgg(figure).get_renderer()
    figure.draw(renderer)
    unseen = {  # ticks beyond the ends of an axis are kept but not drawn
        label
        for axes in figure.axes
        for axis in (axes.xaxis, axes.yaxis)
        for tick in axis.get_major_ticks()
        for label in (tick.label1, tick.label2)
        if not min(axis.get_view_interval()) <= tick.get_loc() <= max(axis.get_view_interval())
    }
    texts = [t for t in figure.findobj(Text) if t.get_text() and t.get_visible() and t not in unseen]
    return [(t.get_text(), t.get_window_extent(renderer), t.get_rotation()) for t in texts]


@pytest.mark.parametrize("name", plots.PICTURES)
def test_no_label_lies_over_another_or_outside(name, crowded):
    with canvas.style():
        figure = plots.PICTURES[name](crowded)
        if name == "region":  # needs a grid; see test_region_plot
            assert figure is None
            return
        boxes = _boxes(figure)
    width, height = figure.get_size_inches() * figure.dpi
    for text, box, _ in boxes:
        assert box.x0 >= -1, text
        assert box.y0 >= -1, text
        assert box.x1 <= width + 1, text
        assert box.y1 <= height + 1, text
    level = [(text, box) for text, box, rotation in boxes if rotation in (0, 90)]
    # One pixel of touch is no overlap to the eye.
    over = [
        (one, two)
        for (one, a), (two, b) in itertools.combinations(level, 2)
        if min(a.x1, b.x1) - max(a.x0, b.x0) > 1 and min(a.y1, b.y1) - max(a.y0, b.y0) > 1
    ]
    assert not over


def test_slanted_names_of_edges_keep_a_line_apart(crowded):
    with canvas.style():
        figure = plots.spectra(crowded)
        FigureCanvasAgg(figure).draw()
    (axes,) = figure.axes
    slanted = [text for text in axes.texts if text.get_rotation() == 50]
    edges = [e for gaps in crowded.standard["gap_ev"] for e in plots.edges_nm(gaps) if e <= 1800]
    assert len(slanted) == len(edges)
    starts = np.sort([text.get_transform().transform(text.get_position())[0] for text in slanted])
    line = canvas.SMALL / 72 * figure.dpi
    assert np.all(np.diff(starts) * np.sin(np.radians(50)) >= line)


@pytest.mark.parametrize("name", plots.PICTURES)
def test_every_axis_names_what_it_shows_with_its_unit(name, full):
    with canvas.style():
        figure = plots.PICTURES[name](full)
    if figure is None:
        assert name == "region"
        return
    for axes in figure.axes:
        if not axes.axison:  # a helper for labels
            continue
        assert "[" in axes.get_xlabel() or axes.get_xlabel() == "month"
        rows_are_names = (
            name in ("annual_yield", "ledger", "margins", "regret", "break_even", "causes")
            or "behind" in axes.get_xlabel()
        )
        assert "[" in axes.get_ylabel() or rows_are_names


def test_the_same_result_gives_the_same_bytes(tmp_path, factory):
    small = factory.make(["One", "Two"], {"silicon": 1.12, "wide": 1.68}, full=True)
    one, two = (plots.write_plots(small, tmp_path / name) for name in ("a", "b"))
    assert {file.name for file in one} == {
        f"{name}.{kind}" for name in plots.PICTURES for kind in ("svg", "png") if name != "region"
    }
    for first, second in zip(one, two, strict=True):
        assert first.read_bytes() == second.read_bytes(), first.name


def test_a_user_s_own_settings_change_nothing(factory):
    small = factory.make(["One"], {"silicon": 1.12, "wide": 1.68})
    drawn = []
    for own in ({}, {"font.size": 20, "xtick.direction": "in"}):
        with mpl.rc_context(own):
            with canvas.style():
                drawn.append(canvas.to_bytes(plots.annual_yield(small), "svg", "annual_yield"))
            assert mpl.rcParams["font.size"] == own.get("font.size", mpl.rcParamsDefault["font.size"])
    assert drawn[0] == drawn[1]


def test_hostile_names_are_drawn_as_text(tmp_path, factory):
    names = ["<script>alert(1)</script>", "$\\frac{$", "سلام", "🌞 sun", "x" * 200, "a\nb"]
    made = factory.make(names[:3], {name: 1.1 + 0.1 * i for i, name in enumerate(names)}, full=True)
    for file in plots.write_plots(made, tmp_path):
        assert b"<script" not in file.read_bytes()


def test_parts_that_are_missing_have_no_picture(tmp_path, factory):
    import dataclasses

    bare = dataclasses.replace(factory.make(["One"]), monthly=None, gap_sweep=None, spectra={})
    assert {file.stem for file in plots.write_plots(bare, tmp_path)} == {"annual_yield"}


def test_the_best_on_top_and_its_value_beside_it(study):
    with canvas.style():
        figure = plots.annual_yield(study)
    first = study.annual[study.annual["site"] == study.annual["site"].iloc[0]]
    best = first.loc[first["specific_yield_kwh_kwp"].idxmax()]
    axes = figure.axes[0]
    assert axes.get_yticklabels()[-1].get_text() == marks.shorten(best["absorber"], 32)
    assert f"{best['specific_yield_kwh_kwp']:,.0f}" in [text.get_text() for text in axes.texts]


def test_the_telling_hours_are_clear_high_clear_low_and_dull(study):
    dataset = next(iter(study.spectra.values()))
    names = [name for name, _ in plots.typical_moments(dataset)]
    assert [name.split(" (")[0] for name in names] == ["clear, high sun", "clear, low sun", "overcast"]
    heights = [90 - float(dataset["zenith"][at]) for _, at in plots.typical_moments(dataset)]
    assert heights[0] > heights[1]


def test_ledger_bars_are_the_shares(full):
    """Every number beside a bar is its share of the light; they add up to 100 % but for rounding."""
    with canvas.style():
        figure = plots.ledger(full)
    first = full.ledger.iloc[0]
    fates = [name for name in full.ledger.columns if name not in ("site", "mounting", "absorber")]
    shares = 100 * first[fates].astype(float) / float(first[fates].sum())
    axes = figure.axes[0]
    top = max(text.get_position()[1] for text in axes.texts if text.get_text()[-1].isdigit())
    shown = [text.get_text().replace("−", "-") for text in axes.texts if text.get_position()[1] == top]
    assert [f"{share:.1f}" for share in shares if abs(share) > 0.05] == shown
    assert sum(map(float, shown)) == pytest.approx(100, abs=0.7)


def test_gap_pairs_mark_the_best_and_today_s(full):
    with canvas.style():
        figure = plots.gap_pairs(full)
    axes = figure.axes[0]
    frame = full.gap_pairs.iloc[: len(full.gap_pairs)]
    mine = frame[(frame["site"] == frame["site"].iloc[0]) & (frame["quality"] == "ideal") & (frame["terminals"] == 2)]
    best = mine.loc[mine["energy_kwh_m2"].idxmax()]
    texts = [text.get_text().strip() for text in axes.texts]
    assert f"{best['top_gap_ev']:.2f}/{best['bottom_gap_ev']:.2f} eV" in texts
    assert {"a", "b"} <= set(texts)
    assert any("two perovskites" in text.get_text() for text in figure.texts)


def test_generation_ends_where_the_film_ends(full):
    with canvas.style():
        figure = plots.PICTURES["generation"](full)
    shares = [line.get_ydata()[-1] for line in figure.axes[1].lines if len(line.get_xdata()) > 10]
    assert len(shares) == 6
    np.testing.assert_allclose(shares, 100.0)
