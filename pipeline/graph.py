"""A graph file as data: read, checked against the kinds it names, every error at once with its place.

    read_graph("quay.yaml") -> Graph
        per_asset      what runs once for each file of the library    framed: frames(asset=cut, method="mikktspace")
        whole_library  what runs once over the values of all assets   tally: tally(findings=verdict of every asset)

A graph used as a node (`node: ./finish.yaml`) is laid open here: its nodes become `finish/solved`, `finish/squared`, so
nothing further on knows of nesting. Options are filled in here; `{file}`, `{stem}`, `{folder}` and `{below}` wait for an asset.
"""

from __future__ import annotations

import dataclasses
import os
import re
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

from tangentry.pipeline.errors import GraphError, nearest
from tangentry.pipeline.kinds import REQUIRED, Kind, Kinds, show
from tangentry.pipeline.yaml import Mark, Node, read_yaml, scalar

FORMAT = 1
KEYS = ("tangentry", "about", "library", "kinds", "options", "inputs", "outputs", "per_asset", "whole_library")
ASSET_FIELDS = ("file", "stem", "folder", "below")
PLACEHOLDER = re.compile(r"\{([A-Za-z_]\w*)\}")
NAME = re.compile(r"[A-Za-z_][\w-]*")
DEEPEST = 16  # graphs within graphs
MOST_NODES = 20_000


@dataclasses.dataclass(frozen=True)
class Source:
    """Where an input comes from."""

    node: str
    output: str  # "" where the node has one
    every: bool = False  # of every asset that has one


@dataclasses.dataclass(frozen=True)
class Entry:
    """A node of a graph: its kind, where its inputs come from, its settings with options filled in."""

    name: str
    kind: Kind
    mark: Mark
    inputs: dict[str, Source]
    settings: dict[str, Any]  # as written: may hold {file} and the like


@dataclasses.dataclass(frozen=True)
class Graph:
    """A graph file, checked. The nodes of each section stand in an order in which they can run."""

    path: Path
    about: str
    library: tuple[str, ...]  # patterns; empty: per_asset runs once
    library_mark: Mark | None
    options: dict[str, Any]
    sets: dict[str, Any]  # the options that were set from outside
    per_asset: dict[str, Entry]
    whole_library: dict[str, Entry]
    files: tuple[Path, ...]  # every graph file that was read

    @property
    def folder(self) -> Path:
        """The folder that every path in the graph is relative to."""
        return self.path.parent

    @property
    def opened(self) -> list[str]:
        """Folders outside the graph's own that the command line opened for outputs, by naming them in an option."""
        return [value for value in self.sets.values() if isinstance(value, str)]


@dataclasses.dataclass(frozen=True)
class _Reference:
    target: str | None  # the node, by its full name, with `.output`; None: an input of this graph that nobody fills
    text: str
    mark: Mark


@dataclasses.dataclass(frozen=True)
class _Draft:
    """A node before its inputs are linked."""

    name: str
    kind: Kind
    mark: Mark
    inputs: dict[str, _Reference]
    settings: dict[str, Any]


@dataclasses.dataclass
class _Reading:
    """What one reading gathers, over all the files it opens."""

    kinds: Kinds
    problems: list[str] = dataclasses.field(default_factory=list)
    files: list[Path] = dataclasses.field(default_factory=list)
    renamed: dict[str, _Reference] = dataclasses.field(default_factory=dict)  # "finish.verdict" -> "finish/verdict"
    count: int = 0

    def wrong(self, mark: object, what: str) -> None:
        self.problems.append(f"{mark}: {what}")


