"""SURFRAD: stations of the United States' surface radiation network, minutes (three before 2009), UTC.

Two lines for the place (longitude counted westward: all stations lie there), then 48 numbers a line: year, day of year,
month, day, hour, minute, hour with fraction, zenith, then a value and a flag each. Labels stand at the end of the
interval. A value is taken as missing at -9999.9 or where its flag is not 0: 1 bad, 2 questionable. Described in the
network's README (from memory).
"""

from __future__ import annotations

import re
from collections.abc import Iterator

import numpy as np

from yieldsim.readers import _raw, _table
from yieldsim.readers._raw import Mark, Raw
from yieldsim.readers._source import Source

FORMAT = "surfrad"
# Our column -> position of its value from 0 (its flag follows), and what one of the file's units is in ours.
_COLUMNS = {
    "ghi": (8, 1.0),
    "dni": (12, 1.0),
    "dhi": (14, 1.0),
    "temp_air": (38, 1.0),
    "relative_humidity": (40, 1.0),
    "wind_speed": (42, 1.0),
    "pressure": (46, 100.0),
}
_DATE = {"year": 0, "month": 2, "day": 3, "hour": 4, "minute": 5}
_FIELDS = 48
_MISSING = -9990.0
_PLACE = re.compile(r"\s*(-?\d{1,3}\.?\d*)\s+(-?\d{1,3}\.?\d*)\s+(-?\d{1,5})\s*m\b.*")


def claims(source: Source) -> bool:
    """Return whether the file is of this format."""
    head = source.lines_of_head
    return len(head) > 2 and _PLACE.fullmatch(head[1]) is not None and len(head[2].split()) == _FIELDS


def read(source: Source) -> Iterator[Raw]:
    """Yield the rows of the file.

    Raises
    ------
    InputError
        For a place that is not given, rows too short, cells that are not numbers or dates.
    """
    lines = source.lines()
    name, place = next(lines, ""), next(lines, "")
    found = _PLACE.fullmatch(place)
    if found is None:
        raise source.refuse(2, "place", repr(place[:80]), "latitude, longitude to the west, elevation in m")
    numbers = {column: at for column, (at, _) in _COLUMNS.items()} | _DATE
    numbers |= {f"{column} flag": at + 1 for column, (at, _) in _COLUMNS.items()}
    joined = (",".join(line.split()) for line in lines)
    for block in _table.blocks(source, joined, 3, numbers, {}, _FIELDS):
        year, month, day, hour, minute = (block.numbers[key] for key in _DATE)
        time = _table.calendar_seconds(source, block.row, year, month, day, hour * 3600 + minute * 60, 86_399)
        columns = {column: block.numbers[column] * scale for column, (_, scale) in _COLUMNS.items()}
        coded = {column: block.numbers[column] <= _MISSING for column in _COLUMNS}
        flagged = {column: (block.numbers[f"{column} flag"] != 0) & ~coded[column] for column in _COLUMNS}
        columns, marks = _raw.without_codes(source, columns, coded, time, block.row)
        for column, at in flagged.items():
            if at.any():
                what = f"{column} is marked bad or questionable by the station"
                marks = (*marks, Mark("flagged", what, "taken as missing", source.shown, time[at], block.row[at]))
                columns[column] = np.where(at, np.nan, columns[column])
        longitude = -abs(float(found[2]))
        yield Raw(
            shown=source.shown,
            name=name.strip(),
            latitude_deg=float(found[1]),
            longitude_deg=longitude,
            elevation_m=float(found[3]),
            utc_offset_h=_raw.zone_h(longitude),
            clock_offset_s=0,
            label="end",
            clock="UTC",
            time=time,
            interval_s=None,
            row=block.row,
            columns=columns,
            marks=marks,
        )
