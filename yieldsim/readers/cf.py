"""CF NetCDF of one place: columns by our names or CF standard names, the place from coordinates or attributes."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import xarray as xr

from yieldsim.readers import _raw, _units, grid
from yieldsim.readers._raw import Raw
from yieldsim.readers._source import Source
from yieldsim.weather import COLUMNS

FORMAT = "netcdf"
_MAGIC = (b"\x89HDF", b"CDF\x01", b"CDF\x02", b"CDF\x05")
_BLOCK_ROWS = 262_144  # half a year of minutes
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
    with grid.opened(str(source.path), source.shown) as dataset:
        yield from _raws_of(source, dataset)


def _raws_of(source: Source, dataset: xr.Dataset) -> Iterator[Raw]:
    """Yield the rows in pieces."""
    many = [name for name, size in dataset.sizes.items() if size > 1 and str(name).lower() in _PLACES_ALONG]
    if many:
        found = f"{dataset.sizes[many[0]]} places along {many[0]}"
        raise source.refuse(0, "", found, "one place; for many, `sites: {grid: FILE}` or a site's `cell:`")
    if "time" not in dataset.variables:
        raise source.refuse(0, "time", "no such variable", "CF time")
    dataset = dataset.squeeze([name for name in dataset.dims if dataset.sizes[name] == 1 and name != "time"])
    if dataset["time"].dims != ("time",) or not 0 < dataset.sizes["time"] <= grid.MOST_MOMENTS:
        raise source.refuse(0, "time", f"a shape of {dict(dataset['time'].sizes)}", f"1 to {grid.MOST_MOMENTS} moments")
    time = grid.seconds(dataset["time"].values, dataset["time"].attrs, source.shown)
    label, interval_s = grid.label_of(dataset, "time", time, source.shown)
    use: dict[str, tuple[str, float, float]] = {}
    for key, variable in dataset.data_vars.items():
        name = str(key) if str(key) in COLUMNS else grid.STANDARD_NAMES.get(variable.attrs.get("standard_name", ""))
        if name is None or variable.dims != ("time",) or name in use:
            continue
        unit = variable.attrs.get("units")
        use[name] = (str(key), *_units.conversion(name, None if unit is None else str(unit), source.shown, str(key)))
    place = {field: _of_place(dataset, names) for field, names in _PLACE.items()}
    offset_h, local_h = dataset.attrs.get("utc_offset_h"), _raw.zone_h(place["longitude_deg"])
    if offset_h is not None:
        local_h = _raw.offset_s(source, 0, "utc_offset_h", float(offset_h)) / 3600
    for start in range(0, len(time), _BLOCK_ROWS):
        part = dataset.isel(time=slice(start, start + _BLOCK_ROWS))
        rows = len(part["time"])
        yield Raw(
            shown=source.shown,
            name=str(dataset.attrs.get("site", dataset.attrs.get("title", ""))),
            latitude_deg=place["latitude_deg"],
            longitude_deg=place["longitude_deg"],
            elevation_m=place["elevation_m"],
            utc_offset_h=local_h,
            clock_offset_s=0,
            label=label,
            clock="UTC",
            time=time[start : start + rows],
            interval_s=interval_s,
            row=np.arange(start + 1, start + rows + 1, dtype=np.int64),  # there are no lines: the number of the value
            columns={
                name: grid.real_numbers(part[key], source.shown) * factor + offset
                for name, (key, factor, offset) in use.items()
            },
        )


_PLACES_ALONG = ("lat", "lon", "latitude", "longitude", "x", "y")


def _of_place(dataset: xr.Dataset, names: tuple[str, ...]) -> float | None:
    """Return a number that a file tells of its place, in a variable of one value or an attribute."""
    for name in names:
        if name in dataset.variables:
            value: Any = dataset[name].values if dataset[name].size == 1 else None
        else:
            value = dataset.attrs.get(name)
        if np.iscomplexobj(value):
            continue
        try:
            number = float(np.asarray(value, dtype=np.float64).squeeze()) if value is not None else np.nan
        except (TypeError, ValueError):
            continue
        if np.isfinite(number):
            return number
    return None
