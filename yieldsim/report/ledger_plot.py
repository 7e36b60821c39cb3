"""The ledger as a picture: one table of bars a site, a column for each fate of the light, all bars on one scale."""

from __future__ import annotations

import pandas as pd
from matplotlib.axes import Axes
from matplotlib.collections import PolyCollection
from matplotlib.figure import Figure

from yieldsim.report.canvas import GREY, SMALL, head, panels, text_width
from yieldsim.report.marks import COLOURS, shorten
from yieldsim.study.result import StudyResult

_KEYS = ("site", "mounting", "absorber")
_DELIVERED = "delivered"
_ROW_IN, _COLUMN_IN = 0.2, 0.62
_BAR = 0.62  # height of a bar [rows]
_NOTHING = 0.0005  # a fate below this share at every absorber has no column
_NAME_PT = 8.5


def draw(result: StudyResult, places: list[tuple[str, str]], names: list[str], more: str) -> Figure | None:
    """Return the picture, a panel for each place; None where the study has no ledger.

    Parameters
    ----------
    result : StudyResult
    places : (site, mounting) of each panel
    names : what to call them
    more : what to say where they are not all
    """
    table = result.ledger
    if table is None or table.empty:
        return None
    fates = [name for name in table.columns if name not in _KEYS]
    light = table[fates].sum(axis=1)
    shares = table[fates].div(light, axis=0)
    fates = [name for name in fates if name == _DELIVERED or float(shares[name].abs().max()) >= _NOTHING]
    widest = float(shares[fates].max().max())
    absorbers = [shorten(str(name), 32) for name in table["absorber"]]
    rows = max(int(((table["site"] == site) & (table["mounting"] == mounting)).sum()) for site, mounting in places)
    left = 0.25 + text_width(absorbers, _NAME_PT)
    slanted = text_width((_words(name) for name in fates), SMALL) * 0.75 + 0.2
    size = (_COLUMN_IN * len(fates), _ROW_IN * rows)
    figure, drawn = panels(len(places), 1, size, (left, slanted, 0.45, slanted + 0.3))
    for axes, title, (site, mounting) in zip(drawn, names, places, strict=True):
        mine = (table["site"] == site) & (table["mounting"] == mounting)
        _bars(axes, shares[mine], table[mine]["absorber"], fates, widest)
        axes.set_title(f"{title}: {light[mine].iloc[0]:,.0f} kWh/m² a year", pad=slanted * 72 + 4)
    head(figure, f"Where each year's light on the cells goes, in the order in which it meets its fates{more}")
    return figure


def _bars(axes: Axes, shares: pd.DataFrame, absorbers: pd.Series, fates: list[str], widest: float) -> None:
    bars, colours = [], []
    for x, fate in enumerate(fates):
        for y, share in enumerate(reversed(shares[fate].tolist())):
            left, right = x, x + 0.94 * max(share, 0.0) / widest
            low, high = y - _BAR / 2, y + _BAR / 2
            bars.append([(left, low), (right, low), (right, high), (left, high)])
            colours.append(COLOURS[5] if fate == _DELIVERED else "#d6c7ae")
            percent = f"{round(100 * share, 1) + 0.0:.1f}"  # adding nothing turns a negative zero into zero
            axes.text(x + 0.04, y, percent.replace("-", "−"), va="center", fontsize=SMALL)
        axes.axvline(x, color=GREY, linewidth=0.5)
        axes.text(
            x + 0.08, len(absorbers) - 0.3, _words(fate), rotation=48, rotation_mode="anchor", fontsize=SMALL,
            fontweight="bold" if fate == _DELIVERED else "normal",
        )  # fmt: skip
    axes.add_collection(PolyCollection(bars, facecolors=colours))  # one for all: hundreds of bars are slow
    axes.set_xlim(0, len(fates))
    axes.set_ylim(-0.6, len(absorbers) - 0.4)
    axes.set_yticks(range(len(absorbers)), [shorten(str(name), 32) for name in reversed(absorbers.tolist())])
    axes.set_xticks([])
    axes.tick_params(axis="y", length=0)
    axes.grid(visible=False)
    axes.set_xlabel("share of the light on the cells [%]")


def _words(fate: str) -> str:
    """Return a fate in words."""
    return fate.replace("nonradiative", "non-radiative").replace("_", " ")
