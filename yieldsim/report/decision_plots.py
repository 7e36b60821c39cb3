"""Pictures of the decision: margins with their interval, regret, break-even prices, and what a margin hangs on."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from yieldsim.report.canvas import GREY, SMALL, head, panels, text_width
from yieldsim.report.marks import COLOURS, mark, shorten
from yieldsim.study.result import StudyResult, records

Place = tuple[str, str]

MEASURE = "energy_kwh_m2"
_ROW_IN = 0.24
_NAME = 26
_MOST_ROWS = 14
_MOST_CAUSES = 8
_P90 = "P90 (exceeded with 90 % probability) to P10, dot at P50"


def _at(table: pd.DataFrame, place: Place, measure: str | None = MEASURE) -> pd.DataFrame:
    here = (table["site"] == place[0]) & (table["mounting"] == place[1])
    if measure is not None and "measure" in table:
        here &= table["measure"] == measure
    return table[here]


def _span(axes: Axes, y: int, low: float, middle: float, high: float, colour: str, marker: str) -> None:
    """Draw an interval as a bar and its middle as a sign."""
    axes.plot([low, high], [y, y], color=colour, linewidth=4, alpha=0.45, solid_capstyle="butt")
    axes.plot(middle, y, marker, color=colour, markersize=5)


def _pair(row: Mapping[str, Any]) -> str:
    return f"{shorten(str(row['absorber']), _NAME)} over {shorten(str(row['other']), _NAME)}"


def _rows(axes: Axes, names: Sequence[str], label: str) -> None:
    axes.set_yticks(range(len(names)), names)
    axes.set_ylim(-0.6, len(names) - 0.4)
    axes.tick_params(axis="y", length=0)
    axes.xaxis.set_major_locator(MaxNLocator(5))
    axes.axvline(0.0, color=GREY, linewidth=0.9, dashes=(3, 3))
    axes.set_xlabel(label)


def margins(result: StudyResult, places: list[Place], names: list[str], more: str) -> Figure | None:
    """Draw how far one absorber lies above another at each place: a row a pair, its probability beside it."""
    table = result.head_to_head
    if table is None or table.empty or "measure" not in table:
        return None
    frames = [_nearest(_at(table, place)) for place in places]
    texts = [_pair(row) for f in frames for row in records(f)]
    rows = max(len(frame) for frame in frames)
    left, right = 0.3 + text_width(texts, 8.5), 0.25 + text_width(["100 %"])
    figure, drawn = panels(len(places), 1, (4.2, _ROW_IN * rows + 0.2), (left, right, 0.55, 0.4))
    low = 100 * min(float(frame["margin_p90"].min()) for frame in frames)
    high = 100 * max(float(frame["margin_p10"].max()) for frame in frames)
    pad = 0.05 * max(high - low, 1.0)
    for axes, title, frame in zip(drawn, names, frames, strict=True):
        pairs = records(frame)[::-1]
        for y, row in enumerate(pairs):
            sure = row["probability"] >= 0.9
            colour = COLOURS[0] if sure else COLOURS[1]
            _span(
                axes,
                y,
                100 * row["margin_p90"],
                100 * row["margin_p50"],
                100 * row["margin_p10"],
                colour,
                "o" if sure else "D",
            )
            axes.annotate(
                f"{100 * row['probability']:.0f} %",
                (1.01, y),
                xycoords=("axes fraction", "data"),
                fontsize=SMALL,
                va="center",
            )
        called = [_pair(row) for row in pairs]
        _rows(axes, called, "margin of energy per area [%]")
        axes.set_xlim(low - pad, high + pad)
        axes.set_title(title)
    head(figure, f"Margin {_P90}; beside it the probability that it is above zero{more}")
    return figure


def _nearest(frame: pd.DataFrame) -> pd.DataFrame:
    """Return the pairs that decide: the best against all others, then the closest."""
    if len(frame) <= _MOST_ROWS:
        return frame
    close = (frame["probability"] - 0.5).abs()
    return frame.loc[close.sort_values(kind="stable").index[:_MOST_ROWS]].sort_index()


def regret(result: StudyResult, places: list[Place], names: list[str], more: str) -> Figure | None:
    """Draw what each absorber gives away at each place: a matrix with the numbers in its cells."""
    table = result.regret
    if table is None or table.empty or len(places) < 2:
        return None
    absorbers = [str(name) for name in result.standard["absorber"]]
    grid = np.full((len(absorbers), len(places)), np.nan)
    for j, place in enumerate(places):
        for row in records(_at(table, place)):
            grid[absorbers.index(str(row["absorber"])), j] = 100 * row["regret"]
    worst = np.nanmax(grid, axis=1)
    order = np.argsort(worst, kind="stable")
    called = [shorten(absorbers[i], 32) for i in order]
    left, slanted = 0.25 + text_width(called, 8.5), 0.75 * text_width(names, SMALL) + 0.25
    cell = (0.72, 0.26)
    size = (cell[0] * (len(places) + 1), cell[1] * len(absorbers))
    figure, (axes,) = panels(1, 1, size, (left, 0.5 + 0.5 * slanted, 0.5, slanted + 0.1))
    shown = np.column_stack([grid, worst])[order]
    most = max(float(np.nanmax(shown)), 1e-9)
    for (i, j), value in np.ndenumerate(shown):
        y = len(absorbers) - 1 - i
        depth = 0.0 if not np.isfinite(value) else min(1.0, value / most)
        axes.barh(y, 0.94, 0.88, left=j + 0.03, color=COLOURS[1], alpha=0.75 * depth)
        best = np.isfinite(value) and value < 5e-4 and j < len(places)
        text = "best" if best else f"{value:.1f}" if np.isfinite(value) else "–"
        axes.text(j + 0.5, y, text, ha="center", va="center", fontsize=SMALL, fontweight="bold" if best else "normal")
    for j, name in enumerate([*names, "worst"]):
        axes.text(j + 0.4, len(absorbers) - 0.4, name, rotation=45, rotation_mode="anchor", fontsize=SMALL)
    axes.axvline(len(places), color=GREY, linewidth=1.0)
    axes.set_xlim(0, len(places) + 1)
    axes.set_ylim(-0.6, len(absorbers) - 0.4)
    axes.set_yticks(range(len(absorbers)), called[::-1])
    axes.set_xticks([])
    axes.tick_params(axis="y", length=0)
    axes.grid(visible=False)
    axes.set_xlabel("energy per area given away [%]", loc="left")
    head(figure, f"Regret against the best at each place, smallest worst case on top{more}")
    return figure


def break_even(result: StudyResult, places: list[Place], names: list[str], more: str) -> Figure | None:
    """Draw what more a module may cost per area than the reference's: a bar a place and absorber."""
    table = result.worth
    if table is None or table.empty:
        return None
    absorbers = [str(name) for name in result.standard["absorber"] if name != result.reference]
    if not absorbers:
        return None
    currency = shorten(str(table["currency"].iloc[0]), 8)
    called = [shorten(name, 32) for name in absorbers]
    left = 0.3 + text_width(called, 8.5)
    with_chance = "break_even_per_m2_p50" in table
    right = 0.3 if with_chance else 0.7
    figure, drawn = panels(len(places), 2, (3.1, _ROW_IN * len(absorbers) + 0.2), (left, right, 0.55, 0.4))
    edges: list[float] = []
    for axes, title, place in zip(drawn, names, places, strict=True):
        by_name = {str(row["absorber"]): row for row in records(_at(table, place, None))}
        for y, name in enumerate(reversed(absorbers)):
            row = by_name[name]
            value = float(row["break_even_per_m2"])
            look = mark(0 if value >= 0 else 1)
            axes.barh(y, value, 0.5, color=look.colour, alpha=0.55)
            edges.append(value)
            if with_chance:
                low, middle, high = (float(row[f"break_even_per_m2_{p}"]) for p in ("p90", "p50", "p10"))
                axes.plot([low, high], [y, y], color="black", linewidth=1.2)
                axes.plot(middle, y, "|", color="black", markersize=7)
                edges += [low, high]
            else:
                axes.annotate(
                    f"{value:+.0f}".replace("-", "−"), (value, y), (4 if value >= 0 else -4, 0), fontsize=SMALL,
                    textcoords="offset points", va="center", ha="left" if value >= 0 else "right",
                )  # fmt: skip
        _rows(axes, called[::-1], f"price difference [{currency}/m²]")
        axes.set_title(title)
    pad = 0.16 * max(max([*edges, 0.0]) - min([*edges, 0.0]), 1e-9)
    for axes in drawn:
        axes.set_xlim(min([*edges, 0.0]) - pad, max([*edges, 0.0]) + pad)
    reference = shorten(result.reference, 32)
    spans = "; line: P90 (exceeded with 90 % probability) to P10" if with_chance else ""
    head(figure, f"What more than {reference} a module may cost per area for the same plant value{spans}{more}")
    return figure


