"""The pictures of a study, PNG and SVG, in one style; the same numbers give the same bytes."""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from pathlib import Path

import numpy as np
import pandas as pd
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from yieldsim.report import decision_plots, gap_pair_plot, generation_plot, ledger_plot, region_plot
from yieldsim.report.canvas import (
    GREY,
    LABEL_IN,
    LEAD_IN,
    SMALL,
    head,
    label_ends,
    panels,
    style,
    text_width,
    to_bytes,
)
from yieldsim.report.marks import Mark, mark, plateau, shorten, spread
from yieldsim.study import store
from yieldsim.study.result import STANDARD_SITE, StudyResult, edges_nm

MOST_PANELS = 24  # beyond that a picture is no longer looked at; the page and the tables hold all
_MONTHS = tuple("JFMAMJJASOND")
_RED_END_NM = 1800.0  # beyond it there is little light and no common absorber's edge
_STANDARD = Mark(GREY, (4.0, 2.0), "D")


def write_plots(result: StudyResult, folder: Path, only: Collection[str] | None = None) -> list[Path]:
    """Draw every picture a result has the numbers for, as SVG and PNG, and return the files.

    Parameters
    ----------
    result : StudyResult
    folder : Path of the pictures
    only : names of `PICTURES` to draw, all if left out

    Raises
    ------
    PlaceError
        Where the folder cannot be written.
    """
    files = []
    for name, draw in PICTURES.items():
        if only is not None and name not in only:
            continue
        with style():
            figure = draw(result)
            if figure is None:
                continue
            for suffix in ("svg", "png"):
                path = folder / f"{name}.{suffix}"
                with store.whole_file(path) as temporary:
                    temporary.write_bytes(to_bytes(figure, suffix, name))
                files.append(path)
    return files


def places(table: pd.DataFrame) -> list[tuple[str, str]]:
    """Return (site, mounting) in the order they come, without repeats and without the standard spectrum."""
    found = dict.fromkeys(zip(table["site"], table["mounting"], strict=True))
    return [place for place in found if place[0] != STANDARD_SITE]


def _first(table: pd.DataFrame) -> tuple[list[tuple[str, str]], str]:
    """Return the places a picture shows, and what to say where they are not all."""
    found = places(table)
    left_out = f" (the first {MOST_PANELS} of {len(found)} places)" if len(found) > MOST_PANELS else ""
    return found[:MOST_PANELS], left_out


def place_names(chosen: list[tuple[str, str]]) -> list[str]:
    """Return what sites and mountings are called in a picture: the mounting only where there are several."""
    several = len({mounting for _, mounting in chosen}) > 1
    return [f"{shorten(site)}, {shorten(mounting, 16)}" if several else shorten(site) for site, mounting in chosen]


def _at(table: pd.DataFrame, place: tuple[str, str]) -> pd.DataFrame:
    return table[(table["site"] == place[0]) & (table["mounting"] == place[1])]


def annual_yield(result: StudyResult) -> Figure | None:
    """Draw the year's specific yield: a panel per site, a row per absorber, best on top, all panels of one span."""
    table = result.annual
    if table.empty:
        return None
    chosen, more = _first(table)
    number = {name: i for i, name in enumerate(result.standard["absorber"])}
    frames = [_at(table, place).sort_values("specific_yield_kwh_kwp", kind="stable") for place in chosen]
    spans = [float(np.ptp(frame["specific_yield_kwh_kwp"].to_numpy())) for frame in frames]
    span = max(*spans, 1.0) * 1.25
    rows = max(len(frame) for frame in frames)
    left = 0.3 + text_width((shorten(name, 32) for name in table["absorber"].unique()), 8.5)
    figure, drawn = panels(len(chosen), 2, (3.3, 0.2 + 0.19 * rows), (left, 0.25, 0.55, 0.4))
    for axes, title, frame in zip(drawn, place_names(chosen), frames, strict=True):
        values = frame["specific_yield_kwh_kwp"].to_numpy()
        middle = (values.min() + values.max()) / 2
        axes.set_xlim(middle - span * 0.48, middle + span * 0.6)
        axes.set_ylim(-0.7, len(frame) - 0.3)
        axes.set_title(title)
        axes.set_yticks(range(len(frame)), [shorten(name, 32) for name in frame["absorber"]])
        for y, (name, value) in enumerate(zip(frame["absorber"], values, strict=True)):
            _dot(axes, value, y, mark(number[name]), name == result.reference)
        axes.tick_params(axis="y", length=0)
        axes.xaxis.set_major_locator(MaxNLocator(5))
        axes.set_xlabel("specific yield [kWh/kWp a year]")
    reference = shorten(result.reference, 32)
    head(
        figure,
        f"Yield per rated power, best on top; dashed: {reference}, the reference; all panels span the same{more}",
    )
    return figure


