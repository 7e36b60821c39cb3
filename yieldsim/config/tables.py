"""Tables a study names besides weather: columns of numbers as instruments and spreadsheets write them.

Separated by semicolons, tabs, commas or blanks; a decimal comma where commas do not separate; lines of text before the
first numbers, comment lines anywhere. What the numbers mean, and whether they are in order, is for the reader of the
column to say.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from yieldsim.config.inputs import read_text
from yieldsim.errors import InputError, Problem

MAX_BYTES = 5_000_000
MAX_ROWS = 100_000
MAX_HEAD = 200  # lines of text before the first numbers
MAX_PROBLEMS = 20
_COMMENT = ("#", "%", "!", "//")
_MISSING = ("", "nan", "na", "n/a", "-", "--", "null")
_NUMBER = re.compile(r"[-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?%?\Z")

Split = Callable[[str], list[str]]


@dataclass(frozen=True, slots=True)
class NumberTable:
    """Columns of numbers from a file.

    Parameters
    ----------
    shown : str, the file as the user named it
    values : (n_row, n_column) float64 array; rows without a value in any wanted column are left out
    rows : (n_row,) int array, line of the file each came from, counted from 1
    head : the cells of the last line of text before the numbers; empty if there is none
    skipped : int, rows left out because a value is missing
    """

    shown: str
    values: NDArray[np.float64]
    rows: NDArray[np.int64]
    head: tuple[str, ...]
    skipped: int

    def problem(self, row: int, where: str, found: str, allowed: str) -> Problem:
        """Return a Problem at one of the rows, counted from 0."""
        return Problem(self.shown, int(self.rows[row]), where, found, allowed)


def read_table(path: Path, shown: str, columns: int = 2, least: int = 2, extra: int = 0) -> NumberTable:
    """Return the first columns of a table of numbers.

    Parameters
    ----------
    path : Path
    shown : str, what messages call the file
    columns : int, how many columns are wanted; further ones are passed over
    least : int, fewest rows
    extra : int, how many more are taken where the first row of numbers has them

    Raises
    ------
    InputError
        For a file that cannot be read, that holds no table, too few or too many rows, or text among its numbers.
    """
    return parse_table(read_text(path, shown, MAX_BYTES, lenient=True), shown, columns, least, extra)


def parse_table(text: str, shown: str, columns: int = 2, least: int = 2, extra: int = 0) -> NumberTable:
    """Return the first columns of a table of numbers in a text; see `read_table`."""
    lines = [
        (number, line.strip())
        for number, line in enumerate(text.splitlines(), 1)
        if line.strip() and not line.lstrip().startswith(_COMMENT)
    ]
    if len(lines) > MAX_ROWS + MAX_HEAD:
        raise InputError(Problem(shown, 0, "", f"{len(lines)} rows", f"at most {MAX_ROWS}"))
    split, start = _layout([line for _, line in lines], columns)
    if split is None:
        first = lines[0][0] if lines else 0
        allowed = f"a table of {columns} columns of numbers, with at most {MAX_HEAD} lines of text before them"
        raise InputError(Problem(shown, first, "", "no row of numbers" if lines else "nothing", allowed))
    first_cells = split(lines[start][1])[columns : columns + extra]
    columns += next((i for i, cell in enumerate(first_cells) if not _is_number(cell)), len(first_cells))
    values, rows, problems = _numbers(lines[start:], split, shown, columns)
    whole = [all(math.isfinite(cell) for cell in row) for row in values]
    if not problems and sum(whole) < least:
        problems = [Problem(shown, 0, "", f"{sum(whole)} rows of numbers", f"{least} or more")]
    if problems:
        raise InputError(problems)
    return NumberTable(
        shown,
        np.array([row for row, good in zip(values, whole, strict=True) if good], dtype=np.float64),
        np.array([row for row, good in zip(rows, whole, strict=True) if good], dtype=np.int64),
        tuple(split(lines[start - 1][1])) if start else (),
        whole.count(False),
    )


def _layout(lines: Sequence[str], columns: int) -> tuple[Split | None, int]:
    """Return how to split rows, and the first row of numbers: the earliest that any way of splitting finds."""
    for start, line in enumerate(lines[:MAX_HEAD]):
        for split in (_at_semicolons, _at_tabs, _at_commas, _at_blanks):
            cells = split(line)
            if len(cells) >= columns and all(_NUMBER.match(cell) for cell in cells[:columns]):
                return split, start
    return None, 0


def _numbers(
    lines: Sequence[tuple[int, str]], split: Split, shown: str, columns: int
) -> tuple[list[list[float]], list[int], list[Problem]]:
    values: list[list[float]] = []
    rows: list[int] = []
    problems: list[Problem] = []
    for number, line in lines:
        cells = split(line)[:columns]
        cells += [""] * (columns - len(cells))
        wrong = [cell for cell in cells if not _is_number(cell) and cell.lower() not in _MISSING]
        if wrong:
            problems.append(Problem(shown, number, "", repr(wrong[0][:60]), "a number"))
            if len(problems) == MAX_PROBLEMS:
                break
            continue
        values.append([_number(cell) for cell in cells])
        rows.append(number)
    return values, rows, problems


def _is_number(cell: str) -> bool:
    return _NUMBER.match(cell) is not None and math.isfinite(float(cell.rstrip("%")))


def _number(cell: str) -> float:
    """Return a cell's number; 45% is 45: the unit is the column's business."""
    return math.nan if cell.lower() in _MISSING else float(cell.rstrip("%"))


def _cells(parts: Sequence[str], decimal_comma: bool) -> list[str]:
    cells = [part.strip().strip('"').strip() for part in parts]
    return [cell.replace(",", ".") if decimal_comma and "." not in cell else cell for cell in cells]


def _at_semicolons(line: str) -> list[str]:
    return _cells(line.split(";"), True)


def _at_tabs(line: str) -> list[str]:
    return _cells(line.split("\t"), True)


def _at_commas(line: str) -> list[str]:
    return _cells(line.split(","), False)


def _at_blanks(line: str) -> list[str]:
    return _cells(line.split(), True)
