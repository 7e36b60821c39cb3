"""The weather of invented places: made by its script, closed, and of the climates it claims."""

import importlib.util
import sys
from pathlib import Path

import numpy as np
import pytest

from yieldsim import readers, screen
from yieldsim.sky import sun

FOLDER = Path(__file__).resolve().parents[2] / "weather_samples"


@pytest.fixture(scope="module")
def script():
    spec = importlib.util.spec_from_file_location("make_samples", FOLDER / "make_samples.py")
    module = importlib.util.module_from_spec(spec)
    sys.modules["make_samples"] = module  # dataclasses look their module up
    spec.loader.exec_module(module)
    yield module
    del sys.modules["make_samples"]


NAMES = ["amber_mesa", "mangrove_reach", "saltmarsh_point", "birchholm", "highmoor"]


def test_script_makes_the_committed_file(script):
    place = script.PLACES[2]
    made = script.text(place, script.make(place)).splitlines()
    kept = (FOLDER / script.file_name(place)).read_text(encoding="utf-8").splitlines()
    assert made[:9] == kept[:9]
    assert len(made) == len(kept) == 9 + 8760
    rows = [np.array([row.split(",")[1:] for row in lines[9:]], dtype=float) for lines in (made, kept)]
    # Other library versions may round the last printed digit (0.1 W/m2, 0.1 K, 1 Pa) the other way, not more.
    assert np.abs(rows[0] - rows[1]).max() <= 1.0
    assert (np.abs(rows[0] - rows[1]) > 1e-9).mean() <= 1e-3


# Yearly sums of climates of the kind, from memory: Sahara rim, equatorial coast, North Sea, steppe, high desert range.
@pytest.mark.parametrize(
    ("name", "low", "high"),
    [
        ("amber_mesa", 2100, 2300),
        ("mangrove_reach", 1700, 1900),
        ("saltmarsh_point", 1000, 1150),
        ("birchholm", 1250, 1450),
        ("highmoor", 1800, 2000),
    ],
)
def test_year(name, low, high):
    path = FOLDER / f"{name}.csv"
    assert path.stat().st_size < 700_000
    weather = readers.read(str(path))
    assert len(weather) == 8760
    assert any("invented" in note for note in weather.notes)
    assert low <= weather["ghi"].sum() / 1000 <= high
    course = sun.course(weather.time, 3600, weather.latitude_deg, weather.longitude_deg, weather.elevation_m)
    closure = weather["ghi"] - weather["dni"] * course.cos_zenith - weather["dhi"]
    # 0.05 W/m2 of rounding, and refraction at the place's own pressure where sun.course takes sea level's.
    assert np.sqrt(np.mean(closure**2)) < 0.3
    assert not screen.screen(weather).findings
    assert weather["ghi"].max() < 1.25 * 1361 * course.cos_zenith.max()  # cloud enhancement of hourly means stays below
    lit = course.cos_zenith > 0.2
    share = weather["dhi"][lit] / weather["ghi"][lit]
    assert share.min() > 0.04  # the purest high air still scatters
    assert np.corrcoef(share, weather["ghi"][lit] / course.cos_zenith[lit])[0, 1] < -0.8  # clear is blue, cloud is grey
