"""yieldsim's own plain CSV: header lines ``# key: value``, one line of column names, then the rows.

    # site: Saltmarsh Point
    # latitude_deg: 52.6
    # longitude_deg: 1.9
    # elevation_m: 4
    # utc_offset_h: 0
    # interval: 60 min
    # label: start
    # note: invented place
    time,ghi,dni,dhi,temp_air,relative_humidity,wind_speed,pressure
    2021-01-01T00:00,0,0,0,4.1,88,5.2,101620

- ``latitude_deg``, ``longitude_deg`` (north and east positive) and ``elevation_m`` may instead be given by the study.
- ``utc_offset_h`` is local standard time less UTC. ``clock`` is ``local standard time`` (what it is if left out) or
  ``UTC``: the clock of the column ``time``. A time that ends in ``Z`` or an offset says it itself.
- ``interval`` in ``min``, ``s`` or ``h``; if left out, the most frequent step. ``label`` says where in the interval the
  time stands: ``start`` (if left out), ``middle`` or ``end``.
- ``time`` is ISO 8601: ``2021-01-01T00:00``, a blank instead of the ``T``, with or without seconds.
- The other columns bear the names and units of `yieldsim.weather.COLUMNS`; unknown ones are refused. An empty cell or
  ``NaN`` is a missing value.
- Any number of ``note`` lines: what readers of the results should know. ``typical: yes`` says that months of several
  years were set together. ``source`` and ``licence`` join the notes.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from yieldsim.errors import InputError, Problem
from yieldsim.readers import _table
from yieldsim.readers._raw import MOST_OFFSET_H, Raw
from yieldsim.readers._source import Source
from yieldsim.weather import COLUMNS, LABELS

FORMAT = "plain"
_NUMBERS = ("latitude_deg", "longitude_deg", "elevation_m", "utc_offset_h")
_KEYS = ("site", *_NUMBERS, "clock", "interval", "label", "note", "typical", "source", "licence")
_WORDS = {"label": LABELS, "clock": ("local standard time", "UTC"), "typical": ("yes", "no")}
_LONGEST_HEADER = 200  # lines
_UNITS_S = {"s": 1, "min": 60, "h": 3600}


@dataclass(frozen=True, slots=True)
class _Header:
    values: Mapping[str, str]
    numbers: Mapping[str, float]
    notes: tuple[str, ...]
    interval_s: int | None
    names: list[str]
    lines: int


def claims(source: Source) -> bool:
    """Return whether the file is of this format: our header lines, or three or more of our column names."""
    for line in source.lines_of_head[:_LONGEST_HEADER]:
        if line.startswith("#"):
            if line[1:].partition(":")[0].strip() in _NUMBERS:
                return True
        elif line.strip():
            names = _table.split(line)
            return sum(name == "time" or name in COLUMNS for name in names) >= 3
    return False


def read(source: Source) -> Iterator[Raw]:
    """Yield the rows of the file in blocks.

    Raises
    ------
    InputError
        For header lines or columns that are not known, cells that are not numbers or times.
    """
    lines = source.lines()
    header = _header(source, lines)
    numbers = {name: i for i, name in enumerate(header.names) if name in COLUMNS}
    at_time = {"time": header.names.index("time")}
    for block in _table.blocks(source, lines, header.lines + 1, numbers, at_time, len(header.names)):
        yield _raw_of(source, header, block)


def _raw_of(source: Source, header: _Header, block: _table.Block) -> Raw:
    time, offset_s = iso_times(source, block)
    offset_h = header.numbers.get("utc_offset_h")
    clock = header.values.get("clock", "local standard time")
    if offset_s is not None:
        clock = "the clock each time names"
    elif clock == "UTC":
        offset_s = 0
    elif offset_h is None:
        raise source.refuse(
            1, "utc_offset_h", "nothing that says which clock the times follow", "`# utc_offset_h: 1` or `# clock: UTC`"
        )
    else:
        offset_s = round(offset_h * 3600)
    return Raw(
        shown=source.shown,
        name=header.values.get("site", ""),
        latitude_deg=header.numbers.get("latitude_deg"),
        longitude_deg=header.numbers.get("longitude_deg"),
        elevation_m=header.numbers.get("elevation_m"),
        utc_offset_h=offset_h,
        clock_offset_s=offset_s,
        label=header.values.get("label", "start"),
        clock=clock,
        time=time,
        interval_s=header.interval_s,
        row=block.row,
        columns=block.numbers,
        typical=header.values.get("typical") == "yes",
        notes=header.notes,
    )


def _header(source: Source, lines: Iterator[str]) -> _Header:
    """Read the header and the line of column names."""
    values: dict[str, str] = {}
    notes: list[str] = []
    problems: list[Problem] = []
    names: list[str] = []
    number = 0
    for number, line in enumerate(lines, start=1):
        if number > _LONGEST_HEADER:
            found = "no line of column names so far"
            raise source.refuse(number, "", found, f"a header of at most {_LONGEST_HEADER} lines")
        if line.startswith("#"):
            _header_line(source, number, line, values, notes, problems)
        elif line.strip():
            names = _table.split(line)
            break
    numbers = _header_numbers(source, values, problems)
    interval_s = _interval_s(source, values, problems)
    for key, allowed in _WORDS.items():
        if values.get(key, allowed[0]) not in allowed:
            problems.append(source.problem(0, key, repr(values[key]), " or ".join(allowed)))
    problems += _name_problems(source, number, names)
    if problems:
        raise InputError(problems)
    notes += [f"{key}: {values[key]}" for key in ("source", "licence") if key in values]
    return _Header(values, numbers, tuple(notes), interval_s, names, number)


def _header_line(
    source: Source, number: int, line: str, values: dict[str, str], notes: list[str], problems: list[Problem]
) -> None:
    key, colon, value = (part.strip() for part in line[1:].partition(":"))
    if not colon:
        return  # a remark
    if key not in _KEYS:
        problems.append(source.problem(number, key, "unknown header line", ", ".join(_KEYS)))
    elif key == "note":
        notes.append(value)
    elif values.get(key, value) != value:
        problems.append(source.problem(number, key, f"{value[:40]!r} after {values[key][:40]!r}", "one of it"))
    else:
        values[key] = value


def _header_numbers(source: Source, values: Mapping[str, str], problems: list[Problem]) -> dict[str, float]:
    numbers: dict[str, float] = {}
    for key in _NUMBERS:
        if key not in values:
            continue
        try:
            number = float(values[key])
        except ValueError:
            number = np.nan
        if np.isfinite(number):
            numbers[key] = number
        else:
            problems.append(source.problem(0, key, repr(values[key][:40]), "a number"))
    return numbers


def _interval_s(source: Source, values: Mapping[str, str], problems: list[Problem]) -> int | None:
    text = values.get("interval")
    if text is None:
        return None
    match = re.fullmatch(r"(\d{1,5})\s*(s|min|h)", text)
    seconds = int(match[1]) * _UNITS_S[match[2]] if match else 0
    if not 60 <= seconds <= 3600:
        problems.append(source.problem(0, "interval", repr(text[:40]), "1 min to 60 min, such as 60 min"))
        return None
    return seconds


def _name_problems(source: Source, line: int, names: list[str]) -> list[Problem]:
    problems = []
    for i, name in enumerate(names):
        if name in names[:i]:
            problems.append(source.problem(line, name, "the column twice", "each column once"))
        elif name != "time" and name not in COLUMNS:
            close = difflib.get_close_matches(name, COLUMNS, n=1)
            allowed = (f"did you mean {close[0]}? " if close else "") + ", ".join(["time", *COLUMNS])
            problems.append(source.problem(line, name, "unknown column", allowed))
    if "time" not in names:
        problems.append(source.problem(line, "time", "column missing", "a column `time`"))
    return problems


_ISO = r"^\s*(\d{4}-\d{2}-\d{2})[T ](\d{2}:\d{2}(?::\d{2}(?:\.0+)?)?)\s*(Z|[+-]\d{2}:?\d{2})?\s*$"


def iso_times(source: Source, block: _table.Block) -> tuple[NDArray[np.int64], int | None]:
    """Return labels as unix seconds of the file's clock, and that clock less UTC [s] if the times name it."""
    texts = pd.Series(block.texts["time"], dtype=object).astype(str)
    parts = texts.str.extract(_ISO)
    moments = pd.to_datetime(parts[0] + "T" + parts[1], format="ISO8601", errors="coerce")
    bad = moments.isna().to_numpy()
    if bad.any():
        i = int(np.argmax(bad))
        found = f"{str(block.texts['time'][i])[:40]!r} ({int(bad.sum())} such rows)"
        raise source.refuse(int(block.row[i]), "time", found, "a time such as 2021-01-01T00:00")
    seconds = moments.to_numpy().astype("datetime64[s]").astype(np.int64)
    offsets = parts[2].fillna("").unique()
    if len(offsets) == 1 and offsets[0] == "":
        return seconds, None
    if "" in offsets:
        raise source.refuse(int(block.row[0]), "time", "times with and without a time zone", "one or the other")
    beyond = [text for text in offsets if abs(_offset_s(text)) > 3600 * MOST_OFFSET_H]
    if beyond:
        i = int(np.argmax(parts[2] == beyond[0]))
        raise source.refuse(int(block.row[i]), "time", f"a clock of UTC{beyond[0]}", "UTC-14:00 to UTC+14:00")
    each = parts[2].map({text: _offset_s(text) for text in offsets}).to_numpy(dtype=np.int64)
    return seconds - each, 0  # set to UTC, so that a change of offset within the file does no harm


def _offset_s(text: str) -> int:
    if text == "Z":
        return 0
    digits = text[1:].replace(":", "")
    return (-1 if text[0] == "-" else 1) * (int(digits[:2]) * 3600 + int(digits[2:]) * 60)
