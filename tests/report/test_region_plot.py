"""The maps of a region: every cell in its winner's colour and hatching, told apart in grey, nothing overlapping."""

import itertools
from dataclasses import replace

import numpy as np
import pytest
import xarray as xr
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.patches import PathPatch
from matplotlib.text import Text

from yieldsim.report import canvas, region_plot

NAMES = [f"absorber {i} of a long name" for i in range(9)]


@pytest.fixture(scope="module")
def best():
    """Numbers of the winners (lat, lon), in patches; -1 where there is no weather."""
    y, x = np.mgrid[0:12, 0:15]
    numbers = 3 * (y // 4) + x // 5
    numbers[:2, :3] = -1
    return numbers


@pytest.fixture(scope="module")
def maps(best, factory):
    cells = ("mounting", "latitude", "longitude")
    margin = np.where(best >= 0, np.linspace(0, 0.1, best.size).reshape(best.shape), np.nan)
    region = xr.Dataset(
        {
            "best_absorber": (cells, best[None]),
            "margin": (cells, margin[None]),
            "best_gap_ev": (("mounting", "quality", "latitude", "longitude"), 1.3 + margin[None, None]),
        },
        {
            "latitude": 40 + 0.5 * np.arange(best.shape[0]),
            "longitude": 8 + 0.5 * np.arange(best.shape[1]),
            "mounting": ["fixed"],
            "absorber": NAMES,
            "quality": ["ideal"],
        },
    )
    with canvas.style():
        figure = region_plot.draw(replace(factory.make(["One"]), region=region))
        FigureCanvasAgg(figure).draw()
    return region, figure


def test_every_cell_carries_its_winners_hatching(maps, best):
    region, figure = maps
    hatched = [each for each in figure.axes[0].patches if isinstance(each, PathPatch)]
    middles = np.stack(np.meshgrid(region["longitude"], region["latitude"]), axis=-1).reshape(-1, 2)
    inside = [each.get_path().contains_points(middles).reshape(best.shape) for each in hatched]
    assert len(inside) == len(NAMES)
    for number, cells in enumerate(inside):
        np.testing.assert_array_equal(cells, best == number)


def test_no_two_winners_look_alike(maps):
    _, figure = maps
    keys = figure.axes[0].get_legend().get_patches()
    assert len({(each.get_facecolor(), each.get_hatch()) for each in keys}) == len(NAMES)
    assert len({each.get_hatch() for each in keys[:8]}) == 8  # in grey


def test_no_label_lies_over_another(maps):
    _, figure = maps
    boxes = [
        (text.get_text(), text.get_window_extent())
        for text in figure.findobj(Text)
        if text.get_text() and text.get_visible()
    ]
    over = [
        (one, two)
        for (one, a), (two, b) in itertools.combinations(boxes, 2)
        if min(a.x1, b.x1) - max(a.x0, b.x0) > 1 and min(a.y1, b.y1) - max(a.y0, b.y0) > 1
    ]
    assert not over
