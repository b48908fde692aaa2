"""The nodes that one graph file declares, as drafts: kinds found, settings filled in and tried, inputs not yet linked.

A graph used as a node is laid open here: its nodes come out with the outer node's name before theirs.
"""

from __future__ import annotations

import dataclasses
import os
import re
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from tangentry.pipeline.errors import GraphError, nearest
from tangentry.pipeline.filling import ASSET_FIELDS, fill, text_of
from tangentry.pipeline.kinds import REQUIRED, Kind, Kinds, show
from tangentry.pipeline.yaml import Mark, Node, read_yaml

FORMAT = 1
KEYS = ("tangentry", "about", "library", "kinds", "options", "inputs", "outputs", "per_asset", "whole_library")
NAME = re.compile(r"[A-Za-z_][\w-]*")
DEEPEST = 16  # graphs within graphs
MOST_NODES = 20_000


@dataclasses.dataclass(frozen=True)
class Reference:
    """A name as it stands in a graph file, and where."""

    target: str | None  # the node, by its full name, with `.output`; None: an input of this graph that nobody fills
    text: str
    mark: Mark


@dataclasses.dataclass(frozen=True)
class Draft:
    """A node before its inputs are linked."""

    name: str
    kind: Kind
    mark: Mark
    inputs: dict[str, Reference]
    settings: dict[str, Any]


@dataclasses.dataclass
class Reading:
    """What one reading gathers, over all the files it opens."""

    kinds: Kinds
    problems: list[str] = dataclasses.field(default_factory=list)
    files: list[Path] = dataclasses.field(default_factory=list)
    renamed: dict[str, Reference] = dataclasses.field(default_factory=dict)  # "finish.verdict" -> "finish/verdict"
    unusable: set[str] = dataclasses.field(default_factory=set)  # nodes that are there, but wrong
    count: int = 0

    def wrong(self, mark: object, what: str) -> None:
        """Note a problem and its place."""
        self.problems.append(f"{mark}: {what}")


@dataclasses.dataclass(frozen=True)
class Scope:
    """What the names in one file mean."""

    folder: Path
    options: dict[str, Any]
    chain: tuple[Path, ...]  # the files that lead here
    prefix: str = ""
    inputs: dict[str, Reference] = dataclasses.field(default_factory=dict)

    def refer(self, text: str, mark: Mark) -> Reference:
        """What a name means here."""
        head, _, output = text.partition(".")
        if head in self.inputs:
            outer = self.inputs[head]
            target = outer.target and (f"{outer.target}.{output}" if output else outer.target)
            return Reference(target, text, mark)
        return Reference(self.prefix + text, text, mark)


def open_graph(path: Path, shown: str) -> Node:
    """The document of a graph file. Raises GraphError where it can't be read or is no mapping."""
    try:
        content = path.read_bytes()
    except OSError as error:
        raise GraphError(f"{shown}: can't be read: {error.strerror or error}") from None
    root = read_yaml(content, shown)
    if not isinstance(root.value, dict):
        raise GraphError(f"{root.mark}: a graph file is a mapping of {', '.join(KEYS)}")
    return root


def check_top(root: Node, reading: Reading, nested: bool) -> None:
    """Note what is wrong with the top-level keys."""
    version = root.value.get("tangentry")
    if version is None:
        reading.wrong(root.mark, f"the version of the format is missing; begin with `tangentry: {FORMAT}`")
    elif version.value is True or version.value != FORMAT:
        reading.wrong(
            version.mark, f"version {show(version.plain())} of the format; this program reads version {FORMAT}"
        )
    for key, mark in root.keys.items():
        if key not in KEYS:
            reading.wrong(mark, f'unknown key "{key}"; a graph file has {", ".join(KEYS)}.{nearest(key, KEYS)}')
        elif key == "whole_library" and nested:
            reading.wrong(mark, "a graph that is used as a node can't have `whole_library`; move it to the outer graph")
        elif key in ("inputs", "outputs") and not nested:
            reading.wrong(
                mark, f"`{key}` belongs to a graph that is used as a node; build the graph that uses this one"
            )


