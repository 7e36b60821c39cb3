"""BSRN: stations of the baseline surface radiation network, a month of minutes a file, UTC, plain or gzip.

Records begin with ``*U`` or ``*C`` and their number: 0001 has station, month and year, 0004 the place (latitude counted
from the south pole, longitude eastward from 180 W), 0100 two lines a minute. Labels stand at the start of the minute.
Missing values are -999 and the like. G. König-Langlo et al., WCRP Report 5/2013 (from memory, held to a real file).
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from yieldsim.errors import InputError, Problem
from yieldsim.readers import _raw, _table
from yieldsim.readers._raw import Raw
from yieldsim.readers._source import WHOLE_BYTES, Source

FORMAT = "bsrn"
_STATION, _PLACE, _BASIC = "0001", "0004", "0100"
_FIELDS = (10, 11)  # numbers in the first and the second line of a minute
# Our column -> position among the numbers of both lines, from 0, and what one of the file's units is in ours. Each
# irradiance is followed by its deviation, least and largest value.
_COLUMNS = {
    "ghi": (2, 1.0),
    "dni": (6, 1.0),
    "dhi": (10, 1.0),
    "temp_air": (18, 1.0),
    "relative_humidity": (19, 1.0),
    "pressure": (20, 100.0),
}
_DATE = {"day": 0, "minute": 1}
_MISSING = -90.0  # codes are -999, -99.9 and the like; no column reaches down to this
_REQUIRED = ("ghi", "dni", "dhi", "temp_air")


def claims(source: Source) -> bool:
    """Return whether the file is of this format."""
    first = source.lines_of_head[0] if source.lines_of_head else ""
    return first[:2] in ("*U", "*C") and first[2:6] == _STATION


def read(source: Source) -> Iterator[Raw]:
    """Yield the rows of the file.

    Raises
    ------
    InputError
        For records missing or rows that are not what they should be.
    """
    records = _records(source)
    month, year = _month(source, records)
    latitude, longitude, height = _place(source, records)
    numbers = {name: at for name, (at, _) in _COLUMNS.items()} | _DATE
    blocks = _table.numbered_blocks(source, _minutes(source, records), numbers, {}, sum(_FIELDS))
    block = _table.together(list(blocks))
    rows = len(block.row)
    time = _table.calendar_seconds(
        source,
        block.row,
        np.full(rows, float(year)),
        np.full(rows, float(month)),
        block.numbers["day"],
        block.numbers["minute"] * 60.0,
        86_399,
    )
    columns = {name: block.numbers[name] * scale for name, (_, scale) in _COLUMNS.items()}
    coded = {name: block.numbers[name] <= _MISSING for name in _COLUMNS}
    columns, marks = _raw.without_codes(source, columns, coded, time, block.row)
    yield Raw(
        shown=source.shown,
        name="",
        latitude_deg=latitude,
        longitude_deg=longitude,
        elevation_m=height,
        utc_offset_h=_raw.zone_h(longitude),
        clock_offset_s=0,
        label="start",
        clock="UTC",
        time=time,
        interval_s=None,  # minutes, but two, three or five of them in early years
        row=block.row,
        columns={name: values for name, values in columns.items() if name in _REQUIRED or np.isfinite(values).any()},
        marks=marks,
    )


Records = dict[str, list[tuple[int, str]]]


def _records(source: Source) -> Records:
    """Return the lines of each record with their numbers."""
    records: Records = {}
    current: list[tuple[int, str]] | None = None
    for number, line in enumerate(source.lines(WHOLE_BYTES), start=1):
        if line[:2] in ("*U", "*C"):
            if line[2:6] == _STATION and _STATION in records:
                raise source.refuse(number, _STATION, "another record of station and month", "a month a file")
            current = records.setdefault(line[2:6], [])
        elif current is not None:
            current.append((number, line))
    missing = [name for name in (_STATION, _BASIC) if not records.get(name)]
    if missing:
        raise source.refuse(0, "", f"no record {missing[0]}", "records 0001, 0004 and 0100")
    return records


def _month(source: Source, records: Records) -> tuple[int, int]:
    number, line = records[_STATION][0]
    cells = line.split()
    if len(cells) < 3 or not all(cell.isascii() and cell.isdigit() and len(cell) <= 4 for cell in cells[1:3]):
        raise source.refuse(number, "", repr(line[:60]), "station, month, year")
    return int(cells[1]), int(cells[2])


def _place(source: Source, records: Records) -> tuple[float, float, float]:
    """Return latitude, longitude and elevation from the line of record 0004 that begins with two fractions."""
    for _, line in records.get(_PLACE, []):
        cells = line.split()
        try:
            south, west, height = float(cells[0]), float(cells[1]), float(cells[2])
        except (ValueError, IndexError):
            continue
        if "." in cells[0] and "." in cells[1] and 0 <= south <= 180 and 0 <= west <= 360:
            return south - 90.0, west - 180.0, height
    raise source.refuse(0, _PLACE, "no latitude, longitude and height", "a record 0004 that has them")


def _minutes(source: Source, records: Records) -> list[tuple[int, str]]:
    """Return the two lines of each minute as one, cells set apart by commas, with the number of the first."""
    lines: list[tuple[int, str]] = []
    problems: list[Problem] = []
    for number, line in records[_BASIC]:
        if not line or line.isspace():
            continue
        cells, wanted = line.split(), _FIELDS[len(lines) % 2]
        if len(cells) != wanted:
            problems.append(source.problem(number, "", f"{len(cells)} numbers", f"{wanted}"))
            if len(problems) == _table.MOST_PROBLEMS:
                break
        lines.append((number, ",".join(cells)))
    if len(lines) % 2:
        problems.append(source.problem(lines[-1][0], "", "half a minute", "two lines a minute"))
    if not lines:
        problems.append(source.problem(0, _BASIC, "no rows", "at least one"))
    if problems:
        raise InputError(problems[: _table.MOST_PROBLEMS])
    pairs = zip(lines[::2], lines[1::2], strict=True)
    return [(number, f"{first},{second}") for (number, first), (_, second) in pairs]
