"""One picture of a site's weather file: its light by day and hour, its months, and what was mended."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import Colormap, LinearSegmentedColormap
from matplotlib.figure import Figure
from matplotlib.image import AxesImage
from numpy.typing import NDArray

from yieldsim.report.canvas import GREY, SMALL, head, panels, style, to_bytes
from yieldsim.report.marks import COLOURS, position, shorten
from yieldsim.screen.clear import clear_global
from yieldsim.sky import sun
from yieldsim.study import store
from yieldsim.weather import Flag, Weather

_MONTHS = tuple("JFMAMJJASOND")
_MONTH_STARTS = np.cumsum([0, 31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30])  # day of the year each month starts on
_LIGHT = LinearSegmentedColormap.from_list("light", ["#0b1f33", "#0072B2", "#E6D9A8", "#fff6d6"])
_WORDS = {
    Flag.NIGHT_LIGHT: "light at night, set to zero",
    Flag.NEGATIVE: "negative light, set to zero",
    Flag.MENDED_LIGHT: "light mended",
    Flag.MENDED_AIR: "temperature, wind or humidity mended",
    Flag.GAP: "left out",
    Flag.DNI_LIMITED: "beam limited",
}


def write_weather_picture(site: str, weather: Weather, folder: Path) -> list[Path]:
    """Draw a site's weather as ``<site>.svg`` and ``<site>.png`` in a folder and return the files.

    Parameters
    ----------
    site : str, its name in the study
    weather : Weather, screened
    folder : Path

    Raises
    ------
    PlaceError
        Where the folder cannot be written.
    """
    stem = store.file_stem(site)
    files = []
    with style():
        figure = weather_picture(site, weather)
        for suffix in ("svg", "png"):
            with store.whole_file(folder / f"{stem}.{suffix}") as temporary:
                temporary.write_bytes(to_bytes(figure, suffix, "weather"))
            files.append(folder / f"{stem}.{suffix}")
    return files


def weather_picture(site: str, weather: Weather) -> Figure:
    """Return the picture: global light over day and hour with flagged intervals, and the light of each month."""
    middle = weather.time + weather.interval_s // 2 + round(weather.utc_offset_h * 3600)
    stamps = middle.astype("datetime64[s]")
    day = (stamps.astype("datetime64[D]") - stamps.astype("datetime64[Y]")).astype(np.int64)
    hour = (middle % 86400) / 3600.0
    figure, (carpet, clearness, months) = panels(3, 1, (8.6, 2.3), (0.75, 0.9, 0.55, 0.4))
    _carpet(figure, carpet, weather, day, hour)
    _clearness(figure, clearness, weather, day, hour)
    _months(months, weather, stamps.astype("datetime64[M]").astype(np.int64) % 12)
    years = np.unique(stamps.astype("datetime64[Y]")).astype(str)
    span = "a typical year" if weather.typical else f"{years[0]}–{years[-1]}" if len(years) > 1 else years[0]
    place = position(weather.latitude_deg, weather.longitude_deg, weather.elevation_m)
    head(figure, f"{shorten(site)} ({place}), {span}: {shorten(weather.source, 60)}")
    return figure


def _clearness(figure: Figure, axes: Axes, weather: Weather, day: NDArray[np.int64], hour: NDArray[np.float64]) -> None:
    """Draw global light over that of a clear sky: a clock that is off tilts it, shade and levels cut into it."""
    course = sun.course(
        weather.time, weather.interval_s, weather.latitude_deg, weather.longitude_deg, weather.elevation_m
    )
    clear = clear_global(weather, course)
    with np.errstate(divide="ignore", invalid="ignore"):
        index = np.where(clear > 20.0, weather["ghi"] / clear, np.nan)
    drawn = _grid(axes, weather, day, hour, index, ("cividis", 0.0, 1.2))
    axes.set_title("Clear-sky index: global light over that of a clear sky at the place", color=GREY)
    _frame(figure, axes, drawn, "clear-sky index [1]")


def _carpet(figure: Figure, axes: Axes, weather: Weather, day: NDArray[np.int64], hour: NDArray[np.float64]) -> None:
    drawn = _grid(axes, weather, day, hour, weather["ghi"], (_LIGHT, 0.0, 1100.0))
    for i, (flag, words) in enumerate(_WORDS.items()):
        at = (weather.flags & int(flag)) > 0
        if at.any():
            label = f"{words}: {int(at.sum())}"
            colour = COLOURS[(i + 1) % len(COLOURS)]
            axes.plot(day[at] + 0.5, hour[at], "s", color=colour, markersize=2.5, markeredgewidth=0, label=label)
    if axes.get_legend_handles_labels()[0]:
        axes.legend(loc="lower left", bbox_to_anchor=(0, 1.0), ncols=3, frameon=False, fontsize=SMALL, markerscale=2)
    _frame(figure, axes, drawn, "global light [W/m²]")


def _grid(
    axes: Axes,
    weather: Weather,
    day: NDArray[np.int64],
    hour: NDArray[np.float64],
    values: NDArray[np.float64],
    shades: tuple[Colormap | str, float, float],
) -> AxesImage:
    """Draw values over the day of the year and the hour of the day."""
    step_h = weather.interval_s / 3600.0
    rows = round(24 / step_h)
    grid = np.full((rows, 366), np.nan)
    grid[np.minimum((hour / step_h).astype(np.int64), rows - 1), day] = values
    colours, low, high = shades
    axes.grid(False)
    return axes.imshow(
        grid, aspect="auto", origin="lower", extent=(0, 366, 0, 24), cmap=colours, vmin=low, vmax=high,
        interpolation="nearest",
    )  # fmt: skip


def _frame(figure: Figure, axes: Axes, drawn: AxesImage, label: str) -> None:
    axes.set_xlim(0, 365)
    axes.set_xticks(_MONTH_STARTS + 15, _MONTHS)
    axes.set_yticks(range(0, 25, 6))
    axes.set_ylabel("hour, local standard time [h]")
    axes.set_xlabel("month")
    box = axes.get_position()
    bar = figure.colorbar(drawn, cax=figure.add_axes((box.x1 + 0.012, box.y0, 0.012, box.height)))
    bar.set_label(label)
    bar.outline.set_visible(False)


def _months(axes: Axes, weather: Weather, month: NDArray[np.int64]) -> None:
    step_h = weather.interval_s / 3600.0
    sums = {
        name: np.bincount(month, np.nan_to_num(weather[name]), minlength=12) * step_h / 1000.0
        for name in ("ghi", "dhi")
    }
    at = np.arange(12)
    axes.bar(at, sums["dhi"], 0.7, color=COLOURS[5], label="from the sky")
    axes.bar(at, sums["ghi"] - sums["dhi"], 0.7, bottom=sums["dhi"], color=COLOURS[4], label="beam")
    for i in at:
        axes.annotate(
            f"{sums['ghi'][i]:.0f}",
            (i, sums["ghi"][i]),
            (0, 3),
            textcoords="offset points",
            ha="center",
            fontsize=SMALL,
        )
    axes.grid(False, axis="x")
    axes.set_xticks(at, _MONTHS)
    axes.set_xlim(-0.6, 11.6)
    axes.margins(y=0.12)
    axes.set_xlabel("month")
    axes.set_ylabel("light on the horizontal [kWh/m²]")
    axes.legend(loc="lower right", bbox_to_anchor=(1, 1.0), ncols=2, frameon=False, fontsize=SMALL)
    axes.set_title(
        f"{sums['ghi'].sum():,.0f} kWh/m² in all; air at {np.nanmean(weather['temp_air']):.1f} °C", color=GREY
    )
