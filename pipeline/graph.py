"""A graph file as data: read, checked against the kinds it names, every error at once with its place.

    read_graph("quay.yaml") -> Graph
        per_asset      what runs once for each file of the library    framed: frames(asset=cut, method="mikktspace")
        whole_library  what runs once over the values of all assets   tally: tally(findings=verdict of every asset)

A graph used as a node (`node: ./finish.yaml`) is laid open (drafts.py): its nodes become `finish/solved`,
`finish/squared`, so nothing further on knows of nesting. Options are filled in; `{file}`, `{stem}`, `{folder}` and
`{below}` wait for an asset.
"""

from __future__ import annotations

import dataclasses
import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from tangentry.pipeline.drafts import Reading, Scope, check_top, open_graph, read_options, read_section
from tangentry.pipeline.errors import GraphError
from tangentry.pipeline.filling import fill
from tangentry.pipeline.kinds import Kinds, show
from tangentry.pipeline.linking import Entry, link
from tangentry.pipeline.yaml import Mark, Node, read_yaml, scalar


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


def read_graph(path: str | os.PathLike[str], sets: Mapping[str, Any] | None = None) -> Graph:
    """Read and check a graph file, with options set from outside. Raises GraphError with every problem found."""
    path = Path(path)
    root = open_graph(path, str(path))
    kinds = _kinds(root, path)
    reading = Reading(kinds, files=[path])
    check_top(root, reading, nested=False)
    options = read_options(root, sets or {}, reading)
    scope = Scope(path.parent, options, (path.resolve(),))
    drafts = read_section(root, "per_asset", scope, reading)
    finals = read_section(root, "whole_library", scope, reading)
    library = _library(root, options, reading)
    if not drafts and not finals and not reading.problems:
        reading.wrong(root.mark, "the graph has no nodes; declare some under `per_asset:`")
    per_asset = link(drafts, {}, bool(library), options, reading)
    whole = link(finals, per_asset, False, options, reading)
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


def _library(root: Node, options: dict[str, Any], reading: Reading) -> tuple[str, ...]:
    node: Node | None = root.value.get("library")
    if node is None or node.value is None:
        return ()
    value = fill(node.plain(), options, (), lambda what: reading.wrong(node.mark, what))
    patterns = value if isinstance(value, list) else [value]
    if not patterns or not all(isinstance(one, str) and one for one in patterns):
        reading.wrong(node.mark, f"`library` is a pattern or a list of patterns; found {show(value)}")
        return ()
    return tuple(patterns)
