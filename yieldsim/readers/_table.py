"""Numbers out of lines of delimited text, fast, with every cell that is not a number named by its row."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from yieldsim.errors import InputError, Problem
from yieldsim.readers._source import Source

Array = NDArray[np.float64]

BLOCK_ROWS = 65_536  # rows parsed at once: 13 numbers each are 7 MB
BLOCK_CHARACTERS = 32 * 2**20  # of text parsed at once: rows of 500 characters
MOST_PROBLEMS = 20  # what a person will read; the count of the rest is given
MISSING_WORDS = ("", "NA", "N/A", "NaN", "nan", "NAN", "null", "None", "-", "--")
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d{1,3})?", re.ASCII)


@dataclass(frozen=True, slots=True)
class Block:
    """Some rows of a table.

    Parameters
    ----------
    row : (n,) int64 array, line of the file each row came from, counted from 1
    numbers : column -> (n,) float64 array, NaN where the cell is empty
    texts : column -> (n,) object array of str
    """

    row: NDArray[np.int64]
    numbers: Mapping[str, Array]
    texts: Mapping[str, NDArray[np.object_]]


def split(line: str, delimiter: str = ",") -> list[str]:
    """Return the cells of one line, quotes honoured, outer blanks taken off."""
    if '"' not in line:
        return [cell.strip() for cell in line.split(delimiter)]
    return [cell.strip() for cell in next(csv.reader([line], delimiter=delimiter, skipinitialspace=True), [])]


def positions(source: Source, line: int, names: Sequence[str], wanted: Iterable[str]) -> dict[str, int]:
    """Return where the wanted columns are, those that are there; raises InputError for one that is there twice."""
    found = {name: names.index(name) for name in wanted if name in names}
    twice = [name for name in found if names.count(name) > 1]
    if twice:
        raise InputError([source.problem(line, name, "the column twice", "one of it") for name in twice])
    return found


def blocks(
    source: Source,
    lines: Iterable[str],
    first_line: int,
    numbers: Mapping[str, int],
    texts: Mapping[str, int],
    fields: int,
    delimiter: str = ",",
) -> Iterator[Block]:
    """Yield the rows of a table in blocks.

    Parameters
    ----------
    source : Source, for messages
    lines : the lines of the table, without its header
    first_line : int, number of the first of them in the file
    numbers, texts : column -> position in the row, from 0
    fields : int, cells in every row; more are allowed where only empty ones follow
    delimiter : str

    Raises
    ------
    InputError
        For rows with too few or too many cells and for cells that are not numbers, all of a block at once.
    """
    return numbered_blocks(source, enumerate(lines, start=first_line), numbers, texts, fields, delimiter)


def numbered_blocks(
    source: Source,
    lines: Iterable[tuple[int, str]],
    numbers: Mapping[str, int],
    texts: Mapping[str, int],
    fields: int,
    delimiter: str = ",",
) -> Iterator[Block]:
    """Yield the rows of a table in blocks, each line with its number in the file; see `blocks`."""
    kept: list[str] = []
    rows: list[int] = []
    held = 0
    for number, line in lines:
        if line and not line.isspace():
            kept.append(line)
            rows.append(number)
            held += len(line)
        if len(kept) == BLOCK_ROWS or held > BLOCK_CHARACTERS:
            block = _parse(source, kept, rows, numbers, texts, fields, delimiter)
            kept, rows, held = [], [], 0
            yield block
    if kept:
        yield _parse(source, kept, rows, numbers, texts, fields, delimiter)


def whole(
    source: Source,
    lines: Iterable[str],
    first_line: int,
    numbers: Mapping[str, int],
    texts: Mapping[str, int],
    fields: int,
    delimiter: str = ",",
) -> Block:
    """Return all rows of a table at once; see `blocks`."""
    parts = list(blocks(source, lines, first_line, numbers, texts, fields, delimiter))
    if not parts:
        raise source.refuse(first_line, "", "no rows", "at least one")
    return together(parts)


def together(parts: Sequence[Block]) -> Block:
    """Return blocks of one table as one."""
    numbers, texts = parts[0].numbers, parts[0].texts
    return Block(
        np.concatenate([part.row for part in parts]),
        {name: np.concatenate([part.numbers[name] for part in parts]) for name in numbers},
        {name: np.concatenate([part.texts[name] for part in parts]) for name in texts},
    )


def calendar_seconds(
    source: Source, row: NDArray[np.int64], year: Array, month: Array, day: Array, seconds: Array, most: int
) -> NDArray[np.int64]:
    """Return dates and seconds of the day as unix seconds of the file's clock.

    Parameters
    ----------
    source : Source, for messages
    row : (n,) int array, lines of the file
    year, month, day : (n,) arrays
    seconds : (n,) array [s], since midnight
    most : int [s], largest value of it; 24:00 is the next day's midnight

    Raises
    ------
    InputError
        For what is no date or time of day.
    """
    fields = (year, month, day, seconds)
    whole = np.all([np.isfinite(field) & (field == np.round(field)) for field in fields], axis=0)
    year, month, day, seconds = (np.where(whole, field, 0) for field in fields)
    within = (year >= 1900) & (year <= 2200) & (month >= 1) & (month <= 12) & (day >= 1) & (day <= 31)
    good = whole & within & (seconds >= 0) & (seconds <= most)
    months = np.where(good, (year - 1970) * 12 + month - 1, 0).astype(np.int64)
    first = months.astype("datetime64[M]").astype("datetime64[D]").astype(np.int64)
    length = (months + 1).astype("datetime64[M]").astype("datetime64[D]").astype(np.int64) - first
    good &= day <= length
    if not good.all():
        i = int(np.argmin(good))
        shown = ", ".join(f"{field[i]:g}" for field in fields)
        found = f"year, month, day, seconds {shown} ({int((~good).sum())} such rows)"
        raise source.refuse(int(row[i]), "time", found, "a date and a time of day")
    return np.asarray((first + day.astype(np.int64) - 1) * 86_400 + seconds.astype(np.int64), dtype=np.int64)


def _parse(
    source: Source,
    lines: list[str],
    rows: list[int],
    numbers: Mapping[str, int],
    texts: Mapping[str, int],
    fields: int,
    delimiter: str,
) -> Block:
    if any('"' in line for line in lines):
        lines = [delimiter.join(cell.replace(delimiter, " ") for cell in split(line, delimiter)) for line in lines]
    lines = _same_width(source, lines, rows, fields, delimiter)
    names = {position: name for name, position in (numbers | texts).items()}  # type: ignore[operator]
    use = sorted(names)
    labels = [names[position] for position in use]
    try:
        frame = pd.read_csv(
            io.StringIO("\n".join(lines)),
            header=None,
            usecols=use,
            names=[str(position) if position not in names else names[position] for position in range(fields)],
            dtype={name: (np.float64 if name in numbers else object) for name in labels},
            keep_default_na=False,
            na_values={name: list(MISSING_WORDS) for name in numbers},
            sep=delimiter,
            skipinitialspace=True,
            quoting=csv.QUOTE_NONE,
            engine="c",
        )
    except ValueError:
        raise _not_numbers(source, lines, rows, numbers, delimiter) from None
    values = {name: frame[name].to_numpy(dtype=np.float64) for name in numbers}
    if any(np.isinf(column).any() for column in values.values()):
        raise _not_numbers(source, lines, rows, numbers, delimiter)
    words = {name: frame[name].to_numpy(dtype=object) for name in texts}
    return Block(np.array(rows, dtype=np.int64), values, words)


def _same_width(source: Source, lines: list[str], rows: list[int], fields: int, delimiter: str) -> list[str]:
    """Return lines of equally many cells; empty cells at the end of a row are let go."""
    problems: list[Problem] = []
    wrong = 0
    for i, line in enumerate(lines):
        cells = line.count(delimiter) + 1
        if cells == fields:
            continue
        parts = line.split(delimiter)
        if cells > fields and not "".join(parts[fields:]).strip():
            lines[i] = delimiter.join(parts[:fields])
            continue
        wrong += 1
        if len(problems) < MOST_PROBLEMS:
            problems.append(source.problem(rows[i], "", f"{cells} cells", f"{fields} cells as in the header"))
    if problems:
        raise InputError(problems + _more(source, wrong - len(problems), "such rows"))
    return lines


def _not_numbers(
    source: Source, lines: Sequence[str], rows: Sequence[int], numbers: Mapping[str, int], delimiter: str
) -> InputError:
    """Return an error that names every cell that is not a number, up to a count a person will read."""
    problems: list[Problem] = []
    wrong = 0
    for line, row in zip(lines, rows, strict=True):
        cells = line.split(delimiter)
        for name, position in numbers.items():
            cell = cells[position].strip()
            if cell in MISSING_WORDS or _NUMBER.fullmatch(cell):
                continue
            wrong += 1
            if len(problems) < MOST_PROBLEMS:
                problems.append(source.problem(row, name, repr(cell[:40]), "a number, or empty where there is none"))
    if not problems:  # the fast parser refused what looks like numbers: one beyond double precision
        problems.append(source.problem(rows[0], "", "a number too large to hold", "numbers below 1e300"))
    return InputError(problems + _more(source, wrong - len(problems), "such cells"))


def _more(source: Source, count: int, what: str) -> list[Problem]:
    return [source.problem(0, "", f"{count} more {what}", "")] if count > 0 else []
