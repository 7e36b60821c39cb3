"""YAML text to plain data, with the line and column of every key and value kept; bounded in size, depth and aliases.

Only plain data can come out: mappings, lists, text, numbers, true/false and null, by the core schema of YAML 1.2
(``yes`` is text, ``1e-3`` is a number). Tags are refused.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from yieldsim.config.compose import MAX_DEPTH, MAX_NODES, Mark, Node, compose, excerpt, lines_of
from yieldsim.config.inputs import read_text
from yieldsim.errors import InputError, Problem

MAX_BYTES = 1_000_000  # a study of a thousand sites written out is about 0.3 MB

_LONGEST_PART = 200  # characters of a key in a message; names of sites have no more

KeyPath = tuple[str | int, ...]


@dataclass(frozen=True, slots=True)
class Document:
    """A YAML file as plain data, with the place of everything in it.

    Parameters
    ----------
    file : str, the file as the user named it
    lines : the file's text, line by line; empty where places are not known
    data : mapping, list or scalar
    keys : key path -> Mark of the key (of the value, for an item of a list)
    values : key path -> Mark of the value
    elsewhere : number of a site -> file and line it was read from, where that is not this file
    """

    file: str
    lines: tuple[str, ...]
    data: Any
    keys: Mapping[KeyPath, Mark]
    values: Mapping[KeyPath, Mark]
    elsewhere: Mapping[int, tuple[str, int]] = field(default_factory=dict)

    def mark(self, path: KeyPath, of_key: bool = False) -> Mark:
        """Return the place of a key path, or of the nearest thing above it that the file holds."""
        places = self.keys if of_key else self.values
        while path not in places and path:
            path, places = path[:-1], self.keys
        return places.get(path, Mark(1 if self.lines else 0, 1))

    def problem(self, path: KeyPath, found: str, allowed: str, of_key: bool = False) -> Problem:
        """Return a Problem at a key path, with its line."""
        number = path[1] if len(path) > 1 and path[0] == "sites" else None
        if isinstance(number, int) and number in self.elsewhere:
            return Problem(*self.elsewhere[number], spell(path[2:]), found, allowed)
        mark = self.mark(path, of_key)
        return Problem(self.file, mark.line, spell(path), found, allowed, excerpt(self.lines, mark))


def spell(path: KeyPath) -> str:
    """Return a key path as people write it: ``sites[0].mounting.tilt_deg``."""
    text = ""
    for part in path:
        if isinstance(part, int):
            text += f"[{part}]"
        elif len(part) > _LONGEST_PART:
            text += f"[{part[:_LONGEST_PART]!r}...]"
        elif re.fullmatch(r"[\w\-]+", part):
            text += f".{part}" if text else part
        else:
            text += f"[{part!r}]"
    return text


def read(path: Path, shown: str | None = None) -> Document:
    """Return a YAML file as a Document.

    Parameters
    ----------
    path : Path of the file
    shown : str, what to call the file in messages; its path by default

    Raises
    ------
    InputError
        For a file that is missing, too large, not UTF-8, not YAML, or that holds repeated keys, tags, more than one
        document, or too deep or too many levels; all of the latter at once.
    """
    shown = shown if shown is not None else str(path)
    return parse(read_text(path, shown, MAX_BYTES), shown)


def parse(text: str, shown: str) -> Document:
    """Return YAML text as a Document; raises InputError as `read` does."""
    root = compose(text, shown)
    writer = _Writer()
    try:
        data = writer.plain(root, ()) if root is not None else None
    except _TooManyError:
        found = f"more than {MAX_NODES} keys and values once aliases are written out"
        raise InputError(Problem(shown, 0, "", found, f"at most {MAX_NODES}")) from None
    return Document(shown, tuple(lines_of(text)), data, writer.keys, writer.values)


class _TooManyError(Exception):
    """More nodes than `MAX_NODES`, or aliases of aliases beyond any sense."""


class _Writer:
    """Turns nodes into plain data and notes the place of each key path."""

    def __init__(self) -> None:
        self.keys: dict[KeyPath, Mark] = {}
        self.values: dict[KeyPath, Mark] = {}

    def plain(self, node: Node, path: KeyPath) -> Any:
        """Return a node as plain data; recursion is bounded by the check below."""
        if len(self.values) > MAX_NODES or len(path) > 4 * MAX_DEPTH:
            raise _TooManyError
        self.values[path] = node.mark
        self.keys.setdefault(path, node.mark)
        if node.kind == "list":
            return [self.plain(item, (*path, i)) for i, item in enumerate(node.value)]
        if node.kind == "mapping":
            return self._mapping(node, path)
        return node.value

    def _mapping(self, node: Node, path: KeyPath) -> dict[Any, Any]:
        plain: dict[Any, Any] = {}
        for key, value in node.value:
            here = (*path, key.value if isinstance(key.value, str) else str(key.value))
            self.keys[here] = key.mark
            plain[key.value] = self.plain(value, here)
        return plain
