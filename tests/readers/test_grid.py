"""Weather on a grid: cells, units, time bounds, blocks; and what is no grid."""

import numpy as np
import pytest
import xarray as xr

from yieldsim import readers
from yieldsim.errors import InputError
from yieldsim.readers import grid

N = 48
TIME = np.arange(N) * 3600 + 1_609_459_200  # 1 January 2021
LAT, LON = np.array([40.0, 40.5, 41.0]), np.array([8.0, 8.5])
DIMS = ("time", "latitude", "longitude")


def made(**changes):
    """An invented grid whose every cell differs."""
    cell = np.arange(6.0).reshape(3, 2)
    day = np.clip(np.sin(2 * np.pi * (np.arange(N) - 6) / 24), 0, None)[:, None, None]
    values = {
        "ghi": (500 * day + cell * (day > 0), "W m-2", None),
        "dni": (400 * day + cell * (day > 0), "W m-2", None),
        "dhi": (100 * day + 0 * cell, "W m-2", None),
        "t2m": (280.0 + cell + 0 * day, "K", "air_temperature"),
        "wind": (3.6 + 0 * cell + 0 * day, "km h-1", "wind_speed"),
    }
    data = {
        name: (DIMS, array, {"units": unit} | ({"standard_name": standard} if standard else {}))
        for name, (array, unit, standard) in values.items()
    }
    data["elevation"] = (("latitude", "longitude"), 100 * cell, {"units": "m"})
    time = ("time", TIME, {"units": "seconds since 1970-01-01", "standard_name": "time"})
    return xr.Dataset(data | changes, {"time": time, "latitude": LAT, "longitude": LON})


@pytest.fixture
def file(tmp_path):
    def write(dataset, name="weather.nc"):
        path = tmp_path / name
        dataset.to_netcdf(path, engine="h5netcdf")
        return path

    return write


def test_cells_lie_where_the_grid_says(file):
    found = grid.cells(file(made()), "weather.nc")
    assert [(each.row, each.column) for each in found] == [(i, j) for i in range(3) for j in range(2)]
    assert (found[3].latitude_deg, found[3].longitude_deg, found[3].elevation_m) == (40.5, 8.5, 300.0)


def test_cells_without_weather_are_left_out(file):
    dataset = made()
    dataset["ghi"][:, 1, 1] = np.nan
    assert (1, 1) not in [(each.row, each.column) for each in grid.cells(file(dataset), "weather.nc")]


def test_a_cell_is_read_in_our_units(file):
    path = str(file(made()))
    weather = readers.read(path, cell=(2, 1), shown="weather.nc")
    assert weather["temp_air"][0] == pytest.approx(280.0 + 5 - 273.15)
    assert weather["wind_speed"][0] == pytest.approx(1.0)
    assert weather["ghi"].max() == pytest.approx(505.0)
    assert np.array_equal(weather.time, TIME)
    assert (weather.latitude_deg, weather.longitude_deg, weather.elevation_m) == (41.0, 8.5, 500.0)
    assert weather.utc_offset_h == 1.0
    assert "[2, 1]" in weather.source


def test_blocks_change_nothing(file, monkeypatch):
    """However few cells a block holds, each cell has its own weather."""
    path = str(file(made()))
    whole = [readers.read(path, cell=(i, j))["ghi"].copy() for i in range(3) for j in range(2)]
    monkeypatch.setattr(grid, "BLOCK_BYTES", 1)
    grid._block.cache_clear()
    single = [readers.read(path, cell=(i, j))["ghi"] for i in range(3) for j in range(2)]
    grid._block.cache_clear()
    np.testing.assert_array_equal(whole, single)


@pytest.mark.parametrize(("shift", "label"), [(0, "start"), (3600, "end"), (1800, "middle")])
def test_time_bounds_tell_where_labels_sit(file, shift, label):
    dataset = made()
    edges = np.stack([TIME, TIME + 3600], axis=1)
    dataset = dataset.assign_coords(
        time=("time", TIME + shift, {"units": "seconds since 1970-01-01", "bounds": "time_bnds"})
    )
    dataset["time_bnds"] = (("time", "edge"), edges)
    weather = readers.read(str(file(dataset)), cell=(0, 0))
    assert np.array_equal(weather.time, TIME), label
    assert label in weather.label


def test_longitudes_beyond_180_are_west(file):
    dataset = made().assign_coords(longitude=np.array([350.0, 350.5]))
    found = grid.cells(file(dataset), "w")
    assert found[0].longitude_deg == pytest.approx(-10.0)
    assert readers.read(str(file(dataset, "again.nc")), cell=(0, 1)).longitude_deg == pytest.approx(-9.5)


def test_zarr_is_read_alike(tmp_path):
    pytest.importorskip("zarr", reason="zarr comes with the extra `cluster`")
    dataset = made()
    path = tmp_path / "weather.zarr"
    dataset.to_zarr(path, zarr_format=2, consolidated=True)
    dataset.to_netcdf(tmp_path / "weather.nc", engine="h5netcdf")
    for name in ("ghi", "temp_air"):
        one, two = (readers.read(str(tmp_path / f"weather.{kind}"), cell=(1, 0))[name] for kind in ("zarr", "nc"))
        np.testing.assert_array_equal(one, two)


@pytest.mark.parametrize(
    ("change", "told"),
    [
        (lambda d: d.drop_vars("dni"), "dni"),
        (lambda d: d.rename(latitude="y").drop_vars("y"), "latitude"),
        (lambda d: d.assign(t2m=d["t2m"].assign_attrs(units="furlong")), "furlong"),
    ],
)
def test_what_is_no_grid_of_weather_is_refused(file, change, told):
    path = file(change(made()))
    with pytest.raises(InputError, match=told):
        readers.read(str(path), cell=(0, 0), shown="weather.nc")


def test_text_for_a_grid_and_a_cell_beyond_it(tmp_path, file):
    path = tmp_path / "text.nc"
    path.write_text("no grid", encoding="utf-8")
    with pytest.raises(InputError, match="cannot be read"):
        grid.cells(path, "text.nc")
    with pytest.raises(InputError, match="3 x 2"):
        readers.read(str(file(made())), cell=(3, 0))
