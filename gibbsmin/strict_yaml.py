"""YAML read strictly: plain data, with the line and column of every value and key.

The reader is built on the event stream of the YAML parser rather than on its object constructor, which
settles four things at once:

- nothing but text, numbers, true/false, null, lists and mappings can come out of a file;
- a key written twice, a tag, an anchor or an alias is a fault (so no alias can expand exponentially);
- nesting is counted, so a file cannot exhaust the stack;
- scalars follow the core schema of YAML 1.2 (https://yaml.org/spec/1.2.2/#103-core-schema), not the older
  rules by which `NO` would be *false* instead of nitric oxide, `1e5` text and `2024-01-01` a date.

Keys are always text, whatever they look like: a species or an axis may be called `NO`, `true` or `1`.

Faults are collected, not raised, so that a caller can add its own and report all in one message:

    document = parse(text, "plant.yaml")
    faults = list(document.faults)
    if not isinstance(document.data, dict):
        faults.append(document.fault((), "expected a mapping"))
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from os import PathLike
from pathlib import Path
from typing import Any, TypeAlias

import yaml

from gibbsmin.errors import Fault

__all__ = ["DEEPEST_NESTING", "Document", "Position", "YamlPath", "parse", "parse_file"]

YamlPath: TypeAlias = tuple[str | int, ...]
"""Keys and list indices from the top of the document to a value, e.g. ("streams", 0, "temperature")."""

Position: TypeAlias = tuple[int, int]
"""Line and column, both counted from 1."""

DEEPEST_NESTING = 50
"""Lists and mappings inside each other; the files of this package need fewer than ten."""

LONGEST_INTEGER = 400
"""Digits; beyond it an integer has no float value either."""

_LOADER = getattr(yaml, "CSafeLoader", yaml.SafeLoader)  # the C parser where PyYAML was built with it

_NULL = frozenset(["", "~", "null", "Null", "NULL"])
_TRUE = frozenset(["true", "True", "TRUE"])
_FALSE = frozenset(["false", "False", "FALSE"])
_INTEGER = re.compile(r"[-+]?[0-9]+\Z")
_FLOAT = re.compile(r"[-+]?(?:\.[0-9]+|[0-9]+(?:\.[0-9]*)?)(?:[eE][-+]?[0-9]+)?\Z")
_INFINITY = re.compile(r"([-+]?)\.(?:inf|Inf|INF)\Z")
_NOT_A_NUMBER = frozenset([".nan", ".NaN", ".NAN"])
_NUMBER_STARTS = frozenset("+-.0123456789")
_TEXT_TAGS = frozenset(["!", "tag:yaml.org,2002:str"])


@dataclass(frozen=True)
class Document:
    """What one YAML document holds and where.

    `data` is built of dict (keys are text), list, str, int, float, bool and None. `positions` maps the path
    of every value to its line and column, `key_positions` that of every mapping entry to those of its key.
    A document with a syntax fault has `data` None. Where a key is written twice, the first value is kept.
    """

    data: Any
    file: str = ""
    positions: dict[YamlPath, Position] = field(default_factory=dict)
    key_positions: dict[YamlPath, Position] = field(default_factory=dict)
    faults: tuple[Fault, ...] = ()

    def position(self, path: YamlPath, *, of_key: bool = False) -> Position | None:
        """Line and column of the value (or key) at `path`, or of the nearest enclosing value that exists."""
        path = tuple(path)
        if of_key and path in self.key_positions:
            return self.key_positions[path]
        while path not in self.positions:
            if not path:
                return None
            path = path[:-1]
        return self.positions[path]

    def fault(self, path: YamlPath, message: str, *, of_key: bool = False) -> Fault:
        """A fault of this file placed at the value (or, with `of_key`, the key) of `path`."""
        line, column = self.position(path, of_key=of_key) or (None, None)
        return Fault(message, self.file, line, column)


def parse_file(path: str | PathLike[str], *, shown_as: str | None = None) -> Document:
    """Read and parse a UTF-8 file; `shown_as` is its name in faults (default: the path).

    Raises OSError when the file cannot be read; everything else is a fault of the document.
    """
    name = str(path) if shown_as is None else shown_as
    raw = Path(path).read_bytes()
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        before = raw[: error.start]
        line = before.count(b"\n") + 1
        column = error.start - (before.rfind(b"\n") + 1) + 1
        return Document(None, name, faults=(Fault("the file is not UTF-8 text here", name, line, column),))
    return parse(text, name)


def parse(text: str, file: str = "", *, first_line: int = 1) -> Document:
    """Parse one YAML document; `first_line` is the number of its first line when it is part of a file."""
    return _Reader(file, first_line).read(text)


class _Container:
    """A list or mapping being filled."""

    __slots__ = ("key", "path", "repeated", "value")

    def __init__(self, value: list[Any] | dict[str, Any], path: YamlPath) -> None:
        self.value = value
        self.path = path
        self.key: str | None = None  # of a mapping whose key was read and whose value comes next
        self.repeated = False


class _Reader:
    def __init__(self, file: str, first_line: int) -> None:
        self.file = file
        self.first_line = first_line
        self.positions: dict[YamlPath, Position] = {}
        self.key_positions: dict[YamlPath, Position] = {}
        self.faults: list[Fault] = []
        self.root: Any = None

    def read(self, text: str) -> Document:
        try:
            self._fill(yaml.parse(text, Loader=_LOADER))
        except yaml.YAMLError as error:
            self.faults.append(self._syntax_fault(error, text))
            self.root = None
        except _TooDeepError as error:
            self.faults.append(self._fault(error.position, f"nested deeper than {DEEPEST_NESTING} levels"))
            self.root = None
        return Document(self.root, self.file, self.positions, self.key_positions, tuple(self.faults))

    def _fill(self, events: Iterator[Any]) -> None:
        stack: list[_Container] = []
        documents = 0
        for event in events:
            mark = event.start_mark
            position = (mark.line + self.first_line, mark.column + 1)
            kind = type(event)
            if kind is yaml.ScalarEvent:
                top = stack[-1] if stack else None
                self._check_decoration(event, position, scalar=True)
                if top is not None and isinstance(top.value, dict) and top.key is None:
                    self._take_key(top, event.value, position)
                else:
                    self._place(top, self._scalar(event, position), position)
            elif kind is yaml.MappingStartEvent or kind is yaml.SequenceStartEvent:
                self._check_decoration(event, position, scalar=False)
                if len(stack) >= DEEPEST_NESTING:
                    raise _TooDeepError(position)
                top = stack[-1] if stack else None
                if top is not None and isinstance(top.value, dict) and top.key is None:
                    self.faults.append(self._fault(position, "a key must be text, not a list or a mapping"))
                    _skip_to_end(events)
                    self._take_key(top, f"(key at line {position[0]})", position)
                    continue
                container = _Container({} if kind is yaml.MappingStartEvent else [], self._next_path(top))
                self._place(top, container.value, position)
                stack.append(container)
            elif kind is yaml.MappingEndEvent or kind is yaml.SequenceEndEvent:
                stack.pop()
            elif kind is yaml.AliasEvent:
                self.faults.append(
                    self._fault(position, f"the alias *{event.anchor} is not read; write the value out")
                )
                top = stack[-1] if stack else None
                if top is not None and isinstance(top.value, dict) and top.key is None:
                    self._take_key(top, f"*{event.anchor}", position)
                else:
                    self._place(top, None, position)
            elif kind is yaml.DocumentStartEvent:
                documents += 1
                if documents > 1:
                    self.faults.append(self._fault(position, "a file holds one document; remove this '---'"))
                    return

    def _next_path(self, top: _Container | None) -> YamlPath:
        if top is None:
            return ()
        if isinstance(top.value, dict):
            assert top.key is not None
            return (*top.path, top.key)
        return (*top.path, len(top.value))

    def _take_key(self, top: _Container, key: str, position: Position) -> None:
        assert isinstance(top.value, dict)
        top.key = key
        top.repeated = key in top.value
        if top.repeated:
            first = self.key_positions.get((*top.path, key))
            seen = f" (first on line {first[0]})" if first else ""
            self.faults.append(self._fault(position, f"the key {key!r} is written twice{seen}"))
        else:
            self.key_positions[(*top.path, key)] = position

    def _place(self, top: _Container | None, value: Any, position: Position) -> None:
        if top is None:
            self.root = value
            self.positions[()] = position
            return
        if isinstance(top.value, list):
            self.positions[(*top.path, len(top.value))] = position
            top.value.append(value)
            return
        assert top.key is not None
        if not top.repeated:
            self.positions[(*top.path, top.key)] = position
            top.value[top.key] = value
        top.key = None
        top.repeated = False

    def _check_decoration(self, event: Any, position: Position, *, scalar: bool) -> None:
        if event.anchor is not None:
            self.faults.append(
                self._fault(position, f"the anchor &{event.anchor} is not read; write the value out")
            )
        if event.tag is not None and not (scalar and event.tag in _TEXT_TAGS):
            shown = event.tag.replace("tag:yaml.org,2002:", "!!")
            self.faults.append(self._fault(position, f"the tag {shown} is not read; remove it"))

    def _scalar(self, event: Any, position: Position) -> Any:
        text: str = event.value
        if event.style or event.tag is not None:  # quoted, block, or declared to be text
            return text
        if text[:1] in _NUMBER_STARTS:
            return self._number(text, position)
        if text in _NULL:
            return None
        if text in _TRUE:
            return True
        if text in _FALSE:
            return False
        return text

    def _number(self, text: str, position: Position) -> Any:
        if _INTEGER.match(text):
            if len(text) <= LONGEST_INTEGER:
                return int(text)
            self.faults.append(self._fault(position, f"a whole number of {len(text)} digits is too long"))
            return None
        if _FLOAT.match(text):
            value = float(text)
            if math.isinf(value):
                self.faults.append(self._fault(position, f"the number {text} is too large"))
                return None
            return value
        infinity = _INFINITY.match(text)
        if infinity:
            return -math.inf if infinity[1] == "-" else math.inf
        return math.nan if text in _NOT_A_NUMBER else text

    def _fault(self, position: Position, message: str) -> Fault:
        return Fault(message, self.file, *position)

    def _syntax_fault(self, error: yaml.YAMLError, text: str) -> Fault:
        mark = getattr(error, "problem_mark", None) or getattr(error, "context_mark", None)
        problem = getattr(error, "problem", None)
        context = getattr(error, "context", None)
        if mark is not None:
            words = ", ".join(part for part in (context, problem) if part)
            return self._fault(
                (mark.line + self.first_line, mark.column + 1), f"not readable as YAML: {words}"
            )
        offset = getattr(error, "position", None)  # a character that YAML forbids
        if isinstance(offset, int):
            before = text[:offset]
            place = (before.count("\n") + self.first_line, offset - (before.rfind("\n") + 1) + 1)
            return self._fault(place, "a control character that YAML does not allow")
        return Fault(f"not readable as YAML: {error}", self.file)


def _skip_to_end(events: Iterator[Any]) -> None:
    """Consume the rest of the list or mapping whose start was just read."""
    depth = 1
    for event in events:
        if isinstance(event, yaml.CollectionStartEvent):
            depth += 1
        elif isinstance(event, yaml.CollectionEndEvent):
            depth -= 1
            if depth == 0:
                return


class _TooDeepError(Exception):
    def __init__(self, position: Position) -> None:
        self.position = position
        super().__init__(position)
