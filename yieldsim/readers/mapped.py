"""Any table of numbers whose columns the study names: ``columns: {time: Date, ghi: "GHI W/m2", ...}``.

Cells are separated by commas, semicolons or tabs; with semicolons a comma is a decimal point. The line of column names
is the first that holds all those named. ``time`` may be one column or a list that is joined by a blank, with a
``time_format`` where it is not ISO 8601. A column whose unit is not ours says so: ``{column: T, unit: K}``. Numbers
that stand for "missing" are told with ``missing: -999`` or a list. Labels stand at the start of the interval, in local
standard time, unless the times name their zone or the study's ``timestamps`` says otherwise.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from itertools import islice

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from yieldsim.errors import InputError
from yieldsim.readers import _raw, _table, _units
from yieldsim.readers._raw import Raw
from yieldsim.readers._source import Source

_HEAD_LINES = 200
_NAMES_ZONE = r"\d\s*(?:Z|z|UTC|GMT)$|:\d{2}(?:[.,]\d+)?\s*[+-]\d{2}(?::?\d{2})?$"  # behind a time of day
_SHOWN = 30


@dataclass(frozen=True, slots=True)
class Column:
    """A column of the file: its name there and its unit, None = ours."""

    name: str
    unit: str | None = None


@dataclass(frozen=True, slots=True)
class ColumnMap:
    """Which columns of a file are what.

    Parameters
    ----------
    time : names of the columns that together are the time
    columns : our column -> Column
    time_format : str or None, as strptime has it; None = ISO 8601
    missing : numbers that stand for "missing" in every column
    """

    time: tuple[str, ...]
    columns: Mapping[str, Column]
    time_format: str | None = None
    missing: tuple[float, ...] = ()


def read(source: Source, wanted: ColumnMap) -> Iterator[Raw]:
    """Yield the rows of the file in blocks.

    Raises
    ------
    InputError
        For columns that are not there, units not known, cells that are not numbers or times.
    """
    factors = {name: _units.conversion(name, column.unit, source.shown) for name, column in wanted.columns.items()}
    line, names, delimiter = _header(source, wanted)
    at = {name: i for i, name in enumerate(names)}
    numbers = {ours: at[column.name] for ours, column in wanted.columns.items()}
    texts = {f"time {i}": at[name] for i, name in enumerate(wanted.time)}
    lines: Iterator[str] = islice(source.lines(), line, None)
    if delimiter == ";":
        lines = (text.replace(",", ".") for text in lines)
    for block in _table.blocks(source, lines, line + 1, numbers, texts, len(names), delimiter):
        time, offset_s = _times(source, block, wanted)
        columns = {name: block.numbers[name] * factors[name][0] + factors[name][1] for name in numbers}
        coded = {name: np.isin(block.numbers[name], wanted.missing) for name in numbers} if wanted.missing else {}
        columns, marks = _raw.without_codes(source, columns, coded, time, block.row)
        yield Raw(
            shown=source.shown,
            name="",
            latitude_deg=None,
            longitude_deg=None,
            elevation_m=None,
            utc_offset_h=None,
            clock_offset_s=offset_s,
            label="start",
            clock="local standard time" if offset_s is None else "the clock each time names",
            time=time,
            interval_s=None,
            row=block.row,
            columns=columns,
            marks=marks,
        )


def _header(source: Source, wanted: ColumnMap) -> tuple[int, list[str], str]:
    """Return how many lines come before the rows, the column names, and what separates cells."""
    needed = [*wanted.time, *(column.name for column in wanted.columns.values())]
    best: tuple[int, list[str], int] = (len(needed) + 1, [], 0)
    for i, line in enumerate(source.lines_of_head[:_HEAD_LINES]):
        for delimiter in (";", "\t", ","):
            names = _table.split(line, delimiter)
            missing = [name for name in needed if name not in names]
            if not missing:
                twice = [name for name in needed if names.count(name) > 1]
                if twice:
                    raise InputError([source.problem(i + 1, name, "the column twice", "one of it") for name in twice])
                return i + 1, names, delimiter
            if len(missing) < best[0]:
                best = len(missing), names, i + 1
    absent = [name for name in needed if name not in best[1]]
    shown = ", ".join(best[1][:_SHOWN]) or "none of them"
    raise InputError(
        [source.problem(best[2], name, "no such column", f"one of the file's: {shown}") for name in absent]
    )


def _times(source: Source, block: _table.Block, wanted: ColumnMap) -> tuple[NDArray[np.int64], int | None]:
    """Return labels as unix seconds of the file's clock, and that clock less UTC [s] if the times name it."""
    parts = [pd.Series(block.texts[f"time {i}"], dtype=object).astype(str).str.strip() for i in range(len(wanted.time))]
    joined = parts[0]
    for part in parts[1:]:
        joined = joined + " " + part
    form = wanted.time_format or "ISO8601"
    moments = pd.to_datetime(joined, format=form, errors="coerce", utc=True)
    bad = moments.isna().to_numpy()
    if bad.any():
        i = int(np.argmax(bad))
        found = f"{joined.iloc[i][:40]!r} ({int(bad.sum())} such rows)"
        allowed = (
            f"a time of the form {wanted.time_format}" if wanted.time_format else "a time such as 2021-01-01 00:00"
        )
        raise source.refuse(int(block.row[i]), "time", found, allowed)
    seconds = moments.dt.tz_localize(None).to_numpy().astype("datetime64[s]").astype(np.int64)
    named = joined.str.contains(_NAMES_ZONE, regex=True).to_numpy()
    if named.any() and not named.all():
        i = int(np.argmax(named != named[0]))
        found = "times with and without a time zone"
        raise source.refuse(int(block.row[i]), "time", found, "one or the other")
    return seconds, 0 if named.all() else None
