"""Errors that reach the user, and the exit code each stands for."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


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
        """Return the problem as people read it: place, key, found, allowed."""
        place = ":".join(part for part in (self.file, str(self.line) if self.line else "") if part)
        head = ": ".join(part for part in (place, self.where) if part)
        body = f"found {self.found}; allowed: {self.allowed}" if self.allowed else self.found
        text = f"{head}: {body}" if head else body
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