def read_graph(path: str | os.PathLike[str], sets: Mapping[str, Any] | None = None) -> Graph:
    """Read and check a graph file, with options set from outside. Raises GraphError with every problem found."""
    path = Path(path)
    root = _open(path, str(path))
    kinds = _kinds(root, path)
    reading = _Reading(kinds, files=[path])
    _check_top(root, reading, nested=False)
    options = _options(root, sets or {}, reading)
    scope = _Scope(path.parent, options, (path.resolve(),))
    drafts = _section(root, "per_asset", scope, reading)
    finals = _section(root, "whole_library", scope, reading)
    library = _library(root, options, reading)
    if not drafts and not finals and not reading.problems:
        reading.wrong(root.mark, "the graph has no nodes; declare some under `per_asset:`")
    per_asset = _link(drafts, {}, bool(library), options, reading)
    whole = _link(finals, per_asset, False, options, reading)
    if reading.problems:
        raise GraphError(*reading.problems)
    about = root.value.get("about")
    mark = root.value["library"].mark if "library" in root.value else None
    return Graph(
        path,
        str(about.value or "") if about else "",
        library,
        mark,
        options,
        dict(sets or {}),
        per_asset,
        whole,
        tuple(reading.files),
    )


def option_from_text(text: str) -> Any:
    """The value of an option given on the command line: a scalar as in YAML, or a list in brackets.

    >>> option_from_text("12.5"), option_from_text("[a.obj, b.obj]"), option_from_text("**/*.obj")
    (12.5, ['a.obj', 'b.obj'], '**/*.obj')
    """
    if text.startswith("[") and text.endswith("]"):
        return read_yaml(text, "--set").plain()
    return scalar(text)


# One file


@dataclasses.dataclass(frozen=True)
class _Scope:
    """What the names in one file mean."""

    folder: Path
    options: dict[str, Any]
    chain: tuple[Path, ...]  # the files that lead here
    prefix: str = ""
    inputs: dict[str, _Reference] = dataclasses.field(default_factory=dict)

    def refer(self, text: str, mark: Mark) -> _Reference:
        head, _, output = text.partition(".")
        if head in self.inputs:
            outer = self.inputs[head]
            target = outer.target and (f"{outer.target}.{output}" if output else outer.target)
            return _Reference(target, text, mark)
        return _Reference(self.prefix + text, text, mark)


def _open(path: Path, shown: str) -> Node:
    try:
        content = path.read_bytes()
    except OSError as error:
        raise GraphError(f"{shown}: can't be read: {error.strerror or error}") from None
    root = read_yaml(content, shown)
    if not isinstance(root.value, dict):
        raise GraphError(f"{root.mark}: a graph file is a mapping of {', '.join(KEYS)}")
    return root


def _kinds(root: Node, path: Path) -> Kinds:
    node = root.value.get("kinds")
    if node is None or node.value is None:
        return Kinds()
    if not isinstance(node.value, str):
        raise GraphError(f"{node.mark}: `kinds` names one folder; found {show(node.plain())}")
    try:
        return Kinds(path.parent / node.value)
    except GraphError as error:
        raise GraphError(f"{node.mark}: {error}") from None


def _check_top(root: Node, reading: _Reading, nested: bool) -> None:
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


def _mapping(root: Node, key: str, reading: _Reading) -> Node | None:
    node: Node | None = root.value.get(key)
    if node is None or node.value is None:
        return None
    if not isinstance(node.value, dict):
        reading.wrong(node.mark, f"`{key}` is a mapping of names; found {show(node.plain())}")
        return None
    return node


def _options(root: Node, sets: Mapping[str, Any], reading: _Reading) -> dict[str, Any]:
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
            options[name] = _text(value) if text else value
    return options


def _library(root: Node, options: dict[str, Any], reading: _Reading) -> tuple[str, ...]:
    node: Node | None = root.value.get("library")
    if node is None or node.value is None:
        return ()
    value = fill(node.plain(), options, (), lambda what: reading.wrong(node.mark, what))
    patterns = value if isinstance(value, list) else [value]
    if not patterns or not all(isinstance(one, str) and one for one in patterns):
        reading.wrong(node.mark, f"`library` is a pattern or a list of patterns; found {show(value)}")
        return ()
    return tuple(patterns)


def _section(root: Node, key: str, scope: _Scope, reading: _Reading) -> list[_Draft]:
    node = _mapping(root, key, reading)
    drafts: list[_Draft] = []
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
            drafts += _entry(name, entry, mark, scope, reading)
    return drafts


