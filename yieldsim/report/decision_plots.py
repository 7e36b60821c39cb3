"""Pictures of the decision: margins with their interval, regret, break-even prices, and what a margin hangs on."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from yieldsim.report.answer import duels
from yieldsim.report.canvas import GREY, SMALL, head, panels, text_width
from yieldsim.report.marks import COLOURS, called, mark, shorten
from yieldsim.study.result import StudyResult, records

Place = tuple[str, str]

MEASURE = "energy_kwh_m2"
_ROW_IN = 0.24
_BAR_IN = 3.1  # width of a panel of bars
_LINE = 52  # characters of a pair's names on one line; longer ones take two
_SURE = 0.9
_MOST_ROWS = 14
_MOST_CAUSES = 8


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
    """Return a pair's names, on two lines where one would be long."""
    one, other = shorten(str(row["absorber"])), shorten(str(row["other"]))
    return f"{one} over {other}" if len(one) + len(other) < _LINE else f"{one}\nover {other}"


def _lines(texts: Sequence[str]) -> list[str]:
    """Return the lines of texts, to be measured."""
    return [line for text in texts for line in text.split("\n")]


def _rows(axes: Axes, names: Sequence[str], label: str) -> None:
    axes.set_yticks(range(len(names)), names)
    axes.set_ylim(-0.6, len(names) - 0.4)
    axes.tick_params(axis="y", length=0)
    axes.xaxis.set_major_locator(MaxNLocator(5))
    axes.axvline(0.0, color=GREY, linewidth=0.9, dashes=(3, 3))
    axes.set_xlabel(label)


def margins(result: StudyResult, places: list[Place], names: list[str], more: str) -> Figure | None:
    """Draw how far one absorber lies above another at each place: a row a pair, its probability beside it."""
    table = duels(result)
    if table is None or table.empty:
        return None
    frames = [_nearest(_at(table, place)) for place in places]
    texts = [_pair(row) for f in frames for row in records(f)]
    rows = max(len(frame) for frame in frames)
    row_in = _ROW_IN if len(_lines(texts)) == len(texts) else 1.45 * _ROW_IN
    left, right = 0.3 + text_width(_lines(texts), 8.5), 0.25 + text_width(["100 %"])
    figure, drawn = panels(len(places), 1, (4.2, row_in * rows + 0.2), (left, right, 0.55, 0.4))
    low = 100 * min(0.0, *(float(frame["margin_p90"].min()) for frame in frames))
    high = 100 * max(0.0, *(float(frame["margin_p10"].max()) for frame in frames))
    pad = 0.05 * max(high - low, 1.0)
    for axes, title, frame in zip(drawn, names, frames, strict=True):
        pairs = records(frame)[::-1]
        for y, row in enumerate(pairs):
            colour, sign = (COLOURS[0], "o") if row["probability"] >= _SURE else (COLOURS[1], "D")
            lower, middle, upper = (100 * float(row[f"margin_{p}"]) for p in ("p90", "p50", "p10"))
            _span(axes, y, lower, middle, upper, colour, sign)
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
    cut = f"; the {_MOST_ROWS} pairs in most doubt" if len(_at(table, places[0])) > _MOST_ROWS else ""
    head(figure, f"Bar: margin from P90 (exceeded with 90 % probability) to P10, sign at its P50{cut}{more}")
    below = (
        f"At the right the probability that it is above zero: circle from {100 * _SURE:.0f} % up, diamond below that"
    )
    corner = (0.12 / figure.get_figwidth(), 1 - 0.4 / figure.get_figheight())
    figure.text(*corner, below, fontsize=8.5, color=GREY)
    return figure


def _nearest(frame: pd.DataFrame) -> pd.DataFrame:
    """Return the pairs in most doubt, in the table's order."""
    if len(frame) <= _MOST_ROWS:
        return frame
    close = (frame["probability"] - 0.5).abs()
    return frame.loc[close.sort_values(kind="stable").index[:_MOST_ROWS]].sort_index()


def regret(result: StudyResult, places: list[Place], names: list[str], more: str) -> Figure | None:
    """Draw what each absorber gives away at each place: a matrix with the numbers in its cells."""
    table = result.regret
    if table is None or table.empty or len(places) < 2:
        return None
    compared = set(table["absorber"])
    absorbers = [str(name) for name in result.standard["absorber"] if name in compared]
    grid = np.full((len(absorbers), len(places)), np.nan)
    for j, place in enumerate(places):
        for row in records(_at(table, place)):
            grid[absorbers.index(str(row["absorber"])), j] = 100 * row["regret"]
    worst = np.nanmax(grid, axis=1)
    order = np.argsort(worst, kind="stable")
    called = [shorten(absorbers[i]) for i in order]
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
        best = value < 5e-4 and j < len(places)
        text = "best" if best else _given_away(value)
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
    left_out = "" if len(absorbers) == len(result.standard) else "; ideal absorbers left out"
    head(figure, f"Regret against the best at each place, smallest worst case on top{left_out}{more}")
    return figure