def _mapping(root: Node, key: str, reading: Reading) -> Node | None:
    node: Node | None = root.value.get(key)
    if node is None or node.value is None:
        return None
    if not isinstance(node.value, dict):
        reading.wrong(node.mark, f"`{key}` is a mapping of names; found {show(node.plain())}")
        return None
    return node


def read_options(root: Node, sets: Mapping[str, Any], reading: Reading) -> dict[str, Any]:
    """A graph's options, with those set from outside. Notes options that it does not have."""
    node = _mapping(root, "options", reading)
    options: dict[str, Any] = {}
    for name, value in (node.value if node else {}).items():
        if not re.fullmatch(r"[A-Za-z_]\w*", name) or name in ASSET_FIELDS:
            reading.wrong(node.keys[name], f'an option can\'t be called "{name}"')  # type: ignore[union-attr]
        options[name] = value.plain()
    for name, value in sets.items():
        if name not in options:
            known = ", ".join(options) or "no options"
            reading.problems.append(
                f"--set {name}: {root.mark.file} has no such option; it has {known}.{nearest(name, options)}"
            )
        else:
            text = isinstance(options[name], str) and not isinstance(value, (str, list, dict))
            options[name] = text_of(value) if text else value
    return options


def read_section(root: Node, key: str, scope: Scope, reading: Reading) -> list[Draft]:
    """The nodes of a section, those of graphs used as nodes among them."""
    node = _mapping(root, key, reading)
    drafts: list[Draft] = []
    for name, entry in (node.value if node else {}).items():
        mark = node.keys[name]  # type: ignore[union-attr]
        reading.count += 1
        if reading.count > MOST_NODES:
            raise GraphError(
                *reading.problems, f"{mark}: more than {MOST_NODES} nodes; use a library pattern, or several graphs"
            )
        if not NAME.fullmatch(name):
            reading.wrong(
                mark, f"a node's name is made of letters, digits, - and _, a letter first; found {show(name)}"
            )
        elif not isinstance(entry.value, dict):
            reading.wrong(
                entry.mark, f'node "{name}" is a mapping that begins with `node: KIND`; found {show(entry.plain())}'
            )
        elif "node" not in entry.value:
            reading.wrong(entry.mark, f'node "{name}" does not say its kind: add `node: KIND`')
        else:
            found = _entry(name, entry, mark, scope, reading)
            drafts += found
            if found:
                continue
        reading.unusable.add(scope.prefix + name)
    return drafts


def _entry(name: str, entry: Node, mark: Mark, scope: Scope, reading: Reading) -> list[Draft]:
    named: Node = entry.value["node"]
    if not isinstance(named.value, str):
        reading.wrong(named.mark, f"`node` names a kind or a graph file; found {show(named.plain())}")
        return []
    if named.value.endswith((".yaml", ".yml")):
        return _graph_as_node(name, named, entry, mark, scope, reading)
    try:
        kind = reading.kinds.get(named.value)
    except GraphError as error:
        reading.wrong(named.mark, str(error))
        return []
    inputs, settings = {}, {}
    for key, value in entry.value.items():
        if key == "node":
            continue
        if key in kind.inputs:
            if value.value is not None:
                inputs[key] = _reference(key, value, name, scope, reading)
        elif key in kind.settings:
            fields = (*ASSET_FIELDS,)
            settings[key] = fill(
                value.plain(), scope.options, fields, lambda what, m=value.mark: reading.wrong(m, what)
            )
            _check_setting(kind, key, settings[key], name, value.mark, reading)
        else:
            possible = [*kind.inputs, *kind.settings]
            takes = f"{kind.name} takes {', '.join(possible)}" if possible else f"{kind.name} takes nothing"
            reading.wrong(
                entry.keys[key], f'node "{name}" has no input or setting "{key}"; {takes}.{nearest(key, possible)}'
            )
    for key, setting in kind.settings.items():
        if setting.default is REQUIRED and key not in settings:
            reading.wrong(mark, f'node "{name}" lacks the setting "{key}", which {kind.name} needs')
    return [Draft(scope.prefix + name, kind, mark, {k: v for k, v in inputs.items() if v is not None}, settings)]


