"""EPW: typical years of building simulation, hourly, labels at the end of the hour in local standard time.

Header lines up to ``DATA PERIODS``, the first of them ``LOCATION,city,state,country,source,number,latitude,longitude,
time zone,elevation``; then 35 columns without names. Each column has its own code for a missing value. Water is in mm,
aerosol in thousandths, by the format's description; files made from TMY3 hold the water in tenths of that and the
aerosol as it is, which is found out here. Documented with EnergyPlus, Auxiliary Programs (format from memory).
PVGIS writes its typical years in this form too, with hours of UTC and the moment of the light in a comment: its row of
hour 1 is that of 00:00 UTC in the CSV form of the same year, whatever zone ``LOCATION`` names.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import replace
from itertools import chain

import numpy as np
from numpy.typing import NDArray

from yieldsim.readers import _raw, _table
from yieldsim.readers._raw import Mark, Raw
from yieldsim.readers._source import WHOLE_BYTES, Source

FORMAT = "epw"
# Our column -> position from 0, what one of the file's units is in ours, and from which value on it is missing.
_COLUMNS = {
    "temp_air": (6, 1.0, 99.9),
    "temp_dew": (7, 1.0, 99.9),
    "relative_humidity": (8, 1.0, 999.0),
    "pressure": (9, 1.0, 999_999.0),
    "ghi": (13, 1.0, 9999.0),
    "dni": (14, 1.0, 9999.0),
    "dhi": (15, 1.0, 9999.0),
    "wind_speed": (21, 1.0, 999.0),
    "precipitable_water": (28, 0.1, 999.0),
    "aod_broadband": (29, 1.0, 0.999),
    "snow_depth": (30, 1.0, 999.0),
    "albedo": (32, 1.0, 999.0),
    "rain": (33, 1.0, 999.0),
}
_NOT_BELOW_ZERO = ("precipitable_water", "aod_broadband", "snow_depth", "albedo", "rain")  # some files write -9
_DATE = {"year": 0, "month": 1, "day": 2, "hour": 3}
_LEAST_FIELDS = 22  # up to the wind
_HEADER_LINES = 20
_TENFOLD = 3.0  # how many times what the humidity tells makes water ten times too large
_LEAST_HOURS = 24  # with water, to tell
_MOST_AEROSOL = 4.0  # optical depth beyond which a whole file is in thousandths
_OFFSET = re.compile(r"irradiance time offset \(h\):\s*(-?\d{1,9}(?:\.\d+)?)", re.IGNORECASE)


def claims(source: Source) -> bool:
    """Return whether the file is of this format."""
    return bool(source.lines_of_head) and source.lines_of_head[0].upper().startswith("LOCATION,")


def read(source: Source) -> Iterator[Raw]:
    """Yield the rows of the file.

    Raises
    ------
    InputError
        For a place that is not given, a header without end, cells that are not numbers or dates.
    """
    lines = source.lines(WHOLE_BYTES)
    header: list[str] = []
    for line in lines:
        header.append(line)
        if line.upper().startswith("DATA PERIODS"):
            break
        if len(header) > _HEADER_LINES:
            raise source.refuse(len(header), "", "no line DATA PERIODS", f"one within {_HEADER_LINES} lines")
    name, position, offset_h = _place(source, header[0])
    clock_s = _raw.offset_s(source, 1, "time zone", offset_h)
    first = next(lines, "")
    fields = first.rstrip(", ").count(",") + 1
    if fields < _LEAST_FIELDS:
        raise source.refuse(len(header) + 1, "", f"{fields} cells", f"{_LEAST_FIELDS} or more")
    given = {ours: at for ours, (at, _, _) in _COLUMNS.items() if at < fields}
    numbers = given | _DATE
    block = _table.whole(source, chain([first], lines), len(header) + 1, numbers, {}, fields)
    time = _times(source, block)
    columns, marks = _columns(source, block, given, time)
    label, clock = "end", "local standard time"
    for number, line in enumerate(header, start=1):
        if moment := _OFFSET.search(line):  # PVGIS: light of one moment, hours of UTC whatever zone the place has
            label, clock_s, clock = "middle", 0, f"UTC, light {float(moment[1]):+g} h from each label"
            shift_s = _raw.offset_s(source, number, "irradiance time offset", float(moment[1]))
            time = time + shift_s
            marks = tuple(replace(mark, time=mark.time + shift_s) for mark in marks)
            break
    yield Raw(
        shown=source.shown,
        name=name,
        latitude_deg=position[0],
        longitude_deg=position[1],
        elevation_m=position[2],
        utc_offset_h=offset_h,
        clock_offset_s=clock_s,
        label=label,
        clock=clock,
        time=time,
        interval_s=3600,
        row=block.row,
        columns=columns,
        typical=_raw.is_typical(time),
        marks=marks,
    )


def _place(source: Source, line: str) -> tuple[str, list[float], float]:
    """Return name, (latitude, longitude, elevation) and local standard time less UTC [h] from the first line."""
    cells = _table.split(line)
    try:
        latitude, longitude, offset_h, elevation = (float(cell) for cell in cells[6:10])
        if not np.isfinite([latitude, longitude, offset_h, elevation]).all():
            raise ValueError
    except (ValueError, IndexError):
        allowed = "LOCATION, city, state, country, source, number, latitude, longitude, time zone, elevation"
        raise source.refuse(1, "LOCATION", repr(line[:80]), allowed) from None
    words = [cell for cell in (cells[1], cells[3]) if cell and cell != "-"]
    return ", ".join(words), [latitude, longitude, elevation], offset_h


def _times(source: Source, block: _table.Block) -> NDArray[np.int64]:
    """Return the labels, at the end of each hour, as unix seconds of the file's clock."""
    year, month, day, hour = (block.numbers[name] for name in _DATE)
    return _table.calendar_seconds(source, block.row, year, month, day, hour * 3600.0, 86_400)


