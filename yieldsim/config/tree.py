"""YAML text to plain data, with the line and column of every key and value kept; bounded in size, depth and aliases.

Only plain data can come out: mappings, lists, text, numbers, true/false and null, by the core schema of YAML 1.2
(``yes`` is text, ``1e-3`` is a number). Tags are refused.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from ruamel.yaml import YAML
from ruamel.yaml.error import MarkedYAMLError
from ruamel.yaml.events import (
    AliasEvent,
    DocumentStartEvent,
    MappingEndEvent,
    MappingStartEvent,
    ScalarEvent,
    SequenceEndEvent,
    SequenceStartEvent,
)
from ruamel.yaml.reader import ReaderError

from yieldsim.errors import InputError, Problem

MAX_BYTES = 1_000_000  # a study of a thousand sites written out is about 0.3 MB
MAX_DEPTH = 12  # the deepest key of a study lies 6 levels down
MAX_NODES = 100_000  # keys and values after aliases are written out: guards against alias bombs

KeyPath = tuple[str | int, ...]

# YAML 1.2, section 10.3.2 (core schema).
_NULL = re.compile(r"(?:null|Null|NULL|~|)\Z")
_TRUE = re.compile(r"(?:true|True|TRUE)\Z")
_FALSE = re.compile(r"(?:false|False|FALSE)\Z")
_DECIMAL = re.compile(r"[-+]?[0-9]+\Z")
_OCTAL = re.compile(r"0o[0-7]+\Z")
_HEX = re.compile(r"0x[0-9a-fA-F]+\Z")
_FLOAT = re.compile(r"[-+]?(?:\.[0-9]+|[0-9]+(?:\.[0-9]*)?)(?:[eE][-+]?[0-9]+)?\Z")
_INFINITE = re.compile(r"([-+]?)(?:\.inf|\.Inf|\.INF)\Z")
_NAN = re.compile(r"(?:\.nan|\.NaN|\.NAN)\Z")


@dataclass(frozen=True, slots=True)
class Mark:
    """A place in a file: line and column, both counted from 1."""

    line: int
    column: int


@dataclass(frozen=True, slots=True)
class Document:
    """A YAML file as plain data, with the place of everything in it.

    Parameters
    ----------
    file : str, the file as the user named it
    lines : the file's text, line by line
    data : mapping, list or scalar
    keys : key path -> Mark of the key (of the value, for an item of a list)
    values : key path -> Mark of the value
    """

    file: str
    lines: tuple[str, ...]
    data: Any
    keys: Mapping[KeyPath, Mark]
    values: Mapping[KeyPath, Mark]

    def mark(self, path: KeyPath, of_key: bool = False) -> Mark:
        """Return the place of a key path, or of the nearest thing above it that the file holds."""
        places = self.keys if of_key else self.values
        while path not in places and path:
            path, places = path[:-1], self.keys
        return places.get(path, Mark(1, 1))

    def problem(self, path: KeyPath, found: str, allowed: str, of_key: bool = False) -> Problem:
        """Return a Problem at a key path, with its line."""
        return Problem(self.file, self.mark(path, of_key).line, spell(path), found, allowed)


def spell(path: KeyPath) -> str:
    """Return a key path as people write it: ``sites[0].mounting.tilt_deg``."""
    text = ""
    for part in path:
        if isinstance(part, int):
            text += f"[{part}]"
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
    return parse(read_text(path, shown), shown)


def read_text(path: Path, shown: str, limit: int = MAX_BYTES) -> str:
    """Return the text of a file of at most ``limit`` bytes; raises InputError otherwise."""

    def refuse(found: str, allowed: str, line: int = 0) -> InputError:
        return InputError(Problem(shown, line, "", found, allowed))

    try:
        if not path.exists():
            raise refuse("no such file", f"a file that exists; looked for {path.absolute()}")
        if not path.is_file():
            raise refuse("not a file", "a text file")
        with path.open("rb") as stream:
            content = stream.read(limit + 1)
    except PermissionError:
        raise refuse("no permission to read it", "a readable file") from None
    except (OSError, ValueError) as error:  # ValueError: a name no file system can hold
        raise refuse(f"it cannot be read ({getattr(error, 'strerror', None) or error})", "a readable file") from None
    if len(content) > limit:
        raise refuse(f"more than {limit / 1e6:g} MB", f"at most {limit / 1e6:g} MB")
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        raise refuse("bytes that are not UTF-8 text", "text in UTF-8", line) from None


def parse(text: str, shown: str) -> Document:
    """Return YAML text as a Document; raises InputError as `read` does."""
    composer = _Composer(shown)
    try:
        root = composer.compose(YAML(typ="safe", pure=True).parse(text))
    except MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        found = " ".join(str(part) for part in (error.context, error.problem) if part)
        raise InputError(Problem(shown, mark.line + 1 if mark else 0, "", found, "YAML 1.2")) from None
    except ReaderError as error:
        line = text.count("\n", 0, error.position) + 1
        raise InputError(Problem(shown, line, "", "a control character", "text")) from None
    if composer.problems:
        raise InputError(composer.problems)
    writer = _Writer()
    try:
        data = writer.plain(root, ()) if root is not None else None
    except _TooManyError:
        found = f"more than {MAX_NODES} keys and values once aliases are written out"
        raise InputError(Problem(shown, 0, "", found, f"at most {MAX_NODES}")) from None
    return Document(shown, tuple(text.splitlines()), data, writer.keys, writer.values)


@dataclass(slots=True)
class _Node:
    """One value of the file: a scalar, a list of nodes, or a list of (key node, value node) pairs."""

    mark: Mark
    value: Any
    kind: str
    pending: _Node | None = None  # a key that still waits for its value


class _TooManyError(Exception):
    """More nodes than `MAX_NODES`."""


class _Composer:
    """Builds nodes from YAML events without recursion, so that no nesting can exhaust the stack."""

    def __init__(self, shown: str) -> None:
        self.shown = shown
        self.problems: list[Problem] = []
        self._anchors: dict[str, _Node] = {}
        self._open: list[tuple[_Node, str | None]] = []
        self._root: _Node | None = None
        self._documents = 0

    def compose(self, events: Iterator[Any]) -> _Node | None:
        """Return the root node; problems are collected on the way."""
        for count, event in enumerate(events):
            if count > MAX_NODES:
                self._blame(event, f"more than {MAX_NODES} keys and values", f"at most {MAX_NODES}")
                break
            if not self._take(event):
                break
        return self._root

    def _take(self, event: Any) -> bool:
        """Take one event; False if there is no sense in going on."""
        if isinstance(event, DocumentStartEvent):
            self._documents += 1
            if self._documents > 1:
                self._blame(event, "a second document (after `---`)", "one document in a file")
                return False
        elif isinstance(event, (MappingStartEvent, SequenceStartEvent)):
            self._refuse_tag(event)
            if len(self._open) >= MAX_DEPTH:
                self._blame(event, f"more than {MAX_DEPTH} levels", f"at most {MAX_DEPTH} levels")
                return False
            kind = "mapping" if isinstance(event, MappingStartEvent) else "list"
            self._open.append((_Node(_mark(event), [], kind), event.anchor))
        elif isinstance(event, (MappingEndEvent, SequenceEndEvent)):
            node, anchor = self._open.pop()
            self._add(node, anchor)
        elif isinstance(event, ScalarEvent):
            self._refuse_tag(event)
            value = _scalar(event.value) if event.style is None else event.value
            self._add(_Node(_mark(event), value, "scalar"), event.anchor)
        elif isinstance(event, AliasEvent):
            self._add(self._aliased(event), None)
        return True

    def _aliased(self, event: Any) -> _Node:
        node = self._anchors.get(event.anchor)
        if node is None:
            self._blame(event, f"alias *{event.anchor}", f"an anchor &{event.anchor} that ends before it")
            return _Node(_mark(event), None, "scalar")
        return node

    def _add(self, node: _Node, anchor: str | None) -> None:
        if anchor is not None:
            self._anchors[anchor] = node
        if not self._open:
            self._root = node
            return
        parent = self._open[-1][0]
        if parent.kind == "list":
            parent.value.append(node)
        elif parent.pending is None:
            parent.pending = node
            self._check_key(parent, node)
        else:
            parent.value.append((parent.pending, node))
            parent.pending = None

    def _check_key(self, parent: _Node, key: _Node) -> None:
        if key.kind != "scalar":
            self.problems.append(
                Problem(self.shown, key.mark.line, "", f"a {key.kind} as a key", "text or a number as a key")
            )
            key.value, key.kind = f"{key.kind} {id(key)}", "scalar"  # a name of its own: not a repeat
            return
        if key.value == "<<":
            found = "the merge key `<<`, which YAML 1.2 does not have"
            self.problems.append(
                Problem(self.shown, key.mark.line, "", found, "keys written out, or a whole value by alias")
            )
            return
        for earlier, _ in parent.value:
            if earlier.value == key.value:
                found = f"key `{key.value}` again (first in line {earlier.mark.line})"
                self.problems.append(Problem(self.shown, key.mark.line, str(key.value), found, "each key once"))
                return

    def _refuse_tag(self, event: Any) -> None:
        if event.tag is not None:
            self._blame(event, f"tag {event.tag}", "plain values without tags")

    def _blame(self, event: Any, found: str, allowed: str) -> None:
        self.problems.append(Problem(self.shown, event.start_mark.line + 1, "", found, allowed))


class _Writer:
    """Turns nodes into plain data and notes the place of each key path."""

    def __init__(self) -> None:
        self.keys: dict[KeyPath, Mark] = {}
        self.values: dict[KeyPath, Mark] = {}

    def plain(self, node: _Node, path: KeyPath) -> Any:
        """Return a node as plain data; recursion is bounded by depth of the file times its aliases."""
        if len(self.values) > MAX_NODES or len(path) > 4 * MAX_DEPTH:
            raise _TooManyError
        self.values[path] = node.mark
        self.keys.setdefault(path, node.mark)
        if node.kind == "list":
            return [self.plain(item, (*path, i)) for i, item in enumerate(node.value)]
        if node.kind == "mapping":
            return self._mapping(node, path)
        return node.value

    def _mapping(self, node: _Node, path: KeyPath) -> dict[Any, Any]:
        plain: dict[Any, Any] = {}
        for key, value in node.value:
            here = (*path, key.value if isinstance(key.value, str) else str(key.value))
            self.keys[here] = key.mark
            plain[key.value] = self.plain(value, here)
        return plain


def _mark(event: Any) -> Mark:
    return Mark(event.start_mark.line + 1, event.start_mark.column + 1)


def _scalar(text: str) -> Any:
    """Return a plain scalar's value by the core schema of YAML 1.2."""
    if _NULL.match(text):
        return None
    if _TRUE.match(text) or _FALSE.match(text):
        return bool(_TRUE.match(text))
    if _DECIMAL.match(text):
        return int(text) if len(text) <= 300 else float(text)  # Python refuses to read very long integers
    if _OCTAL.match(text) or _HEX.match(text):
        return int(text, 0) if len(text) <= 300 else text
    if _FLOAT.match(text):
        return float(text)
    infinite = _INFINITE.match(text)
    if infinite:
        return float(f"{infinite.group(1)}inf")
    return float("nan") if _NAN.match(text) else text
