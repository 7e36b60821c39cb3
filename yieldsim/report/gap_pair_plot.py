"""Energy over the gaps of two junctions: a map a place and kind, its best pair, its plateau, and pairs of today."""

from __future__ import annotations

from string import ascii_lowercase

import numpy as np
import pandas as pd
from matplotlib.axes import Axes
from matplotlib.cm import ScalarMappable
from matplotlib.colors import BoundaryNorm
from matplotlib.figure import Figure
from numpy.typing import NDArray

from yieldsim.report.canvas import LABEL_IN, SMALL, head, panels
from yieldsim.report.marks import shorten
from yieldsim.study.result import STANDARD_SITE, StudyResult

#: How far behind the best pair [%] a shade begins; the first line is the plateau's.
LEVELS = (0.0, 1.0, 2.0, 5.0, 10.0, 15.0, 20.0, 30.0)
MOST_MAPS = 24
_SIZE = (2.5, 2.1)
_FOOT_LINES = 4

Array = NDArray[np.float64]


def draw(result: StudyResult, places: list[tuple[str, str]], names: list[str], more: str) -> Figure | None:
    """Return the picture: a row of maps for each place, a column for each quality and number of terminals.

    Parameters as for `ledger_plot.draw`; the standard spectrum comes last.
    """
    table = result.gap_pairs
    if table is None or table.empty:
        return None
    kinds = list(dict.fromkeys(zip(*_kind_columns(table), strict=True)))
    shown = [*zip(places, names, strict=True), ((STANDARD_SITE, ""), STANDARD_SITE)]
    keep = max(2, MOST_MAPS // len(kinds))
    if len(shown) > keep:
        shown = [*shown[: keep - 1], shown[-1]]
        more = f" (the first {keep - 1} of {len(places)} places)"
    marked = result.gap_pair_materials
    materials = [] if marked is None else list(dict.fromkeys(marked["material"]))[: len(ascii_lowercase)]
    letters = dict(zip(materials, ascii_lowercase, strict=False))
    foot = 0.2 + LABEL_IN * _FOOT_LINES if letters else 0.0
    figure, drawn = panels(len(shown) * len(kinds), len(kinds), _SIZE, (0.6, 0.2, 0.5, 0.42))
    figure = _with_foot(figure, foot)
    norm = BoundaryNorm(LEVELS, 256, extend="max")
    for i, (place, name) in enumerate(shown):
        for j, (quality, terminals) in enumerate(kinds):
            axes = drawn[i * len(kinds) + j]
            frame = _of(table, place, quality, terminals)
            title = f"{shorten(name, 28)}\n{shorten(str(quality), 18)}, {terminals} terminals"
            axes.set_title(title, fontsize=SMALL)
            if not frame.empty:
                points = None if marked is None else _of(marked, place, quality, terminals)
                _map(axes, frame, norm, points, letters)
    if letters:
        _legend(figure, letters, foot)
    bar = figure.add_axes(_bar_place(figure, foot))
    scale = figure.colorbar(ScalarMappable(norm, "cividis_r"), bar, orientation="horizontal", extend="max")
    scale.set_label("energy behind the best pair [%]", fontsize=SMALL)
    scale.ax.tick_params(labelsize=SMALL)
    head(figure, f"Star: best pair; black line: plateau within 1 % of it; letters: gaps of today's pairs{more}")
    return figure


def _kind_columns(table: pd.DataFrame) -> tuple[list[object], list[object]]:
    """Return quality and terminals of each row; tables without them hold one kind."""
    quality = table["quality"].tolist() if "quality" in table else [""] * len(table)
    terminals = table["terminals"].tolist() if "terminals" in table else [2] * len(table)
    return quality, terminals


def _of(table: pd.DataFrame, place: tuple[str, str], quality: object, terminals: object) -> pd.DataFrame:
    mine = (table["site"] == place[0]) & (table["mounting"] == place[1])
    if "quality" in table:
        mine &= table["quality"] == quality
    if "terminals" in table:
        mine &= table["terminals"] == terminals
    return table[mine]


def _map(
    axes: Axes, frame: pd.DataFrame, norm: BoundaryNorm, points: pd.DataFrame | None, letters: dict[str, str]
) -> None:
    grid = frame.pivot_table(index="bottom_gap_ev", columns="top_gap_ev", values="energy_kwh_m2")
    top, bottom, energy = grid.columns.to_numpy(), grid.index.to_numpy(), grid.to_numpy()
    behind = 100 * (1 - energy / np.nanmax(energy)) if np.nanmax(energy) > 0 else np.zeros_like(energy)
    top, bottom, energy, behind = _as_areas(top, bottom, energy, behind)
    axes.contourf(top, bottom, behind, LEVELS, cmap="cividis_r", norm=norm, extend="max")
    if np.nanmax(behind) > 1:
        axes.contour(top, bottom, behind, [1.0], colors="black", linewidths=1.5)
    row, column = np.unravel_index(np.nanargmax(energy), energy.shape)
    best = f"{top[column]:.2f}/{bottom[row]:.2f}"
    axes.plot(top[column], bottom[row], "*", color="white", markeredgecolor="black", markersize=9)
    axes.annotate(f" {best} eV", (0.02, 0.03), xycoords="axes fraction", fontsize=SMALL, **_PLATE)  # type: ignore[arg-type]
    if points is not None:
        for material, x, y in zip(points["material"], points["top_gap_ev"], points["bottom_gap_ev"], strict=True):
            if material in letters:
                axes.plot(x, y, "o", color="white", markeredgecolor="black", markersize=3)
                axes.annotate(letters[material], (x, y), (3, 2), textcoords="offset points", fontsize=SMALL, **_PLATE)  # type: ignore[arg-type]
    axes.set_xlim(top.min(), top.max())
    axes.set_ylim(bottom.min(), bottom.max())
    axes.grid(visible=False)
    axes.set_xlabel("top gap [eV]")
    axes.set_ylabel("bottom gap [eV]")


def _as_areas(top: Array, bottom: Array, energy: Array, behind: Array) -> tuple[Array, Array, Array, Array]:
    """Return a map that has two gaps or more either way: where there is one, a strip of it."""
    if len(top) == 1:
        top, energy, behind = top[0] + _STRIP, np.repeat(energy, 2, axis=1), np.repeat(behind, 2, axis=1)
    if len(bottom) == 1:
        bottom, energy, behind = bottom[0] + _STRIP, np.repeat(energy, 2, axis=0), np.repeat(behind, 2, axis=0)
    return top, bottom, energy, behind


_STRIP = np.array([0.0, 0.01])  # eV; the star stands at its left or lower edge, on the gap itself
_PLATE = {"bbox": {"facecolor": "white", "edgecolor": "none", "alpha": 0.75, "pad": 0.8}}


def _with_foot(figure: Figure, foot: float) -> Figure:
    """Make a figure higher by a strip below its panels [in]: for the scale of shades and the letters."""
    strip = foot + 0.62
    width, height = figure.get_size_inches()
    figure.set_size_inches(width, height + strip)
    for axes in figure.axes:
        x, y, w, h = axes.get_position().bounds
        axes.set_position((x, (y * height + strip) / (height + strip), w, h * height / (height + strip)))
    return figure


def _bar_place(figure: Figure, foot: float) -> tuple[float, float, float, float]:
    width, height = figure.get_size_inches()
    return 0.6 / width, (foot + 0.42) / height, min(3.2, width - 1.0) / width, 0.1 / height


def _legend(figure: Figure, letters: dict[str, str], foot: float) -> None:
    """Write what each letter stands for below the panels, in columns."""
    width, height = figure.get_size_inches()
    columns = -(-len(letters) // _FOOT_LINES)
    for i, (name, letter) in enumerate(letters.items()):
        column, line = divmod(i, _FOOT_LINES)
        x = (0.2 + column * (width - 0.3) / columns) / width
        y = (foot - 0.1 - LABEL_IN * line) / height
        room = int((width - 0.3) / columns / 0.062) - 3
        figure.text(x, y, f"{letter}  {shorten(name, max(room, 6))}", fontsize=SMALL, va="top")
