"""YAML events to nodes that know their place; without recursion, bounded, and by the core schema of YAML 1.2."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Sequence
from dataclasses import dataclass, field
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

from yieldsim.config.fields import quoted
from yieldsim.errors import InputError, Problem, plain

MAX_DEPTH = 12  # the deepest key of a study lies 6 levels down
MAX_NODES = 100_000  # keys and values, also after aliases are written out: guards against alias bombs
_SHOWN = 100  # characters of a line shown in a message

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
_LONGEST_INTEGER = 300  # digits; Python refuses to read those of thousands


@dataclass(frozen=True, slots=True)
class Mark:
    """A place in a file: line and column, both counted from 1."""

    line: int
    column: int


@dataclass(slots=True)
class Node:
    """One value of a file.

    Parameters
    ----------
    mark : Mark of its beginning
    value : a scalar, a list of nodes, or a list of (key node, value node) pairs
    kind : ``scalar``, ``list`` or ``mapping``
    pending : a key that still waits for its value
    seen : key -> where it stands first
    """

    mark: Mark
    value: Any
    kind: str
    pending: Node | None = None
    seen: dict[Any, Mark] = field(default_factory=dict)


def lines_of(text: str) -> list[str]:
    """Return text line by line, as YAML counts lines."""
    return re.split("\r\n|\r|\n", text)


def excerpt(lines: Sequence[str], mark: Mark) -> str:
    """Return the line of a mark with a caret below its place, cut to what a terminal holds; empty if there is none."""
    if not 1 <= mark.line <= len(lines):
        return ""
    line = lines[mark.line - 1]
    start = max(0, mark.column - 1 - _SHOWN // 2) if len(line) > _SHOWN else 0
    shown, before = plain(line[start : start + _SHOWN]), line[start : mark.column - 1]
    gutter = f"{mark.line:>6} | "
    blank = "".join("  " if unicodedata.east_asian_width(each) in ("W", "F") else " " for each in before)
    return f"{gutter}{shown}\n{' ' * (len(gutter) - 2)}| {blank}^"


def compose(text: str, shown: str) -> Node | None:
    """Return the root node of YAML text, None if it is empty.

    Parameters
    ----------
    text : str
    shown : str, what messages call the file

    Raises
    ------
    InputError
        For text that is not YAML, and for repeated keys, tags, merge keys, unknown aliases, a second document, more
        than `MAX_DEPTH` levels or `MAX_NODES` values; as many of these at once as can be seen.
    """
    lines = lines_of(text)
    composer = _Composer(shown, lines)
    try:
        for count, event in enumerate(YAML(typ="safe", pure=True).parse(text)):
            if count > MAX_NODES:
                composer.blame(_mark(event), f"more than {MAX_NODES} keys and values", f"at most {MAX_NODES}")
                break
            if not composer.take(event):
                break
    except MarkedYAMLError as error:
        at = error.problem_mark or error.context_mark
        mark = Mark(at.line + 1, at.column + 1) if at else Mark(0, 0)
        found = " ".join(str(part) for part in (error.context, error.problem) if part)
        raise InputError(Problem(shown, mark.line, "", found, "YAML 1.2", excerpt(lines, mark))) from None
    except ReaderError as error:
        line = text.count("\n", 0, error.position) + 1
        raise InputError(Problem(shown, line, "", "a control character", "text")) from None
    if composer.problems:
        raise InputError(composer.problems)
    return composer.root


class _Composer:
    """Builds nodes from events; `take` is False once there is no sense in going on."""

    def __init__(self, shown: str, lines: Sequence[str]) -> None:
        self.shown = shown
        self.lines = lines
        self.problems: list[Problem] = []
        self.root: Node | None = None
        self._anchors: dict[str, Node] = {}
        self._open: list[tuple[Node, str | None]] = []
        self._documents = 0

    def take(self, event: Any) -> bool:
        if isinstance(event, (ScalarEvent, MappingStartEvent, SequenceStartEvent)) and event.tag is not None:
            self.blame(_mark(event), f"tag {event.tag}", "plain values without tags")
        if isinstance(event, DocumentStartEvent):
            return self._begin(event)
        if isinstance(event, (MappingStartEvent, SequenceStartEvent)):
            return self._descend(event)
        if isinstance(event, (MappingEndEvent, SequenceEndEvent)):
            self._add(*self._open.pop())
        elif isinstance(event, ScalarEvent):
            value = _scalar(event.value) if event.style is None else _joined(event.value)
            self._add(Node(_mark(event), value, "scalar"), event.anchor)
        elif isinstance(event, AliasEvent):
            self._add(self._aliased(event), None)
        return True

    def blame(self, mark: Mark, found: str, allowed: str) -> None:
        self.problems.append(Problem(self.shown, mark.line, "", found, allowed, excerpt(self.lines, mark)))

    def _begin(self, event: Any) -> bool:
        self._documents += 1
        if self._documents == 1:
            return True
        self.blame(_mark(event), "a second document (after `---`)", "one document in a file")
        return False

    def _descend(self, event: Any) -> bool:
        if len(self._open) >= MAX_DEPTH:
            self.blame(_mark(event), f"more than {MAX_DEPTH} levels", f"at most {MAX_DEPTH} levels")
            return False
        kind = "mapping" if isinstance(event, MappingStartEvent) else "list"
        self._open.append((Node(_mark(event), [], kind), event.anchor))
        return True

    def _aliased(self, event: Any) -> Node:
        node = self._anchors.get(event.anchor)
        if node is None:
            self.blame(_mark(event), f"alias *{event.anchor}", f"an anchor &{event.anchor} that ends before it")
            return Node(_mark(event), None, "scalar")
        return node

    def _add(self, node: Node, anchor: str | None) -> None:
        if anchor is not None:
            self._anchors[anchor] = node
        if not self._open:
            self.root = node
            return
        parent = self._open[-1][0]
        if parent.kind == "list":
            parent.value.append(node)
        elif parent.pending is None:
            self._check_key(parent, node)
            parent.pending = node
        else:
            parent.value.append((parent.pending, node))
            parent.pending = None

    def _check_key(self, parent: Node, key: Node) -> None:
        if key.kind != "scalar":
            self.blame(key.mark, f"a {key.kind} as a key", "text or a number as a key")
        elif key.value == "<<":
            self.blame(
                key.mark,
                "the merge key `<<`, which YAML 1.2 does not have",
                "keys written out, or a whole value by alias",
            )
        else:
            first = parent.seen.setdefault(key.value, key.mark)
            if first is not key.mark:
                self.blame(key.mark, f"key {quoted(key.value)} again (first in line {first.line})", "each key once")


def _joined(text: str) -> str:
    """Return quoted text with surrogate pairs, as JSON writes characters beyond U+FFFF, put together."""
    if not any("\ud800" <= each <= "\udfff" for each in text):
        return text
    return text.encode("utf-16-le", "surrogatepass").decode("utf-16-le", "replace")


def _mark(event: Any) -> Mark:
    return Mark(event.start_mark.line + 1, event.start_mark.column + 1)


def _scalar(text: str) -> Any:
    """Return a plain scalar's value by the core schema."""
    if _NULL.match(text):
        return None
    if _TRUE.match(text) or _FALSE.match(text):
        return bool(_TRUE.match(text))
    infinite = _INFINITE.match(text)
    if infinite:
        return float(f"{infinite.group(1)}inf")
    return float("nan") if _NAN.match(text) else _number(text)


def _number(text: str) -> Any:
    """Return a finite number, or the text if it is none."""
    if _DECIMAL.match(text):
        return int(text) if len(text) <= _LONGEST_INTEGER else float(text)
    if (_OCTAL.match(text) or _HEX.match(text)) and len(text) <= _LONGEST_INTEGER:
        return int(text, 0)
    return float(text) if _FLOAT.match(text) else text
