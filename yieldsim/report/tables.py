"""A study's tables as CSV files: same bytes for same numbers, safe to open in a spreadsheet, read back whole."""

from __future__ import annotations

import csv
import io
from collections.abc import Collection, Iterable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from yieldsim.errors import InputError, Problem
from yieldsim.study import store
from yieldsim.study.result import TEXT_COLUMNS, StudyResult

_DIGITS = 12
#: A cell that begins with one of these may run as a formula in a spreadsheet; the wide forms count there too.
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r", "\n", "＝", "＋", "－", "＠")
_GUARD = "'"


def write_tables(result: StudyResult, folder: Path, skipped: Collection[str] = ()) -> list[Path]:
    """Write every table a result holds, but those skipped, into a folder and return the files.

    Raises
    ------
    PlaceError
        Where the folder cannot be written.
    """
    files = []
    for name, table in result.tables():
        if name in skipped:
            continue
        store.write_text(folder / name, to_csv(table))
        files.append(folder / name)
    return files


def to_csv(table: pd.DataFrame) -> str:
    r"""Return a table as CSV text: ``\n`` line ends, numbers with 12 significant digits, NaN as an empty cell."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(table.columns)
    writer.writerows(zip(*(_cells(table, str(name)) for name in table.columns), strict=True))
    # A lone surrogate (half of a character) has no place in UTF-8.
    return out.getvalue().encode("utf-8", "replace").decode("utf-8")


def _cells(table: pd.DataFrame, name: str) -> Iterable[str]:
    column = table[name]
    if is_text(name, table):
        return [safe_text(str(value)) for value in column]
    return [format_number(value) for value in column]


def is_text(name: str, table: pd.DataFrame) -> bool:
    """Return whether a column holds text: by its name, or because its cells are not numbers."""
    return name in TEXT_COLUMNS or not pd.api.types.is_numeric_dtype(table[name])


def format_number(value: Any) -> str:
    """Return a number with 12 significant digits; empty for NaN, never a negative zero."""
    if value is None or value != value:
        return ""
    if isinstance(value, (bool, np.bool_)):
        return "1" if value else "0"
    if isinstance(value, (int, np.integer)):
        return str(int(value))
    return f"{float(value) + 0.0:.{_DIGITS}g}"


def safe_text(text: str) -> str:
    """Return text that no spreadsheet takes for a formula: one apostrophe before it where it could be one."""
    return _GUARD + text if text.startswith((*_FORMULA_STARTS, _GUARD)) else text


def plain_text(text: str) -> str:
    """Undo `safe_text`."""
    return text[1:] if text.startswith(_GUARD) else text


def read_table(path: Path) -> pd.DataFrame:
    """Read a table that `write_tables` wrote.

    Raises
    ------
    InputError
        If the file is missing or is not such a table.
    """
    try:
        with path.open(encoding="utf-8", newline="") as file:
            rows = list(csv.reader(file))
    except OSError as error:
        raise InputError(Problem(str(path), 0, "", str(error.strerror), "a readable file")) from error
    except (UnicodeDecodeError, csv.Error) as error:
        raise InputError(Problem(str(path), 0, "", f"not a table ({error})", "a CSV file a study wrote")) from error
    if not rows:
        raise InputError(Problem(str(path), 1, "", "an empty file", "a header line and rows"))
    header, body = rows[0], rows[1:]
    problems = [
        Problem(str(path), line, "", f"{len(row)} cells", f"{len(header)} cells, as in the header")
        for line, row in enumerate(body, start=2)
        if len(row) != len(header)
    ]
    if problems:
        raise InputError(problems)
    return pd.DataFrame({name: _parsed(name, [row[i] for row in body]) for i, name in enumerate(header)})


def _parsed(name: str, cells: list[str]) -> Any:
    """Return a column's cells as text, whole numbers or numbers."""
    if name in TEXT_COLUMNS:
        return pd.Series([plain_text(cell) for cell in cells], dtype=object)
    try:
        if cells and all(cell.lstrip("-").isdigit() for cell in cells):
            return pd.Series([int(cell) for cell in cells], dtype=np.int64)
        return pd.Series([float(cell) if cell else np.nan for cell in cells], dtype=np.float64)
    except ValueError:  # a column of another kind of text, such as a stack's gaps
        return pd.Series([plain_text(cell) for cell in cells], dtype=object)