def _reference(key: str, value: Node, name: str, scope: Scope, reading: Reading) -> Reference | None:
    if isinstance(value.value, str):
        return scope.refer(value.value, value.mark)
    reading.wrong(value.mark, f'input "{key}" of node "{name}" names another node; found {show(value.plain())}')
    return None


def _check_setting(kind: Kind, key: str, value: Any, name: str, mark: Mark, reading: Reading) -> None:
    """A trial reading, with stand-ins for what only an asset can fill in."""
    trial = fill(value, dict.fromkeys(ASSET_FIELDS, "x"), (), lambda what: None)
    try:
        kind.settings[key].read(trial)
    except ValueError as error:
        reading.wrong(mark, f'setting "{key}" of node "{name}" {error}')


def _graph_as_node(name: str, named: Node, entry: Node, mark: Mark, scope: Scope, reading: Reading) -> list[Draft]:
    path = scope.folder / named.value
    if path.resolve() in scope.chain or len(scope.chain) > DEEPEST:
        reading.wrong(named.mark, f"{named.value} uses itself, through {' -> '.join(p.name for p in scope.chain)}")
        return []
    try:
        root = open_graph(path, os.path.normpath(os.path.join(os.path.dirname(named.mark.file), named.value)))
    except GraphError as error:
        reading.problems += [f"{problem} (used at {named.mark})" for problem in error.problems]
        return []
    before = len(reading.problems)
    reading.files.append(path)
    check_top(root, reading, nested=True)
    options = read_options(root, {}, reading)
    inputs: dict[str, Reference] = {key: Reference(None, key, mark) for key in _declared_inputs(root, reading)}
    for key, value in entry.value.items():
        if key in inputs:
            reference = _reference(key, value, name, scope, reading) if value.value is not None else None
            inputs[key] = reference or inputs[key]
        elif key in options:
            options[key] = fill(
                value.plain(), scope.options, ASSET_FIELDS, lambda what, m=value.mark: reading.wrong(m, what)
            )
        elif key != "node":
            possible = [*inputs, *options]
            reading.wrong(
                entry.keys[key],
                f'node "{name}" has no input or option "{key}"; {root.mark.file} takes {", ".join(possible)}.'
                + nearest(key, possible),
            )
    inner = Scope(path.parent, options, (*scope.chain, path.resolve()), f"{scope.prefix}{name}/", inputs)
    drafts = read_section(root, "per_asset", inner, reading)
    _declare_outputs(root, scope.prefix + name, inner, reading)
    reading.problems[before:] = [
        problem if problem.startswith(f"{named.mark.file}:") else f"{problem} (used at {named.mark})"
        for problem in reading.problems[before:]
    ]
    return drafts


def _declared_inputs(root: Node, reading: Reading) -> list[str]:
    node: Node | None = root.value.get("inputs")
    if node is None or node.value is None:
        return []
    names = (
        list(node.value)
        if isinstance(node.value, dict)
        else [item.value for item in node.value]
        if isinstance(node.value, list)
        else [node.value]
    )
    for one in names:
        if not isinstance(one, str):
            reading.wrong(node.mark, f"`inputs` is a list of names; found {show(node.plain())}")
            return []
    return names


def _declare_outputs(root: Node, full: str, inner: Scope, reading: Reading) -> None:
    """Note what the node's name, and each name.output, stand for."""
    node: Node | None = root.value.get("outputs")
    if node is None or not node.value:
        reading.wrong(root.mark, "a graph that is used as a node says what it gives: add `outputs:`")
        return
    if isinstance(node.value, dict):
        pairs = [(key, value) for key, value in node.value.items()]
    else:
        pairs = [(str(item.value), item) for item in (node.value if isinstance(node.value, list) else [node])]
    for place, (key, value) in enumerate(pairs):
        text = value.value if value.value is not None else key
        if not isinstance(text, str):
            reading.wrong(value.mark, f'output "{key}" names a node of this graph; found {show(value.plain())}')
            continue
        reading.renamed[f"{full}.{key}"] = inner.refer(text, value.mark)
        if place == 0:
            reading.renamed[full] = inner.refer(text, value.mark)
