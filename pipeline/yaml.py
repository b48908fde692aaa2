"""YAML as data that knows where it stands: every key and value with its line and column.

Scalars follow the core schema of YAML 1.2.2, chapter 10.3, not YAML 1.1: `1e-8` is a number, `no` is text, `012` is
twelve. Anchors and aliases, tags, several documents and duplicate keys are refused, so a small file can't unfold into
a huge one.
"""

from __future__ import annotations

import dataclasses
import re
from typing import Any

import yaml
from tangentry.pipeline.errors import GraphError

DEEPEST = 40  # levels of nesting
LONGEST = 10_000  # characters of one scalar
LONGEST_KEY = 200
MOST_ENTRIES = 20_000  # of one mapping
LARGEST = 16_000_000  # bytes of a file

INTEGER = re.compile(r"[-+]?[0-9]+")
OTHER_BASE = re.compile(r"0o[0-7]+|0x[0-9a-fA-F]+")
NUMBER = re.compile(r"[-+]?(\.[0-9]+|[0-9]+(\.[0-9]*)?)([eE][-+]?[0-9]+)?")
WORDS: dict[str, Any] = {
    **dict.fromkeys(["", "~", "null", "Null", "NULL"]),
    **dict.fromkeys(["true", "True", "TRUE"], True),
    **dict.fromkeys(["false", "False", "FALSE"], False),
    **dict.fromkeys([".inf", ".Inf", ".INF", "+.inf"], float("inf")),
    "-.inf": float("-inf"),
    **dict.fromkeys([".nan", ".NaN", ".NAN"], float("nan")),
}


@dataclasses.dataclass(frozen=True)
class Mark:
    """A place in a file, counted from 1."""

    file: str
    line: int
    column: int

    def __str__(self) -> str:
        return f"{self.file}:{self.line}:{self.column}"


@dataclasses.dataclass(frozen=True)
class Node:
    """A value and where it stands: a scalar, a list of Nodes, or a dict of key -> Node with the keys' own places."""

    value: Any
    mark: Mark
    keys: dict[str, Mark] = dataclasses.field(default_factory=dict)

    def plain(self) -> Any:
        """The value without places."""
        if isinstance(self.value, dict):
            return {key: node.plain() for key, node in self.value.items()}
        if isinstance(self.value, list):
            return [node.plain() for node in self.value]
        return self.value


def scalar(text: str) -> Any:
    """The value of a plain scalar by the core schema.

    >>> scalar("1e-8"), scalar("no"), scalar("012"), scalar("1:30"), scalar("~")
    (1e-08, 'no', 12, '1:30', None)
    """
    if text in WORDS:
        return WORDS[text]
    if len(text) > 400:
        return text
    if INTEGER.fullmatch(text):
        return int(text)
    if OTHER_BASE.fullmatch(text):
        return int(text, 0)
    return float(text) if NUMBER.fullmatch(text) else text


def read_yaml(text: str | bytes, file: str) -> Node:
    """The one document of a file. Raises GraphError with every problem that can be found in one reading."""
    if len(text) > LARGEST:
        raise GraphError(
            f"{file}: {len(text)} bytes; a graph file may have {LARGEST}; split it with graphs used as nodes"
        )
    loader = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
    problems: list[str] = []
    try:
        events = yaml.parse(text, Loader=loader)
        node = _document(events, file, problems)
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        place = f"{file}:{mark.line + 1}:{mark.column + 1}" if mark else file
        raise GraphError(*problems, f"{place}: not YAML: {error.problem or error.context}") from None
    except (yaml.YAMLError, UnicodeError) as error:
        raise GraphError(*problems, f"{file}: not YAML: {str(error).splitlines()[0]}") from None
    if problems:
        raise GraphError(*problems)
    return node


def _document(events: Any, file: str, problems: list[str]) -> Node:
    root: Node | None = None
    for event in events:
        if isinstance(
            event, (yaml.StreamStartEvent, yaml.StreamEndEvent, yaml.DocumentStartEvent, yaml.DocumentEndEvent)
        ):
            continue
        if root is not None:
            raise GraphError(*problems, f"{_mark(event, file)}: a second document begins here; a graph file holds one")
        root = _node(event, events, file, problems, 0)
    if root is None:
        raise GraphError(f"{file}:1:1: the file is empty; a graph file begins with `tangentry: 1`")
    return root


def _mark(event: Any, file: str) -> Mark:
    return Mark(file, event.start_mark.line + 1, event.start_mark.column + 1)


def _node(event: Any, events: Any, file: str, problems: list[str], depth: int) -> Node:
    mark = _mark(event, file)
    if depth > DEEPEST:
        raise GraphError(*problems, f"{mark}: nested deeper than {DEEPEST} levels")
    if isinstance(event, yaml.AliasEvent):
        raise GraphError(*problems, f'{mark}: an alias ("*{event.anchor}"); write the value out, or use an option')
    if event.anchor is not None:  # no reading on: a file that unfolds has hundreds of them
        raise GraphError(*problems, f'{mark}: an anchor ("&{event.anchor}"); write the value out, or use an option')
    if event.tag not in (None, "!"):
        problems.append(f"{mark}: a tag ({event.tag}); write a plain value")
    if isinstance(event, yaml.ScalarEvent):
        return Node(_scalar(event, mark, problems), mark)
    if isinstance(event, yaml.SequenceStartEvent):
        return Node(_items(events, file, problems, depth), mark)
    return _mapping(mark, events, file, problems, depth)


def _scalar(event: Any, mark: Mark, problems: list[str]) -> Any:
    if len(event.value) > LONGEST:
        problems.append(f"{mark}: {len(event.value)} characters in one value; at most {LONGEST} are read")
        return ""
    return scalar(event.value) if event.implicit[0] else event.value


def _items(events: Any, file: str, problems: list[str], depth: int) -> list[Node]:
    items = []
    for event in events:
        if isinstance(event, yaml.SequenceEndEvent):
            break
        items.append(_node(event, events, file, problems, depth + 1))
    return items


def _mapping(mark: Mark, events: Any, file: str, problems: list[str], depth: int) -> Node:
    entries: dict[str, Node] = {}
    keys: dict[str, Mark] = {}
    for event in events:
        if isinstance(event, yaml.MappingEndEvent):
            break
        key = _node(event, events, file, problems, depth + 1)
        value = _node(next(events), events, file, problems, depth + 1)
        if len(entries) >= MOST_ENTRIES:
            problem = f"more than {MOST_ENTRIES} entries; use a library pattern, or several graphs"
            raise GraphError(*problems, f"{key.mark}: {problem}")
        name = key.value if isinstance(key.value, str) else event.value if isinstance(event, yaml.ScalarEvent) else None
        if name is None:
            problems.append(f"{key.mark}: a key must be plain text")
        elif len(name) > LONGEST_KEY:
            problems.append(f"{key.mark}: {len(name)} characters in one key; at most {LONGEST_KEY} are read")
        elif name in keys:
            problems.append(f'{key.mark}: "{name}" is given twice; first at line {keys[name].line}')
        else:
            entries[name], keys[name] = value, key.mark
    return Node(entries, mark, keys)
