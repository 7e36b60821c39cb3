"""How the commands speak on a terminal: tables on stdout, progress on stderr, colour only where it is wanted."""

from __future__ import annotations

import os
import sys
import textwrap
import time
import unicodedata
from collections.abc import Callable, Sequence
from typing import TextIO

from yieldsim.errors import plain

_BOLD, _PLAIN, _CLEAR_LINE = "\x1b[1m", "\x1b[0m", "\r\x1b[K"


def is_terminal(stream: TextIO) -> bool:
    """Return whether a person watches a stream on a terminal that can move its cursor."""
    try:
        return stream.isatty() and os.environ.get("TERM") != "dumb"
    except ValueError:  # a closed stream
        return False


def bold(text: str, stream: TextIO | None = None) -> str:
    """Return text in bold where the stream is a terminal and NO_COLOR (no-color.org) is not set."""
    stream = sys.stdout if stream is None else stream
    return f"{_BOLD}{text}{_PLAIN}" if is_terminal(stream) and not os.environ.get("NO_COLOR") else text


def width(text: str) -> int:
    """Return how many columns text takes on a terminal."""
    wide = sum(unicodedata.east_asian_width(character) in ("W", "F") for character in text)
    return len(text) + wide - sum(unicodedata.combining(character) != 0 for character in text)


def cut(text: str, columns: int) -> str:
    """Return text of at most so many columns, with a mark where it was cut."""
    text = plain(text)
    if width(text) <= columns:
        return text
    while text and width(text) > columns - 3:
        text = text[:-1]
    return text + "..."


def table(head: Sequence[str], rows: Sequence[Sequence[str]], indent: str = "  ") -> str:
    """Return aligned columns: the first to the left, the others to the right."""
    lines = [list(head), *(list(row) for row in rows)]
    widths = [max(width(line[i]) for line in lines) for i in range(len(head))]
    text = []
    for line in lines:
        cells = [
            cell + " " * (widths[i] - width(cell)) if i == 0 else " " * (widths[i] - width(cell)) + cell
            for i, cell in enumerate(line)
        ]
        text.append((indent + "  ".join(cells)).rstrip())
    return "\n".join(text)


def wrapped(text: str, indent: str = "", first: str | None = None) -> str:
    """Return a sentence broken into lines of at most 100 columns; ``first`` stands before the first line instead."""
    return textwrap.fill(
        plain(text),
        100,
        initial_indent=indent if first is None else first,
        subsequent_indent=indent,
        break_long_words=False,
        break_on_hyphens=False,
    )


def duration(seconds: float) -> str:
    """Return a time as people say it: ``40 s``, ``3 min``, ``2 h 5 min``."""
    if seconds < 90:
        return f"{max(1, round(seconds))} s"
    minutes = round(seconds / 60)
    return f"{minutes} min" if minutes < 90 else f"{minutes // 60} h {minutes % 60} min"


class Progress:
    """Shows on stderr how far long work is and how long it will take; says nothing where nobody watches.

    Parameters
    ----------
    quiet : bool, say nothing at all
    stream : where to write; stderr if left out
    clock : seconds that pass; for tests
    """

    def __init__(
        self, quiet: bool = False, stream: TextIO | None = None, clock: Callable[[], float] = time.monotonic
    ) -> None:
        """Start the clock."""
        self._stream = sys.stderr if stream is None else stream
        self._shown = not quiet and is_terminal(self._stream)
        self._clock = clock
        self._start = clock()

    def __call__(self, what: str, done: int, of: int) -> None:
        """Show that ``done`` of ``of`` steps are finished, the last one being ``what``."""
        if not self._shown:
            return
        left = ""
        if 0 < done < of:
            left = f", about {duration((self._clock() - self._start) / done * (of - done))} left"
        self._stream.write(f"{_CLEAR_LINE}{done} of {of} done{left}  {cut(what, 40)}")
        self._stream.flush()

    def close(self) -> None:
        """Clear the line."""
        if self._shown:
            self._stream.write(_CLEAR_LINE)
            self._stream.flush()