def _columns(
    source: Source, block: _table.Block, given: dict[str, int], time: NDArray[np.int64]
) -> tuple[dict[str, NDArray[np.float64]], tuple[Mark, ...]]:
    """Return columns in our units, missing codes taken out, and the marks that tell of it."""
    coded = {}
    for name in given:
        values = block.numbers[name]
        coded[name] = values >= _COLUMNS[name][2]
        if name == "aod_broadband":
            coded[name] = np.isclose(values, 0.999) | (values >= 999.0)
        if name in _NOT_BELOW_ZERO:
            coded[name] |= values < 0
    columns = {name: block.numbers[name] * _COLUMNS[name][1] for name in given}
    columns, marks = _raw.without_codes(source, columns, coded, time, block.row)
    mended = (*_thousandths(source, columns, time, block.row), *_tenfold_water(source, columns, time, block.row))
    return {name: values for name, values in columns.items() if np.isfinite(values).any()}, (*marks, *mended)


def _thousandths(
    source: Source, columns: dict[str, NDArray[np.float64]], time: NDArray[np.int64], row: NDArray[np.int64]
) -> tuple[Mark, ...]:
    """Bring aerosol given in thousandths, as the format says, to its own unit."""
    aerosol = columns.get("aod_broadband")
    if aerosol is None or not np.isfinite(aerosol).any() or np.nanmax(aerosol) <= _MOST_AEROSOL:
        return ()
    columns["aod_broadband"] = aerosol / 1000.0
    what = f"aerosol up to {np.nanmax(aerosol):g}: given in thousandths"
    at = np.isfinite(aerosol)
    return (Mark("unit", what, "divided by 1000", source.shown, time[at], row[at]),)


def _tenfold_water(
    source: Source, columns: dict[str, NDArray[np.float64]], time: NDArray[np.int64], row: NDArray[np.int64]
) -> tuple[Mark, ...]:
    """Bring water that is ten times what the humidity tells (files made from TMY3) to what it is."""
    from pvlib.atmosphere import gueymard94_pw

    water = columns.get("precipitable_water")
    if water is None or not {"temp_air", "relative_humidity"} <= set(columns):
        return ()
    temperature = np.clip(columns["temp_air"], -90.0, 65.0)
    told = np.asarray(gueymard94_pw(temperature, np.clip(columns["relative_humidity"], 1.0, 100.0)))
    at = np.isfinite(water) & np.isfinite(told) & (water > 0)
    if at.sum() < _LEAST_HOURS:
        return ()
    ratio = float(np.median(water[at]) / np.median(told[at]))
    if ratio <= _TENFOLD:
        return ()
    columns["precipitable_water"] = water / 10.0
    what = f"water {ratio:.1f} times what temperature and humidity tell, ten times too large,"
    return (Mark("tenfold_water", what, "divided by 10", source.shown, time[at], row[at]),)
