"""What the pictures are drawn on: one style, panels of measured size, labels beside lines, and the bytes of a file."""

from __future__ import annotations

import io
import warnings
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from importlib import resources
from typing import Any

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties
from matplotlib.textpath import text_to_path

from yieldsim.report.marks import Mark, spread

GREY = "#5b6672"
SMALL = 7.5  # points, of labels
LABEL_IN = 0.135  # height of a line of label [in]
LEAD_IN = 0.2  # from the end of a line to its label [in]
_HEAD_IN = 0.35  # room for the line of text above all panels [in]

Margins = tuple[float, float, float, float]  # left, right, bottom, top [in]


@contextmanager
def style() -> Iterator[None]:
    """Set the one style for a block, whatever the user's own settings are.

    A name may hold signs that the font lacks: they show as boxes in a picture and as themselves on the page, so the
    warning about them is kept quiet.
    """
    with mpl.rc_context(), warnings.catch_warnings():
        mpl.rcdefaults()
        with resources.as_file(resources.files(__package__) / "yieldsim.mplstyle") as path:
            mpl.rcParams.update(mpl.rc_params_from_file(path, use_default_template=False))
        warnings.filterwarnings("ignore", message="(?i).*(glyph|font)")
        yield


def to_bytes(figure: Figure, suffix: str, name: str) -> bytes:
    """Return a figure as ``svg`` or ``png``: no date, a fixed salt for the names inside, so the same each time."""
    out = io.BytesIO()
    metadata: dict[str, Any] = {"Date": None, "Creator": "yieldsim"} if suffix == "svg" else {"Software": "yieldsim"}
    with mpl.rc_context({"svg.hashsalt": name}):
        figure.savefig(out, format=suffix, metadata=metadata)
    return out.getvalue()


def text_width(texts: Iterable[str], size: float = SMALL) -> float:
    """Return the width of the widest of some texts in the font of the pictures [in]; ``size`` in points."""
    font = FontProperties(size=size)
    widths = (text_to_path.get_text_width_height_descent(text, font, ismath=False)[0] for text in set(texts))
    return float(max(widths, default=0.0)) / 72


def panels(count: int, columns: int, size: tuple[float, float], margins: Margins) -> tuple[Figure, list[Axes]]:
    """Return a figure with a grid of panels of one size, filled row by row, room for a line above; all in [in].

    Placed by hand: room for labels is measured first, which is surer and faster than drawing twice to find it.
    """
    columns = min(columns, count)
    rows = -(-count // columns)
    left, right, bottom, top = margins
    cell = (size[0] + left + right, size[1] + bottom + top)
    width, height = columns * cell[0], rows * cell[1] + _HEAD_IN
    figure = Figure(figsize=(width, height))
    found = []
    for i in range(count):
        x = (i % columns) * cell[0] + left
        y = (rows - 1 - i // columns) * cell[1] + bottom
        found.append(figure.add_axes((x / width, y / height, size[0] / width, size[1] / height)))
    return figure, found


def head(figure: Figure, text: str) -> None:
    """Write a line above all panels: how to read the picture."""
    x, y = 0.12 / figure.get_figwidth(), 1 - 0.24 / figure.get_figheight()
    figure.text(x, y, text, fontsize=8.5, color=GREY)


def label_ends(
    axes: Axes, ends: Sequence[tuple[float, str, Mark]], end: float | Sequence[float], size: tuple[float, float]
) -> None:
    """Write a label to the right of each line's end, none over another, a hair line leading to it.

    Parameters
    ----------
    axes : Axes with its limits set
    ends : (y of the line's end, text, mark of the line) each
    end : x of the lines' ends, one for all or one each
    size : of the panel [in]
    """
    low, high = axes.get_ylim()
    left, right = axes.get_xlim()
    label_x = right + LEAD_IN * (right - left) / size[0]
    gap = (high - low) * LABEL_IN / size[1]
    at = [end] * len(ends) if isinstance(end, (int, float)) else end
    places = spread([y for y, _, _ in ends], gap, low, high)
    for x, (y, text, mark), place in zip(at, ends, places, strict=True):
        axes.plot([x, label_x], [y, place], color=mark.colour, linewidth=0.7, clip_on=False)
        axes.plot(label_x, place, mark.marker, color=mark.colour, markersize=4, clip_on=False)
        axes.annotate(
            text,
            (label_x, place),
            (5, 0),
            textcoords="offset points",
            fontsize=SMALL,
            va="center",
            annotation_clip=False,
        )
    axes.set_xlim(left, right)
    axes.set_ylim(low, high)