def _dot(axes: Axes, value: float, y: int, look: Mark, is_reference: bool) -> None:
    axes.plot(value, y, look.marker, color=look.colour, markersize=7 if is_reference else 5.5)
    clear = {"facecolor": "white", "edgecolor": "none", "pad": 0.6}
    axes.annotate(
        f"{value:,.0f}", (value, y), (7, 0), textcoords="offset points", va="center", fontsize=SMALL, bbox=clear
    )
    if is_reference:
        axes.axvline(value, color=GREY, linewidth=0.8, dashes=(3, 3), zorder=1)


def spectral_factor(result: StudyResult) -> Figure | None:
    """Draw the spectral factor month by month: a panel per site, a line per absorber, labelled at its end."""
    table = result.monthly
    if table is None or table["spectral_factor"].notna().sum() == 0:
        return None
    chosen, more = _first(table)
    names = list(result.standard["absorber"])
    size = (3.6, max(2.0, 0.2 + LABEL_IN * len(names)))
    right = LEAD_IN + 0.25 + text_width(shorten(name, 32) for name in names)
    figure, drawn = panels(len(chosen), 2, size, (0.75, right, 0.55, 0.4))
    low, high = float(table["spectral_factor"].min()), float(table["spectral_factor"].max())
    pad = 0.04 * max(high - low, 0.01)
    for axes, title, place in zip(drawn, place_names(chosen), chosen, strict=True):
        frame = _at(table, place)
        ends = []
        axes.axhline(1.0, color=GREY, linewidth=0.9)
        for i, name in enumerate(names):
            line = frame[frame["absorber"] == name].set_index("month")["spectral_factor"].dropna()
            if line.empty:
                continue
            dashes = mark(i).dash or (None, None)
            axes.plot(line.index, line, mark(i).marker + "-", color=mark(i).colour, dashes=dashes, markersize=3)
            ends.append((float(line.iloc[-1]), shorten(name, 32), mark(i)))
        axes.set_xlim(0.7, 12.3)
        axes.set_ylim(low - pad, high + pad)
        axes.set_xticks(range(1, 13), _MONTHS)
        axes.set_title(title)
        axes.set_ylabel("spectral factor [1]")
        axes.set_xlabel("month")
        label_ends(axes, ends, float(frame["month"].max()), size)
    head(figure, f"Gain or loss by the colour of the light; 1 = as under the standard spectrum{more}")
    return figure


def energy_over_gap(result: StudyResult) -> Figure | None:
    """Draw annual energy over gap: a panel per quality, a curve per site, the standard spectrum beside them."""
    table = result.gap_sweep
    if table is None or table.empty:
        return None
    qualities = list(dict.fromkeys(table["quality"]))
    chosen, more = _first(table)
    names = [*place_names(chosen), STANDARD_SITE]
    size = (5.2, max(2.9, LABEL_IN * (len(names) + 2)))
    right = LEAD_IN + 0.25 + text_width(f"{name}: 0.00 (0.00–0.00)" for name in names)
    figure, drawn = panels(len(qualities), 1, size, (0.75, right, 0.55, 0.4))
    for axes, quality in zip(drawn, qualities, strict=True):
        frame = table[table["quality"] == quality]
        ends = []
        for i, (place, name) in enumerate(zip([*chosen, (STANDARD_SITE, "")], names, strict=True)):
            curve = _at(frame, place).sort_values("gap_ev")
            if not curve.empty:
                ends.append(_gap_curve(axes, curve, name, _STANDARD if place[0] == STANDARD_SITE else mark(i)))
        last = float(frame["gap_ev"].max())
        axes.set_title(f"Absorbers of quality: {shorten(quality)}")
        axes.set_ylim(bottom=0)
        axes.set_xlim(float(frame["gap_ev"].min()), last)
        axes.set_xlabel("gap [eV]")
        axes.set_ylabel("energy [kWh/m² a year]")
        label_ends(axes, ends, last, size)
    head(
        figure,
        "Labels: best gap (stretch within 1 % of it) [eV], both marked. "
        f"Standard spectrum: 1000 kWh/m² of it on cells at 25 °C{more}",
    )
    return figure


def _gap_curve(axes: Axes, curve: pd.DataFrame, name: str, look: Mark) -> tuple[float, str, Mark]:
    """Draw one curve with its best gap and plateau marked; return the label of its end."""
    gap, energy = curve["gap_ev"].to_numpy(), curve["energy_kwh_m2"].to_numpy()
    best, low, high = plateau(gap, energy)
    axes.plot(gap, energy, color=look.colour, dashes=look.dash or (None, None), linewidth=1.2)
    inside = np.concatenate([[low], gap[(gap > low) & (gap < high)], [high]])
    flat = np.interp(inside, gap, energy)
    axes.plot(inside, flat, color=look.colour, linewidth=5, alpha=0.35, solid_capstyle="butt")
    axes.plot(best, energy.max(), look.marker, color=look.colour, markersize=5.5)
    return float(energy[-1]), f"{name}: {best:.2f} ({low:.2f}–{high:.2f})", look


