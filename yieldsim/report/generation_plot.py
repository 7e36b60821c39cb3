"""Where films and wafers make their pairs, from the front to the back."""

from __future__ import annotations

from collections import Counter

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from yieldsim.report.canvas import LABEL_IN, LEAD_IN, head, label_ends, panels, text_width
from yieldsim.report.marks import Mark, mark, shorten
from yieldsim.study.result import StudyResult

_KEYS = ["absorber", "junction"]
_LEAST_UM = 1e-3  # where the logarithm of the depth begins


def draw(result: StudyResult) -> Figure | None:
    """Return the picture: charge made over depth, and how much of it is made above; None without films."""
    table = result.generation
    if table is None or table.empty:
        return None
    number = {name: i for i, name in enumerate(result.standard["absorber"])}
    films = [(str(name), str(junction), film) for (name, junction), film in table.groupby(_KEYS, sort=False)]
    stacked = Counter(name for name, _, _ in films)
    names = [_called(name, junction, stacked[name]) for name, junction, _ in films]
    size = (3.6, max(2.4, 0.2 + LABEL_IN * len(names)))
    figure, drawn = panels(2, 1, size, (0.8, LEAD_IN + 0.25 + text_width(names), 0.55, 0.3))
    for axes, column, words in (
        (drawn[0], "generation_ma_cm2_um", "charge made [mA/cm² per µm]"),
        (drawn[1], "share_above", "share made above this depth [%]"),
    ):
        ends = []
        for k, ((name, _, film), called) in enumerate(zip(films, names, strict=True)):
            look = mark(number.get(name, k) if len(films) == len(stacked) else k)
            ends.append(_line(axes, film, column, called, look))
        axes.set_xscale("log")
        axes.xaxis.set_major_formatter(lambda x, _: f"{x:g}")
        axes.set_xlim(_LEAST_UM, float(table["depth_um"].max()))
        axes.set_xlabel("depth below the front of the film [µm]")
        axes.set_ylabel(words)
        if column == "generation_ma_cm2_um":
            axes.set_ylim(bottom=0)
        else:
            axes.set_ylim(0, 100)
        label_ends_log(axes, ends, size)
    head(figure, "Under the standard spectrum; all that is absorbed makes pairs")
    return figure


def _called(name: str, junction: str, count: int) -> str:
    return shorten(name, 32) if count == 1 else f"{shorten(name, 26)}, junction {junction}"


def _line(axes: Axes, film: pd.DataFrame, column: str, called: str, look: Mark) -> tuple[float, float, str, Mark]:
    """Draw one film's line; return where it ends and its label."""
    depth = np.maximum(film["depth_um"].to_numpy(), _LEAST_UM)
    values = film[column].to_numpy() * (100 if column == "share_above" else 1)
    axes.plot(depth, values, color=look.colour, dashes=look.dash or (None, None), linewidth=1.4)
    return float(depth[-1]), float(values[-1]), called, look


def label_ends_log(axes: Axes, ends: list[tuple[float, float, str, Mark]], size: tuple[float, float]) -> None:
    """Write a label beside each line's end on an axis of logarithms: the lines end at different depths."""
    left, right = axes.get_xlim()
    twin = axes.twiny()  # a straight axis over the same panel, so that labels can stand beside it
    twin.set_xlim(0, 1)
    twin.set_axis_off()
    twin.set_ylim(axes.get_ylim())
    span = np.log(right / left)
    for x, y, _, look in ends:
        axes.plot(x, y, look.marker, color=look.colour, markersize=4, clip_on=False)
    at = [float(np.log(x / left) / span) for x, _, _, _ in ends]
    label_ends(twin, [(y, text, look) for _, y, text, look in ends], at, size)
