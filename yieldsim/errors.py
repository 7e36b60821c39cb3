"""Errors that reach the user, and the exit code each stands for."""

from __future__ import annotations

import unicodedata
from collections.abc import Iterable
from dataclasses import dataclass


def plain(text: str) -> str:
    """Return text without characters that could steer a terminal: control and direction-changing ones become ``?``."""
    return "".join("?" if unicodedata.category(character) in ("Cc", "Cf", "Cs") else character for character in text)


class YieldsimError(Exception):
    """Base of all errors raised on purpose; anything else is a bug (exit code 3)."""

    exit_code = 1


@dataclass(frozen=True, slots=True)
class Problem:
    """One thing that is wrong with the user's input.

    Parameters
    ----------
    file : str, the file as the user named it; empty if none
    line : int, line or row in it, counted from 1; 0 if unknown
    where : str, key path (``sites[0].weather``) or column name; may be empty
    found : str, what was found
    allowed : str, what is allowed
    excerpt : str, the line of the file with the place marked; shown below the message; may be empty
    """

    file: str
    line: int
    where: str
    found: str
    allowed: str
    excerpt: str = ""

    def __str__(self) -> str:
        """Return the problem as people read it: place, key, found, allowed; on one line but for the excerpt."""
        place = ":".join(part for part in (self.file, str(self.line) if self.line else "") if part)
        head = ": ".join(part for part in (place, self.where) if part)
        body = f"found {self.found}; allowed: {self.allowed}" if self.allowed else self.found
        text = plain(f"{head}: {body}" if head else body)
        return f"{text}\n{self.excerpt}" if self.excerpt else text


class InputError(YieldsimError):
    """The user's files or command line are wrong: every problem found, at once (exit code 1)."""

    exit_code = 1

    def __init__(self, problems: Problem | Iterable[Problem]) -> None:
        """Take one problem or several."""
        self.problems: tuple[Problem, ...] = (problems,) if isinstance(problems, Problem) else tuple(problems)
        super().__init__("\n".join(str(problem) for problem in self.problems))


class PlaceError(YieldsimError):
    """It could not be done on this machine: disk, permission, folder in use (exit code 2)."""

    exit_code = 2
