"""CF NetCDF of one place: columns by our names or CF standard names, the place from coordinates or attributes."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import xarray as xr

from yieldsim.readers import _units, grid
from yieldsim.readers._raw import Raw
from yieldsim.readers._source import Source
from yieldsim.weather import COLUMNS

FORMAT = "netcdf"
_MAGIC = (b"\x89HDF", b"CDF\x01", b"CDF\x02", b"CDF\x05")
_PLACE = {
    "latitude_deg": ("latitude", "lat", "latitude_deg"),
    "longitude_deg": ("longitude", "lon", "longitude_deg"),
    "elevation_m": ("elevation", "elevation_m", "altitude", "surface_altitude", "height"),
}


def claims(source: Source) -> bool:
    """Return whether the file is NetCDF."""
    return source.head.startswith(_MAGIC)


def read(source: Source) -> Iterator[Raw]:
    """Yield the rows of the file.

    Raises
    ------
    InputError
        For a file without time, with more than one place, or in units not known.
    """
    try:
        with grid.opened(str(source.path), source.shown) as dataset:
            yield _raw_of(source, dataset)
    except grid.BROKEN as error:
        found = f"it cannot be read ({type(error).__name__}: {str(error)[:80]})"
        raise source.refuse(0, "", found, "CF NetCDF") from None


def _raw_of(source: Source, dataset: xr.Dataset) -> Raw:
    many = [name for name, size in dataset.sizes.items() if size > 1 and str(name).lower() in _PLACES_ALONG]
    if many:
        found = f"{dataset.sizes[many[0]]} places along {many[0]}"
        raise source.refuse(0, "", found, "one place; for many, `sites: {grid: FILE}` or a site's `cell:`")
    if "time" not in dataset.variables:
        raise source.refuse(0, "time", "no such variable", "CF time")
    dataset = dataset.squeeze(drop=False)
    time = grid.seconds(dataset["time"].values, dataset["time"].attrs, source.shown)
    label, interval_s = grid.label_of(dataset, "time", time, source.shown)
    columns = {}
    for key, variable in dataset.data_vars.items():
        name = str(key) if str(key) in COLUMNS else grid.STANDARD_NAMES.get(variable.attrs.get("standard_name", ""))
        if name is None or variable.dims != ("time",) or name in columns:
            continue
        factor, offset = _units.conversion(name, variable.attrs.get("units"), source.shown, str(key))
        columns[name] = np.asarray(variable.values, dtype=np.float64) * factor + offset
    place = {field: _of_place(dataset, names) for field, names in _PLACE.items()}
    offset_h, longitude = dataset.attrs.get("utc_offset_h"), place["longitude_deg"]
    fallback = None if longitude is None else float(round(longitude / 15))
    return Raw(
        shown=source.shown,
        name=str(dataset.attrs.get("site", dataset.attrs.get("title", ""))),
        latitude_deg=place["latitude_deg"],
        longitude_deg=longitude,
        elevation_m=place["elevation_m"],
        utc_offset_h=fallback if offset_h is None else float(offset_h),
        clock_offset_s=0,
        label=label,
        clock="UTC",
        time=np.atleast_1d(time),
        interval_s=interval_s,
        row=np.arange(1, np.size(time) + 1, dtype=np.int64),
        columns=columns,
    )


_PLACES_ALONG = ("lat", "lon", "latitude", "longitude", "x", "y")


def _of_place(dataset: xr.Dataset, names: tuple[str, ...]) -> float | None:
    """Return a number that a file tells of its place, in a variable of one value or an attribute."""
    for name in names:
        value: Any = dataset[name].values if name in dataset.variables else dataset.attrs.get(name)
        try:
            number = float(np.asarray(value, dtype=np.float64).squeeze()) if value is not None else np.nan
        except (TypeError, ValueError):
            continue
        if np.isfinite(number):
            return number
    return None