def _given_away(value: float) -> str:
    """Return a regret [%] in a cell; a little is not nothing."""
    if not np.isfinite(value):
        return "–"
    return "<0.1" if 5e-4 <= value < 0.05 else f"{value:.1f}"


def break_even(result: StudyResult, places: list[Place], names: list[str], more: str) -> Figure | None:
    """Draw what more a module may cost per area than the reference's: a bar a place and absorber."""
    table = result.worth
    if table is None or table.empty:
        return None
    absorbers = [str(name) for name in result.standard["absorber"] if name != result.reference]
    if not absorbers:
        return None
    currency = shorten(str(table["currency"].iloc[0]), 8)
    called = [shorten(name) for name in absorbers]
    left = 0.3 + text_width(called, 8.5)
    with_chance = "break_even_per_m2_p50" in table
    right = 0.3 if with_chance else 0.7
    figure, drawn = panels(len(places), 2, (_BAR_IN, _ROW_IN * len(absorbers) + 0.2), (left, right, 0.55, 0.4))
    edges: list[float] = []
    digits = _digits(float(table["break_even_per_m2"].abs().max()))
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
                    _signed(value, digits), (value, y), (4 if value >= 0 else -4, 0), fontsize=SMALL,
                    textcoords="offset points", va="center", ha="left" if value >= 0 else "right",
                )  # fmt: skip
        _rows(axes, called[::-1], f"price difference [{currency}/m²]")
        axes.set_title(title)
    low, high = min(*edges, 0.0), max(*edges, 0.0)
    room = 0.15 if with_chance else 0.12 + text_width([_signed(value, digits) for value in edges])  # [in], a side
    pad = max(high - low, 1e-9) * room / max(_BAR_IN - 2 * room, 0.5)
    for axes in drawn:
        axes.set_xlim(low - pad, high + pad)
    reference = shorten(result.reference)
    spans = "; line: P90 (exceeded with 90 % probability) to P10" if with_chance else ""
    head(figure, f"What more than {reference} a module may cost per area for the same plant value{spans}{more}")
    return figure


def _digits(most: float) -> int:
    """Return how many digits after the point show the largest amount with three, none for large ones."""
    return int(np.clip(2 - np.floor(np.log10(max(most, 1e-6))), 0, 6))


def _signed(value: float, digits: int) -> str:
    """Return an amount with its sign, never a negative zero."""
    rounded = round(value, digits)
    return f"{rounded:+,.{digits}f}".replace("-", "−") if rounded else f"{0:.{digits}f}"


def causes(result: StudyResult, places: list[Place], names: list[str], more: str) -> Figure | None:
    """Draw which unknowns the margin of the best over the next hangs on: a panel a place, the largest on top."""
    table = result.causes
    if table is None or table.empty:
        return None
    frames = [_causes_of(_at(table, place)) for place in places]
    words = [called(name) for frame in frames for name in frame["input"]]
    if not words:
        return None
    left = 0.3 + text_width(words, 8.5)
    rows = max(len(frame) for frame in frames)
    figure, drawn = panels(len(places), 2, (_BAR_IN, _ROW_IN * rows + 0.2), (left, 0.75, 0.55, 0.75))
    for axes, title, frame in zip(drawn, names, frames, strict=True):
        for y, row in enumerate(records(frame)[::-1]):
            total = 100 * max(float(row["total"]), 0.0)
            doubtful = isinstance(row["note"], str) and bool(row["note"])
            axes.barh(y, total, 0.55, color=COLOURS[0], alpha=0.3 if doubtful else 0.7)
            axes.plot([100 * row["total_low"], 100 * row["total_high"]], [y, y], color="black", linewidth=1.1)
            text = str(row["note"]) if doubtful else f"{total:.0f}"
            axes.annotate(text, (1.01, y), xycoords=("axes fraction", "data"), fontsize=6.5, va="center")
        labels = [called(name) for name in frame["input"]][::-1]
        _rows(axes, labels, "share of the margin's variance [%]")
        axes.set_xlim(0, 108)
        if len(frame):
            title = f"{title}\n{_pair(records(frame)[0])}"
        axes.set_title(title, fontsize=8.5)
    head(figure, f"What the margin of the best over the next hangs on; line: interval of the share{more}")
    return figure


def _causes_of(frame: pd.DataFrame) -> pd.DataFrame:
    """Return the largest causes of a margin at one place."""
    margin = frame[frame["other"].fillna("").astype(str) != ""]
    return margin.sort_values("total", ascending=False, kind="stable").head(_MOST_CAUSES)
