"""TMY2: typical years of the United States, hourly, fixed columns, labels at the end of the hour, local standard time.

Marion & Urban, User's Manual for TMY2s, NREL/SP-463-7668 (1995), tables 3-1 and 3-2 (from memory; held to the file that
pvlib ships): one line for the place, then 8760 lines of 142 characters. A value is missing where all its digits are 9.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from itertools import islice

import numpy as np

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
    r"\s*(?P<number>\d{5}) (?P<name>.{22}) (?P<state>..) +(?P<zone>-?\d{1,3})"
    r" +(?P<ns>[NS]) +(?P<lat>\d{1,3}) +(?P<lat_min>\d{1,2})"
    r" +(?P<ew>[EW]) +(?P<lon>\d{1,3}) +(?P<lon_min>\d{1,2}) +(?P<height>-?\d{1,5})\s*"
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
    offset_h = float(place["zone"])
    clock_s = _raw.offset_s(source, 1, "time zone", offset_h)
    numbers = {name: i for i, name in enumerate((*_DATE, *_COLUMNS))}
    block = _table.together(list(_table.numbered_blocks(source, _cut(source, lines), numbers, {}, len(numbers))))
    year, month, day, hour = (block.numbers[name] for name in _DATE)
    time = _table.calendar_seconds(source, block.row, 1900 + year, month, day, hour * 3600.0, 86_400)
    columns = {name: block.numbers[name] * scale for name, (_, _, scale) in _COLUMNS.items()}
    coded = {name: block.numbers[name] == 10 ** (end - start + 1) - 1 for name, (start, end, _) in _COLUMNS.items()}
    columns, marks = _raw.without_codes(source, columns, coded, time, block.row)
    latitude = (float(place["lat"]) + float(place["lat_min"]) / 60) * (1 if place["ns"] == "N" else -1)
    longitude = (float(place["lon"]) + float(place["lon_min"]) / 60) * (1 if place["ew"] == "E" else -1)
    yield Raw(
        shown=source.shown,
        name=f"{place['name'].strip()}, {place['state'].strip()}",
        latitude_deg=latitude,
        longitude_deg=longitude,
        elevation_m=float(place["height"]),
        utc_offset_h=offset_h,
        clock_offset_s=clock_s,
        label="end",
        clock="local standard time",
        time=time,
        interval_s=3600,
        row=block.row,
        columns={name: values for name, values in columns.items() if np.isfinite(values).any()},
        typical=_raw.is_typical(time),
        marks=marks,
    )


def _cut(source: Source, lines: Iterator[str]) -> list[tuple[int, str]]:
    """Return each line's number and its fields, set apart by commas."""
    fields = [(start - 1, end) for start, end in _DATE.values()]
    fields += [(start - 1, end) for start, end, _ in _COLUMNS.values()]
    least = max(end for _, end in fields)
    cut: list[tuple[int, str]] = []
    problems: list[Problem] = []
    for number, line in enumerate(lines, start=2):
        if not line or line.isspace():
            continue
        if len(line.rstrip()) < least or "," in line or '"' in line:
            found = f"{len(line.rstrip())} characters" if len(line.rstrip()) < least else "a comma or quotation mark"
            problems.append(source.problem(number, "", found, f"{_LENGTH} characters, fields in fixed columns"))
            if len(problems) == _table.MOST_PROBLEMS:
                break
            continue
        cut.append((number, ",".join(line[start:end] for start, end in fields)))
    if not cut and not problems:
        problems = [source.problem(2, "", "no rows", "at least one")]
    if problems:
        raise InputError(problems)
    return cut
