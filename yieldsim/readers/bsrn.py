"""BSRN: stations of the baseline surface radiation network, a month of minutes a file, UTC, plain or gzip.

Records begin with ``*U`` or ``*C`` and their number: 0001 has station, month and year, 0004 the place (latitude counted
from the south pole, longitude eastward from 180 W), 0100 two lines a minute. Labels stand at the start of the minute.
Missing values are -999 and the like. G. König-Langlo et al., WCRP Report 5/2013 (from memory, held to a real file).
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from yieldsim.errors import InputError, Problem
from yieldsim.readers import _raw, _table
from yieldsim.readers._raw import Raw
from yieldsim.readers._source import WHOLE_BYTES, Source

FORMAT = "bsrn"
_STATION, _PLACE, _BASIC = "0001", "0004", "0100"
# In the two lines of a minute: our column -> (line, position from 0, unit in ours); each quantity has four numbers.
_COLUMNS = {
    "ghi": (0, 2, 1.0),
    "dni": (0, 6, 1.0),
    "dhi": (1, 0, 1.0),
    "temp_air": (1, 8, 1.0),
    "relative_humidity": (1, 9, 1.0),
    "pressure": (1, 10, 100.0),
}
_FIELDS = (10, 11)
_LOWEST = {"temp_air": -90.0}  # codes of -99.9 and -999 lie below; elsewhere below -90 too
_MISSING = -90.0


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
    place = _place(source, records)
    rows, numbers = _minutes(source, records)
    time = _table.calendar_seconds(
        source,
        rows,
        np.full(len(rows), float(year)),
        np.full(len(rows), float(month)),
        numbers["day"],
        numbers["minute"] * 60.0,
        86_399,
    )
    columns, findings = {}, []
    for name, (_, _, scale) in _COLUMNS.items():
        coded = numbers[name] <= _LOWEST.get(name, _MISSING)
        if coded.any():
            findings.append(_raw.found_missing(name, coded, time))
        values = np.where(coded, np.nan, numbers[name] * scale)
        if np.isfinite(values).any() or name in ("ghi", "dni", "dhi", "temp_air"):
            columns[name] = values
    yield Raw(
        shown=source.shown,
        name="",
        latitude_deg=place[0],
        longitude_deg=place[1],
        elevation_m=place[2],
        utc_offset_h=float(round(place[1] / 15)),
        clock_offset_s=0,
        label="start",
        clock="UTC",
        time=time,
        interval_s=60,
        row=rows,
        columns=columns,
        findings=tuple(findings),
    )


Records = dict[str, list[tuple[int, str]]]


def _records(source: Source) -> Records:
    """Return the lines of each record with their numbers."""
    records: Records = {}
    current: list[tuple[int, str]] | None = None
    for number, line in enumerate(source.lines(WHOLE_BYTES), start=1):
        if line[:2] in ("*U", "*C"):
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
    if len(cells) < 3 or not all(cell.isdigit() for cell in cells[1:3]):
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


def _minutes(source: Source, records: Records) -> tuple[NDArray[np.int64], dict[str, NDArray[np.float64]]]:
    """Return line numbers and columns of record 0100, two lines a minute."""
    lines = [(number, line.split()) for number, line in records[_BASIC] if line.strip()]
    problems: list[Problem] = [
        source.problem(number, "", f"{len(cells)} numbers", f"{_FIELDS[i % 2]}")
        for i, (number, cells) in enumerate(lines)
        if len(cells) != _FIELDS[i % 2]
    ]
    if len(lines) % 2:
        problems.append(source.problem(lines[-1][0], "", "half a minute", "two lines a minute"))
    if problems:
        raise InputError(problems[: _table.MOST_PROBLEMS])
    rows = [number for number, _ in lines[::2]]
    wanted = {"day": (0, 0), "minute": (0, 1)} | {name: (line, at) for name, (line, at, _) in _COLUMNS.items()}
    numbers = {
        name: _table.numbers_of(source, rows, name, [cells[at] for _, cells in lines[line::2]])
        for name, (line, at) in wanted.items()
    }
    return np.array(rows, dtype=np.int64), numbers
