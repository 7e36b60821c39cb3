"""Weather on a grid: CF NetCDF or Zarr with time, latitude and longitude, read in blocks of cells.

grid.cells(path, "weather.nc")          # which cells hold weather, and where they lie
grid.rows(path, "weather.nc", (3, 5))   # the weather of one of them
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import xarray as xr
from numpy.typing import NDArray

from yieldsim.errors import InputError, Problem
from yieldsim.readers import _units
from yieldsim.readers._raw import Raw
from yieldsim.weather import COLUMNS, REQUIRED

FORMAT = "grid"
BLOCK_BYTES = 64_000_000  # of weather held at once by a process
MOST_CELLS = 1_000_000
MOST_MOMENTS = 40_000_000  # 75 years of minutes
_LOOKED_AT = 48  # intervals at the start that tell whether a cell holds weather
_SECONDS_A_DAY = 86_400

#: CF standard name -> our column and unit as CF writes it; other units are turned into these.
STANDARD_NAMES = {
    "surface_downwelling_shortwave_flux_in_air": "ghi",
    "surface_direct_along_beam_shortwave_flux_in_air": "dni",
    "surface_diffuse_downwelling_shortwave_flux_in_air": "dhi",
    "air_temperature": "temp_air",
    "relative_humidity": "relative_humidity",
    "dew_point_temperature": "temp_dew",
    "wind_speed": "wind_speed",
    "surface_air_pressure": "pressure",
    "air_pressure": "pressure",
    "atmosphere_mass_content_of_water_vapor": "precipitable_water",
    "surface_albedo": "albedo",
    "surface_snow_thickness": "snow_depth",
}
ELEVATIONS = ("elevation", "elevation_m", "surface_altitude", "altitude", "orography", "height")


@dataclass(frozen=True, slots=True)
class GridCell:
    """One cell of a grid: its place in it, where it lies, and how high [m], None where the grid does not tell."""

    row: int
    column: int
    latitude_deg: float
    longitude_deg: float
    elevation_m: float | None


def cells(path: Path, shown: str) -> list[GridCell]:
    """Return the cells of a grid that hold weather, along latitude, then longitude.

    Parameters
    ----------
    path : Path of a NetCDF file or a Zarr folder
    shown : str, what messages call it

    Raises
    ------
    InputError
        For a file that is no such grid.
    """
    about = _about(str(path), shown)
    if about.latitude.size * about.longitude.size > MOST_CELLS:
        found = f"{about.latitude.size} x {about.longitude.size} cells"
        raise InputError(Problem(shown, 0, "", found, f"at most {MOST_CELLS}"))
    with opened(str(path), shown) as dataset:
        names = about.names
        first = dataset[names.columns["ghi"]].isel({names.time: slice(0, _LOOKED_AT)})
        filled = np.isfinite(first.transpose(names.time, names.lat, names.lon).values).any(axis=0)
    return [
        GridCell(int(i), int(j), float(about.latitude[i]), float(about.longitude[j]), about.elevation((i, j)))
        for i, j in np.argwhere(filled)
    ]


def rows(path: str, shown: str, cell: tuple[int, int]) -> Raw:
    """Return the rows of one cell.

    Parameters
    ----------
    path : str
    shown : str
    cell : (row, column) along latitude and longitude

    Raises
    ------
    InputError
        For a cell beyond the grid or without the columns a year needs.
    """
    about = _about(path, shown)
    shape = about.latitude.size, about.longitude.size
    if not (cell[0] < shape[0] and cell[1] < shape[1]):
        raise InputError(Problem(shown, 0, "cell", f"{list(cell)}", f"a cell of {shape[0]} x {shape[1]}"))
    height = about.elevation(cell)
    longitude = float(about.longitude[cell[1]])
    block = _block(path, shown, *_corner(about, cell))
    i, j = cell[0] - block.row, cell[1] - block.column
    columns = {name: np.ascontiguousarray(values[:, i, j]) for name, values in block.columns.items()}
    return Raw(
        shown=f"{shown} [{cell[0]}, {cell[1]}]",
        name="",
        latitude_deg=float(about.latitude[cell[0]]),
        longitude_deg=longitude,
        elevation_m=height or 0.0,
        utc_offset_h=float(round(longitude / 15)),
        clock_offset_s=0,
        label=block.label,
        clock="UTC",
        time=block.time,
        interval_s=block.interval_s,
        row=np.arange(1, len(block.time) + 1, dtype=np.int64),  # the number of the value along time
        columns={name: values for name, values in columns.items() if np.isfinite(values).any() or name in REQUIRED},
        notes=("no elevation in the grid: taken for sea level",) if height is None else (),
    )


# ------------------------------------------------------------------------------------------------ what is in it


@dataclass(frozen=True, slots=True)
class _Names:
    """What the dimensions and our columns are called in a file."""

    time: str
    lat: str
    lon: str
    columns: dict[str, str]


@dataclass(frozen=True, slots=True)
class _About:
    """What a grid is made of; longitudes from -180 to 180."""

    names: _Names
    latitude: NDArray[np.float64]
    longitude: NDArray[np.float64]
    height: NDArray[np.float64] | None
    intervals: int

    def elevation(self, cell: tuple[int, int]) -> float | None:
        """Return the elevation of a cell [m]; None where the grid does not tell."""
        if self.height is None or not np.isfinite(self.height[cell]):
            return None
        return float(self.height[cell])


@dataclass(frozen=True, slots=True)
class _Block:
    """Weather of a block of cells, its first one at (row, column); columns are (time, row, column)."""

    row: int
    column: int
    time: NDArray[np.int64]
    interval_s: int | None
    label: str
    columns: dict[str, NDArray[np.float64]]


@contextmanager
def opened(path: str, shown: str) -> Iterator[xr.Dataset]:
    """Give what is in a NetCDF file or a Zarr folder, times as they are written.

    Raises
    ------
    InputError
        For anything else, and for whatever goes wrong while it is read: damaged bytes can trip the libraries anywhere,
        with any exception.
    """
    try:
        with _dataset(path, shown) as dataset:
            yield dataset
    except InputError:
        raise
    except Exception as error:
        reason = str(error).splitlines()[0][:120] if str(error) else type(error).__name__
        raise InputError(Problem(shown, 0, "", f"it cannot be read ({reason})", "CF NetCDF 4 or Zarr")) from None


def _dataset(path: str, shown: str) -> xr.Dataset:
    if Path(path).is_dir():
        try:
            folder: xr.Dataset = xr.open_zarr(path, chunks=None, decode_times=False)
        except ImportError:
            allowed = 'NetCDF, or Zarr with pip install "yieldsim[cluster]"'
            raise InputError(Problem(shown, 0, "", "a Zarr folder, and zarr is not installed", allowed)) from None
        return folder
    with Path(path).open("rb") as stream:
        classic = stream.read(3) == b"CDF"
    if not classic:
        _refuse_endless(path, shown)
    return xr.open_dataset(path, engine="scipy" if classic else "h5netcdf", decode_times=False)


def _refuse_endless(path: str, shown: str) -> None:
    """Raise InputError for an axis too long to hold; opening would read it whole, and packed it takes no room."""
    with h5py.File(path) as file:
        for name in file:
            variable = file.get(name)
            if isinstance(variable, h5py.Dataset) and variable.ndim == 1 and variable.size > MOST_MOMENTS:
                found = f"{variable.size} values"
                raise InputError(Problem(shown, 0, str(name), found, f"at most {MOST_MOMENTS} moments"))


@lru_cache(maxsize=2)
def _about(path: str, shown: str) -> _About:
    with opened(path, shown) as dataset:
        names = _names(dataset, shown)
        latitude, longitude = (np.asarray(dataset[name].values, dtype=np.float64) for name in (names.lat, names.lon))
        height = None
        for key in ELEVATIONS:
            if key in dataset.variables and set(dataset[key].dims) == {names.lat, names.lon}:
                height = np.asarray(dataset[key].transpose(names.lat, names.lon).values, dtype=np.float64)
                break
        return _About(names, latitude, (longitude + 180) % 360 - 180, height, dataset.sizes[names.time])


def _names(dataset: xr.Dataset, shown: str) -> _Names:
    found: dict[str, str] = {}
    for axis, words in (("time", ("time",)), ("latitude", ("latitude", "lat")), ("longitude", ("longitude", "lon"))):
        for name in dataset.dims:
            attributes = dataset[name].attrs if name in dataset.variables else {}
            if attributes.get("standard_name") == axis or str(name).lower() in words:
                found[axis] = str(name)
    missing = [axis for axis in ("time", "latitude", "longitude") if axis not in found]
    if missing:
        allowed = "time, latitude and longitude"
        raise InputError([Problem(shown, 0, axis, "no such dimension", allowed) for axis in missing])
    columns: dict[str, str] = {}
    for key, variable in dataset.data_vars.items():
        column = str(key) if str(key) in COLUMNS else STANDARD_NAMES.get(str(variable.attrs.get("standard_name", "")))
        if column is not None and set(variable.dims) == set(found.values()):
            columns.setdefault(column, str(key))
    absent = [name for name in REQUIRED if name not in columns]
    if absent:
        allowed = "a variable of that name, or with the CF standard name of it, over time, latitude and longitude"
        raise InputError([Problem(shown, 0, name, "no such variable", allowed) for name in absent])
    return _Names(found["time"], found["latitude"], found["longitude"], columns)


def _corner(about: _About, cell: tuple[int, int]) -> tuple[int, int, int, int]:
    """Return (first row, first column, rows, columns) of the block that holds a cell: as many as the bound lets be."""
    room = max(1, BLOCK_BYTES // (8 * about.intervals * len(about.names.columns)))
    columns = min(about.longitude.size, max(1, int(room**0.5)))
    rows = min(about.latitude.size, max(1, room // columns))
    return cell[0] // rows * rows, cell[1] // columns * columns, rows, columns


@lru_cache(maxsize=1)
def _block(path: str, shown: str, row: int, column: int, rows: int, columns: int) -> _Block:
    names = _about(path, shown).names
    with opened(path, shown) as dataset:
        part = {names.lat: slice(row, row + rows), names.lon: slice(column, column + columns)}
        values = {
            name: _in_our_unit(dataset[key].isel(part).transpose(names.time, names.lat, names.lon), name, shown)
            for name, key in names.columns.items()
        }
        time = seconds(dataset[names.time].values, dataset[names.time].attrs, shown)
        label, interval_s = label_of(dataset, names.time, time, shown)
    return _Block(row, column, time, interval_s, label, values)


def _in_our_unit(variable: xr.DataArray, column: str, shown: str) -> NDArray[np.float64]:
    unit = variable.attrs.get("units")
    factor, offset = _units.conversion(column, None if unit is None else str(unit), shown, str(variable.name))
    return real_numbers(variable, shown) * factor + offset


def real_numbers(variable: xr.DataArray, shown: str) -> NDArray[np.float64]:
    """Return the values of a variable; raises InputError where they are text, yes or no, or complex numbers."""
    if variable.dtype.kind not in "fiu":
        raise InputError(Problem(shown, 0, str(variable.name), f"values of the type {variable.dtype}", "numbers"))
    return np.asarray(variable.values, dtype=np.float64)


def seconds(values: Any, attributes: Any, shown: str) -> NDArray[np.int64]:
    """Return CF times as UTC unix seconds."""
    told = {name: attributes[name] for name in ("units", "calendar") if name in attributes}
    try:
        with np.errstate(invalid="raise"):
            decoded = xr.decode_cf(xr.Dataset({"moment": ("n", np.asarray(values), told)}))["moment"].values
            return np.asarray(decoded.astype("datetime64[s]").astype(np.int64))
    except (ValueError, TypeError, AttributeError, ArithmeticError, ImportError) as error:
        beyond = "its dates lie outside the standard calendar"  # what xarray would hand to a package of other calendars
        reason = beyond if isinstance(error, ImportError) else str(error).splitlines()[0][:120]
        raise InputError(Problem(shown, 0, "time", f"it cannot be read ({reason})", "CF time, UTC")) from None


def label_of(dataset: xr.Dataset, name: str, time: NDArray[np.int64], shown: str) -> tuple[str, int | None]:
    """Return where labels sit and the interval [s], from the file's bounds; without bounds labels start it."""
    attributes = dataset[name].attrs
    bounds = attributes.get("bounds")
    if not isinstance(bounds, str) or bounds not in dataset.variables or dataset[bounds].shape != (len(time), 2):
        return "start", None
    first, last = (seconds(dataset[bounds].values[:, k], attributes, shown) for k in (0, 1))
    interval = int(np.median(last - first))
    return {0: "start", interval: "end"}.get(int(np.median(time - first)), "middle"), interval
