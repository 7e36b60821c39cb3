"""Maps of a region: which absorber wins where, by how much, and the best gap."""

from __future__ import annotations

from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import BoundaryNorm, ListedColormap
from matplotlib.figure import Figure
from matplotlib.patches import Patch, PathPatch
from matplotlib.path import Path
from numpy.typing import NDArray

from yieldsim.report.canvas import LABEL_IN, SMALL, head, panels, text_width
from yieldsim.report.marks import COLOURS, shorten
from yieldsim.study.result import StudyResult

_LONGEST = 3.6  # of a map [in]
#: Hatching tells winners apart in grey. Its number and that of the colours have no common divisor, so that absorbers
#: are alike in both only from the 57th on.
_HATCHES = ("", "////", "....", "\\\\\\\\", "xxx", "+++", "oo", "---")
_HATCHED = "#FFFFFF"
_MOST_MOUNTINGS = 6

Array = NDArray[Any]


def draw(result: StudyResult) -> Figure | None:
    """Return the maps, a row for each mounting; None where the study is no grid."""
    region = result.region
    if region is None:
        return None
    names = [shorten(str(name), 32) for name in region["absorber"].values]
    mountings = [str(name) for name in region["mounting"].values][:_MOST_MOUNTINGS]
    kinds = ["winner", "margin", *([] if "best_gap_ev" not in region else ["gap"])]
    size = _size(region["longitude"].values, region["latitude"].values)
    right = 0.6 + text_width([_legend(name, 1.0) for name in names])
    figure, drawn = panels(len(mountings) * len(kinds), len(kinds), size, (0.75, right, 0.55, 0.4))
    for i, mounting in enumerate(mountings):
        here = region.isel(mounting=i)
        for j, kind in enumerate(kinds):
            axes = drawn[i * len(kinds) + j]
            where = f", {shorten(mounting, 16)}" if len(region["mounting"]) > 1 else ""
            if kind == "winner":
                axes.set_title(f"Most energy per area{where}")
                _winner(axes, here, names)
            elif kind == "margin":
                axes.set_title(f"Its margin over the next{where}")
                _shades(figure, axes, here, 100 * here["margin"].values, "margin [%]")
            else:
                quality = shorten(str(region["quality"].values[0]), 16)
                axes.set_title(f"Best gap, {quality}{where}")
                _shades(figure, axes, here, here["best_gap_ev"].values[0], "gap [eV]")
            axes.set_xlabel("longitude [deg east]")
            axes.set_ylabel("latitude [deg north]")
            axes.grid(visible=False)
    head(figure, "Each cell of the grid; white: no weather")
    return figure


def _size(longitude: Array, latitude: Array) -> tuple[float, float]:
    """Return width and height of a map [in] in about the proportions of the ground."""
    wide = float(np.ptp(longitude)) * float(np.cos(np.radians(np.mean(latitude)))) or 1.0
    high = float(np.ptp(latitude)) or 1.0
    ratio = min(max(wide / high, 0.5), 2.0)
    return (_LONGEST, _LONGEST / ratio) if ratio >= 1 else (max(_LONGEST * ratio, 2.4), _LONGEST)


def _winner(axes: Axes, here: Any, names: list[str]) -> None:
    best = here["best_absorber"].values
    known = [int(number) for number in np.unique(best) if number >= 0]
    handles = []
    for number in known:
        colour, hatch = COLOURS[number % len(COLOURS)], _HATCHES[number % len(_HATCHES)]
        mask = best == number
        shade = np.where(mask, 1.0, np.nan)
        axes.pcolormesh(here["longitude"], here["latitude"], shade, cmap=ListedColormap([colour]), shading="nearest")
        cells = _outline(here["longitude"].values, here["latitude"].values, mask)
        axes.add_patch(PathPatch(cells, facecolor="none", edgecolor=_HATCHED, linewidth=0.0, hatch=hatch))
        share = float(np.mean(best[best >= 0] == number))
        label = _legend(names[number], share)
        handles.append(Patch(facecolor=colour, edgecolor=_HATCHED, linewidth=0.0, hatch=hatch, label=label))
    rows = max(len(handles), 1)
    axes.legend(
        handles=handles, loc="upper left", bbox_to_anchor=(1.02, 1.0), fontsize=SMALL, frameon=False,
        borderaxespad=0.0, handlelength=1.2, labelspacing=LABEL_IN * 2 if rows < 20 else 0.1,
    )  # fmt: skip


def _legend(name: str, share: float) -> str:
    return f"{name}: {100 * share:.0f} %"


def _outline(longitude: Array, latitude: Array, mask: Array) -> Path:
    """Return the cells of a mask (lat, lon) as one path, a rectangle for each run of cells in a row."""
    east, north = _edges(longitude), _edges(latitude)
    corners = []
    for row in np.flatnonzero(mask.any(axis=1)):
        turns = np.flatnonzero(np.diff(np.concatenate([[0], mask[row].astype(int), [0]])))
        for begin, end in turns.reshape(-1, 2):
            x, y = (east[begin], east[end]), (north[row], north[row + 1])
            corners.append([(x[0], y[0]), (x[1], y[0]), (x[1], y[1]), (x[0], y[1]), (x[0], y[0])])
    codes = [Path.MOVETO, Path.LINETO, Path.LINETO, Path.LINETO, Path.CLOSEPOLY] * len(corners)
    return Path(np.array(corners).reshape(-1, 2), codes)


def _edges(middles: Array) -> Array:
    """Return the edges (n + 1,) of cells about their middles (n,)."""
    if len(middles) == 1:
        return np.array([middles[0] - 0.5, middles[0] + 0.5])
    between = (middles[1:] + middles[:-1]) / 2
    return np.concatenate([[2 * middles[0] - between[0]], between, [2 * middles[-1] - between[-1]]])


def _shades(figure: Figure, axes: Axes, here: Any, values: Array, label: str) -> None:
    finite = values[np.isfinite(values)]
    if finite.size == 0:
        return
    low, high = float(finite.min()), float(finite.max())
    if high - low < 1e-9:
        low, high = low - 0.5, high + 0.5
    norm = BoundaryNorm(np.linspace(low, high, 9), 256)
    mesh = axes.pcolormesh(here["longitude"], here["latitude"], values, cmap="cividis", norm=norm, shading="nearest")
    x, y, w, h = axes.get_position().bounds
    width = figure.get_figwidth()
    bar = figure.colorbar(mesh, figure.add_axes((x + w + 0.1 / width, y, 0.1 / width, h)), format="%.3g")
    bar.ax.set_title(label, fontsize=SMALL, fontweight="normal", loc="left", pad=8)
    bar.ax.tick_params(labelsize=SMALL)