def spectra(result: StudyResult) -> Figure | None:
    """Draw a site's spectra at clear noon, low sun and under an overcast, with the absorbers' edges."""
    if not result.spectra:
        return None
    # The first site that has all three hours; else the one that has most.
    site, dataset = max(result.spectra.items(), key=lambda item: len(typical_moments(item[1])))
    names = [shorten(name, 32) for name in result.standard["absorber"]]
    figure, (axes,) = panels(1, 1, (8.6, 3.6), (0.75, 0.6, 0.55, 0.2 + 0.8 * text_width(names)))
    edges = np.append(dataset["band_edges"].values[:, 0], dataset["band_edges"].values[-1, 1])
    for i, (text, at) in enumerate(typical_moments(dataset)):
        bands = dataset["plane_of_array"].values[0, at]
        label = f"{text}: {bands.sum():,.0f} W/m²"
        axes.stairs(bands / np.diff(edges), edges, color=mark(i).colour, linewidth=1.3, label=label, baseline=None)
    axes.set_xlim(edges[0], _RED_END_NM)
    axes.set_ylim(bottom=0)
    axes.set_xlabel("wavelength [nm]")
    axes.set_ylabel("plane-of-array irradiance [W/(m² nm)]")
    axes.legend(loc="upper right", framealpha=1.0, edgecolor="none", handlelength=1.4)
    _label_edges(axes, result)
    head(figure, f"{shorten(site)}: the light of three hours on the plane, and the edges of the absorbers")
    return figure


def _label_edges(axes: Axes, result: StudyResult) -> None:
    """Mark each absorber's edges by a line, its name on a slant above, none over another."""
    edges = [
        (edge, i, name)
        for i, (name, gaps) in enumerate(zip(result.standard["absorber"], result.standard["gap_ev"], strict=True))
        for edge in edges_nm(gaps)
        if edge <= _RED_END_NM
    ]
    above = axes.get_xaxis_transform()
    where = spread([edge for edge, _, _ in edges], 30.0, 290.0, _RED_END_NM)
    for (edge, i, name), place in zip(edges, where, strict=True):
        look, text = mark(i), shorten(name, 32)
        axes.axvline(edge, color=look.colour, linewidth=0.8, dashes=look.dash or (None, None), zorder=1)
        axes.plot([edge, place], [1.0, 1.045], color=look.colour, linewidth=0.7, transform=above, clip_on=False)
        axes.text(place, 1.055, text, transform=above, rotation=50, rotation_mode="anchor", va="center", fontsize=SMALL)


def typical_moments(dataset: xr.Dataset) -> list[tuple[str, int]]:
    """Return (name, position) of three telling hours: the clearest high sun, clear low sun, and the thickest cloud."""
    cloud = dataset["cloud_optical_depth"].values
    height = 90 - dataset["zenith"].values
    light = dataset["plane_of_array"].values[0].sum(axis=-1)
    clear = (cloud < 0.5) & (light > 20)
    # Cloud depth is that of the obscured part of an hour: an overcast also sends no beam.
    beam = dataset["dni"].values * np.cos(np.radians(dataset["zenith"].values))
    dull = (cloud > 3) & (height > 15) & (beam < 0.02 * dataset["ghi"].values)
    found: list[tuple[str, int]] = []
    if clear.any():
        noon = int(np.argmax(np.where(clear, light, -1.0)))
        low = int(np.argmin(np.where(clear, np.abs(height - 12), np.inf)))
        found += [("clear, high sun", noon)] + ([("clear, low sun", low)] if low != noon else [])
    if dull.any():
        found.append(("overcast", int(np.argmax(np.where(dull, cloud, -1.0)))))
    return [(f"{name} ({height[at]:.0f}° up)", at) for name, at in found]


def ledger(result: StudyResult) -> Figure | None:
    """Draw where each year's light goes: a table of bars a site."""
    chosen, more = _first(result.annual)
    return ledger_plot.draw(result, chosen, place_names(chosen), more)


def gap_pairs(result: StudyResult) -> Figure | None:
    """Draw annual energy over the gaps of two junctions: a map for each place and kind."""
    chosen, more = _first(result.annual)
    return gap_pair_plot.draw(result, chosen, place_names(chosen), more)


def _of_decision(draw: Callable[..., Figure | None]) -> Callable[[StudyResult], Figure | None]:
    """Return what draws a picture of the decision, a panel for each place."""

    def drawn(result: StudyResult) -> Figure | None:
        chosen, more = _first(result.annual)
        return draw(result, chosen, place_names(chosen), more)

    return drawn


#: Picture -> what draws it; a picture without numbers is left out.
PICTURES: Mapping[str, Callable[[StudyResult], Figure | None]] = {
    "annual_yield": annual_yield,
    "spectral_factor": spectral_factor,
    "energy_over_gap": energy_over_gap,
    "spectra": spectra,
    "ledger": ledger,
    "gap_pairs": gap_pairs,
    "generation": generation_plot.draw,
    "region": region_plot.draw,
    "margins": _of_decision(decision_plots.margins),
    "regret": _of_decision(decision_plots.regret),
    "break_even": _of_decision(decision_plots.break_even),
    "causes": _of_decision(decision_plots.causes),
}