def _entry(name: str, entry: Node, mark: Mark, scope: _Scope, reading: _Reading) -> list[_Draft]:
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
    return [_Draft(scope.prefix + name, kind, mark, {k: v for k, v in inputs.items() if v is not None}, settings)]


def _reference(key: str, value: Node, name: str, scope: _Scope, reading: _Reading) -> _Reference | None:
    if isinstance(value.value, str):
        return scope.refer(value.value, value.mark)
    reading.wrong(value.mark, f'input "{key}" of node "{name}" names another node; found {show(value.plain())}')
    return None


def _check_setting(kind: Kind, key: str, value: Any, name: str, mark: Mark, reading: _Reading) -> None:
    """A trial reading, with stand-ins for what only an asset can fill in."""
    trial = fill(value, dict.fromkeys(ASSET_FIELDS, "x"), (), lambda what: None)
    try:
        kind.settings[key].read(trial)
    except ValueError as error:
        reading.wrong(mark, f'setting "{key}" of node "{name}" {error}')


def _graph_as_node(name: str, named: Node, entry: Node, mark: Mark, scope: _Scope, reading: _Reading) -> list[_Draft]:
    path = scope.folder / named.value
    if path.resolve() in scope.chain or len(scope.chain) > DEEPEST:
        reading.wrong(named.mark, f"{named.value} uses itself, through {' -> '.join(p.name for p in scope.chain)}")
        return []
    try:
        root = _open(path, os.path.normpath(os.path.join(os.path.dirname(named.mark.file), named.value)))
    except GraphError as error:
        reading.problems += [f"{problem} (used at {named.mark})" for problem in error.problems]
        return []
    before = len(reading.problems)
    reading.files.append(path)
    _check_top(root, reading, nested=True)
    options = _options(root, {}, reading)
    inputs: dict[str, _Reference] = {key: _Reference(None, key, mark) for key in _declared_inputs(root, reading)}
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
                f'node "{name}" has no input or option "{key}"; {root.mark.file} takes {", ".join(possible)}.{nearest(key, possible)}',
            )
    inner = _Scope(path.parent, options, (*scope.chain, path.resolve()), f"{scope.prefix}{name}/", inputs)
    drafts = _section(root, "per_asset", inner, reading)
    _declare_outputs(root, scope.prefix + name, inner, reading)
    reading.problems[before:] = [
        problem if problem.startswith(f"{named.mark.file}:") else f"{problem} (used at {named.mark})"
        for problem in reading.problems[before:]
    ]
    return drafts


def _declared_inputs(root: Node, reading: _Reading) -> list[str]:
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


def _declare_outputs(root: Node, full: str, inner: _Scope, reading: _Reading) -> None:
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


# Filling in


def fill(value: Any, known: Mapping[str, Any], later: Iterable[str], wrong: Any) -> Any:
    """A value with its placeholders filled from `known`; those in `later` stay. A value that is one placeholder keeps its type.

    >>> fill(["{a}", "x-{a}", "{stem}"], {"a": 1.5}, ["stem"], print)
    [1.5, 'x-1.5', '{stem}']
    """
    if isinstance(value, list):
        return [fill(item, known, later, wrong) for item in value]
    if isinstance(value, dict):
        return {key: fill(item, known, later, wrong) for key, item in value.items()}
    if not isinstance(value, str) or "{" not in value:
        return value
    whole = PLACEHOLDER.fullmatch(value)
    if whole and whole[1] in known:
        return known[whole[1]]

    def one(found: re.Match[str]) -> str:
        name = found[1]
        if name in known:
            return _text(known[name])
        if name not in later:
            possible = [*known, *(field for field in ASSET_FIELDS if field not in known)]
            wrong(f'"{{{name}}}" has nothing to fill it; there are {", ".join(possible)}.{nearest(name, possible)}')
        return found[0]

    return PLACEHOLDER.sub(one, value)


def _text(value: Any) -> str:
    if value is None or isinstance(value, bool):
        return {None: "", True: "true", False: "false"}[value]
    return str(value)


# Linking


