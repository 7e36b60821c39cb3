import numpy as np
import pytest

from yieldsim.report import canvas, weather
from yieldsim.weather import Flag, Weather


@pytest.fixture(scope="module")
def year():
    """A made-up year: the sun is up from 6 to 18 h local time, brighter in June; five intervals are flagged."""
    time = np.arange(8760, dtype=np.int64) * 3600 + 1_672_531_200 - 5 * 3600  # 2023 in UTC+5
    local = np.arange(8760)
    hour, day = local % 24 + 0.5, local // 24
    ghi = np.maximum(0.0, np.sin(np.pi * (hour - 6) / 12)) * (500 - 300 * np.cos(2 * np.pi * day / 365))
    flags = np.zeros(8760, dtype=np.uint32)
    flags[:5] = int(Flag.NIGHT_LIGHT)
    columns = {"ghi": ghi, "dni": ghi * 0.5, "dhi": ghi * 0.4, "temp_air": ghi * 0 + 11.0, "wind_speed": ghi * 0 + 1.0}
    return Weather(-12.5, -77.0, 150.0, 5.0, time, 3600, columns, "made_up.csv", "start", flags, np.arange(8760))


def test_each_cell_stands_at_its_day_and_local_hour(year):
    with canvas.style():
        figure = weather.weather_picture("Made up", year)
    grid = np.ma.filled(figure.axes[0].images[0].get_array(), np.nan)
    assert grid.shape == (24, 366)
    assert grid[12, 181] == year["ghi"][181 * 24 + 12]
    assert np.nanmax(grid[:6]) == 0.0
    assert np.isnan(grid[:, 365]).all()  # a year without a leap day


def test_months_add_up_to_the_light_of_the_year(year):
    with canvas.style():
        figure = weather.weather_picture("Made up", year)
    axes = figure.axes[2]
    total = sum(bar.get_height() for bar in axes.patches)
    assert total == pytest.approx(year["ghi"].sum() / 1000, rel=1e-12)  # hourly W/m2; rounding only
    assert f"{year['ghi'].sum() / 1000:,.0f} kWh/m²" in axes.get_title(loc="left")


def test_flagged_intervals_are_counted_and_named(year):
    with canvas.style():
        figure = weather.weather_picture("Made up", year)
    _, labels = figure.axes[0].get_legend_handles_labels()
    assert labels == ["light at night, set to zero: 5"]
    assert any("12.50° S, 77.00° W, 150 m" in text.get_text() for text in figure.texts)


def test_every_flag_has_words():
    assert set(weather._WORDS) == set(Flag)


def test_files_have_safe_names_and_the_same_bytes(tmp_path, year):
    one = weather.write_weather_picture("../<b>", year, tmp_path / "a")
    two = weather.write_weather_picture("../<b>", year, tmp_path / "b")
    assert [file.parent.name for file in one] == ["a", "a"]
    for first, second in zip(one, two, strict=True):
        assert first.read_bytes() == second.read_bytes()
