"""TMY2: typical years of the United States, hourly, fixed columns, labels at the end of the hour, local standard time.

Marion & Urban, User's Manual for TMY2s, NREL/SP-463-7668 (1995), tables 3-1 and 3-2 (from memory; held to the file that
pvlib ships): one line for the place, then 8760 lines of 142 characters. A value is missing where all its digits are 9.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from itertools import islice

import numpy as np
from numpy.typing import NDArray

from yieldsim.errors import InputError, Problem
from yieldsim.readers import _raw, _table
from yieldsim.readers._raw import Raw
from yieldsim.readers._source import WHOLE_BYTES, Source

FORMAT = "tmy2"
# Our column -> first and last character (from 1), and what one of the file's units is in ours.
_COLUMNS = {
    "ghi": (18, 21, 1.0),
    "dni": (24, 27, 1.0),
    "dhi": (30, 33, 1.0),
    "temp_air": (68, 71, 0.1),
    "temp_dew": (74, 77, 0.1),
    "relative_humidity": (80, 82, 1.0),
    "pressure": (85, 88, 100.0),
    "wind_speed": (96, 98, 0.1),
    "precipitable_water": (124, 126, 0.1),
    "aod_broadband": (129, 131, 0.001),
    "snow_depth": (134, 136, 1.0),
}
_DATE = {"year": (2, 3), "month": (4, 5), "day": (6, 7), "hour": (8, 9)}
_LENGTH = 142
_PLACE = re.compile(
    r"\s*(?P<number>\d{5}) (?P<name>.{22}) (?P<state>..) +(?P<zone>-?\d+) +(?P<ns>[NS]) +(?P<lat>\d+) +(?P<lat_min>\d+)"
    r" +(?P<ew>[EW]) +(?P<lon>\d+) +(?P<lon_min>\d+) +(?P<height>-?\d+)\s*"
)


def claims(source: Source) -> bool:
    """Return whether the file is of this format."""
    return bool(source.lines_of_head) and _PLACE.fullmatch(source.lines_of_head[0]) is not None


def read(source: Source) -> Iterator[Raw]:
    """Yield the rows of the file.

    Raises
    ------
    InputError
        For a first line that names no place, rows too short, fields that are not numbers.
    """
    lines = source.lines(WHOLE_BYTES)
    first = next(iter(islice(lines, 1)), "")
    place = _PLACE.fullmatch(first)
    if place is None:
        raise source.refuse(
            1, "place", repr(first[:80]), "station, name, state, time zone, latitude, longitude, height"
        )
    rows, numbers = _numbers(source, lines)
    date = (numbers.pop(name) for name in _DATE)
    year, month, day, hour = date
    time = _table.calendar_seconds(source, rows, 1900 + year, month, day, hour * 3600.0, 86_400)
    columns, findings = {}, []
    for name, (start, end, scale) in _COLUMNS.items():
        values = numbers[name]
        coded = values == 10 ** (end - start + 1) - 1
        if coded.any():
            findings.append(_raw.found_missing(name, coded, time))
        values = np.where(coded, np.nan, values * scale)
        if np.isfinite(values).any():
            columns[name] = values
    offset_h = float(place["zone"])
    latitude = (float(place["lat"]) + float(place["lat_min"]) / 60) * (1 if place["ns"] == "N" else -1)
    longitude = (float(place["lon"]) + float(place["lon_min"]) / 60) * (1 if place["ew"] == "E" else -1)
    yield Raw(
        shown=source.shown,
        name=f"{place['name'].strip()}, {place['state'].strip()}",
        latitude_deg=latitude,
        longitude_deg=longitude,
        elevation_m=float(place["height"]),
        utc_offset_h=offset_h,
        clock_offset_s=round(offset_h * 3600),
        label="end",
        clock="local standard time",
        time=time,
        interval_s=3600,
        row=rows,
        columns=columns,
        typical=_raw.is_typical(time),
        findings=tuple(findings),
    )


def _numbers(source: Source, lines: Iterator[str]) -> tuple[NDArray[np.int64], dict[str, NDArray[np.float64]]]:
    """Return line numbers and every field as numbers."""
    fields = {name: (start - 1, end) for name, (start, end) in _DATE.items()}
    fields |= {name: (start - 1, end) for name, (start, end, _) in _COLUMNS.items()}
    texts: dict[str, list[str]] = {name: [] for name in fields}
    rows: list[int] = []
    problems: list[Problem] = []
    for number, line in enumerate(lines, start=2):
        if not line.strip():
            continue
        if len(line.rstrip()) < _COLUMNS["snow_depth"][1]:
            problems.append(source.problem(number, "", f"{len(line)} characters", f"{_LENGTH}"))
            if len(problems) == _table.MOST_PROBLEMS:
                break
            continue
        rows.append(number)
        for name, (start, end) in fields.items():
            texts[name].append(line[start:end])
    if not rows and not problems:
        problems = [source.problem(2, "", "no rows", "at least one")]
    if problems:
        raise InputError(problems)
    numbers = {name: _table.numbers_of(source, rows, name, values) for name, values in texts.items()}
    return np.array(rows, dtype=np.int64), numbers