def _link(
    drafts: list[_Draft], outer: dict[str, Entry], library: bool, options: dict[str, Any], reading: _Reading
) -> dict[str, Entry]:
    """Drafts as entries, inputs found and types compared, in an order in which they can run."""
    import networkx as nx

    by_name = {draft.name: draft for draft in drafts}
    entries: dict[str, Entry] = {}
    order: nx.DiGraph[str] = nx.DiGraph()
    order.add_nodes_from(by_name)
    for draft in drafts:
        inputs = {}
        for key, reference in draft.inputs.items():
            source = _find(draft, key, reference, by_name, outer, reading)
            if source is not None:
                inputs[key] = source
                if not source.every:
                    order.add_edge(source.node, draft.name)
        missing = [key for key, one in draft.kind.inputs.items() if not one.optional and key not in draft.inputs]
        for key in missing:
            reading.wrong(
                draft.mark, f'node "{draft.name}" lacks the input "{key}", which {draft.kind.name} needs: {key}: NODE'
            )
        if not library:
            _no_asset_fields(draft, reading)
        entries[draft.name] = Entry(draft.name, draft.kind, draft.mark, inputs, draft.settings)
    try:
        return {name: entries[name] for name in nx.topological_sort(order)}
    except nx.NetworkXUnfeasible:
        cycle = [edge[0] for edge in nx.find_cycle(order)]
        reading.wrong(
            by_name[cycle[0]].mark,
            f'node "{cycle[0]}" waits for itself: {" -> ".join([*cycle, cycle[0]])}; remove one of these inputs',
        )
        return entries


def _no_asset_fields(draft: _Draft, reading: _Reading) -> None:
    for key, value in draft.settings.items():
        fill(
            value,
            {},
            (),
            lambda what, k=key: reading.wrong(
                draft.mark, f'setting "{k}" of node "{draft.name}": {what.split(";")[0]}: it runs for no one asset'
            ),
        )


def _find(
    draft: _Draft,
    key: str,
    reference: _Reference,
    by_name: dict[str, _Draft],
    outer: dict[str, Entry],
    reading: _Reading,
) -> Source | None:
    while reference.target in reading.renamed:
        reference = dataclasses.replace(reading.renamed[reference.target], text=reference.text, mark=reference.mark)
    wanted = draft.kind.inputs[key]
    if reference.target is None:
        if not wanted.optional:
            reading.wrong(
                reference.mark,
                f'input "{reference.text}" of this graph is not filled, and node "{draft.name}" needs it',
            )
        return None
    node, _, output = reference.target.partition(".")
    if node in by_name:
        kind, every = by_name[node].kind, False
    elif node in outer:
        kind, every = outer[node].kind, True
    else:
        possible = [*by_name, *outer]
        reading.wrong(
            reference.mark,
            f'there is no node "{reference.text}" for input "{key}" of "{draft.name}".{nearest(reference.text, possible)}',
        )
        return None
    if output not in kind.outputs and not (output == "" and len(kind.outputs) == 1):
        possible = [f"{node}.{name}" for name in kind.outputs if name]
        gives = f"it gives {', '.join(possible)}" if possible else f'it gives one value, named "{node}"'
        reading.wrong(
            reference.mark,
            f'node "{node}" has no output "{output}"; {gives}' if output else f'say which output of "{node}": {gives}',
        )
        return None
    given = kind.outputs.get(output) or next(iter(kind.outputs.values()))
    if not issubclass(given, wanted.flow):
        reading.wrong(
            reference.mark,
            f'input "{key}" of node "{draft.name}" takes {wanted.flow.__name__}; "{reference.text}" gives {given.__name__}',
        )
    elif every != (wanted.many is not None):
        one_many = (
            "takes the values of all assets, so it names a node of `per_asset`" if wanted.many else "takes one value"
        )
        reading.wrong(
            reference.mark,
            f'input "{key}" of node "{draft.name}" {one_many}; "{reference.text}" is {"one per asset" if every else "one value"}',
        )
    return Source(node, output if output in kind.outputs else next(iter(kind.outputs)), every)