def causes(result: StudyResult, places: list[Place], names: list[str], more: str) -> Figure | None:
    """Draw which unknowns the margin of the best over the next hangs on: a panel a place, the largest on top."""
    table = result.causes
    if table is None or table.empty:
        return None
    frames = [_causes_of(_at(table, place)) for place in places]
    words = [name.replace("_", " ") for frame in frames for name in frame["input"]]
    if not words:
        return None
    left = 0.3 + text_width(words, 8.5)
    rows = max(len(frame) for frame in frames)
    figure, drawn = panels(len(places), 2, (3.1, _ROW_IN * rows + 0.2), (left, 0.75, 0.55, 0.6))
    for axes, title, frame in zip(drawn, names, frames, strict=True):
        for y, row in enumerate(records(frame)[::-1]):
            total = 100 * max(float(row["total"]), 0.0)
            doubtful = isinstance(row["note"], str) and bool(row["note"])
            axes.barh(y, total, 0.55, color=COLOURS[0], alpha=0.3 if doubtful else 0.7)
            axes.plot([100 * row["total_low"], 100 * row["total_high"]], [y, y], color="black", linewidth=1.1)
            text = str(row["note"]) if doubtful else f"{total:.0f}"
            axes.annotate(text, (1.01, y), xycoords=("axes fraction", "data"), fontsize=6.5, va="center")
        called = [str(name).replace("_", " ") for name in frame["input"]][::-1]
        _rows(axes, called, "share of the margin's variance [%]")
        axes.set_xlim(0, 108)
        pair = f"{shorten(str(frame['absorber'].iloc[0]), 20)} over {shorten(str(frame['other'].iloc[0]), 20)}"
        axes.set_title(f"{title}\n{pair}", fontsize=8.5)
    head(figure, f"What the margin of the best over the next hangs on; line: interval of the share{more}")
    return figure


def _causes_of(frame: pd.DataFrame) -> pd.DataFrame:
    """Return the largest causes of a margin at one place."""
    margin = frame[frame["other"].fillna("").astype(str) != ""]
    return margin.sort_values("total", ascending=False, kind="stable").head(_MOST_CAUSES)
