"""Drafts linked into entries: each input's source found and its type compared, in an order in which they can run."""

from __future__ import annotations

import dataclasses
from typing import Any

from tangentry.pipeline.drafts import Draft, Reading, Reference
from tangentry.pipeline.errors import nearest
from tangentry.pipeline.filling import fill
from tangentry.pipeline.kinds import Kind
from tangentry.pipeline.yaml import Mark


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


def link(
    drafts: list[Draft], outer: dict[str, Entry], library: bool, options: dict[str, Any], reading: Reading
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


def _no_asset_fields(draft: Draft, reading: Reading) -> None:
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
    draft: Draft,
    key: str,
    reference: Reference,
    by_name: dict[str, Draft],
    outer: dict[str, Entry],
    reading: Reading,
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
    elif node in reading.unusable:
        return None
    else:
        possible = [*by_name, *outer]
        reading.wrong(
            reference.mark,
            f'there is no node "{reference.text}" for input "{key}" of "{draft.name}".'
            + nearest(reference.text, possible),
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
            f'input "{key}" of node "{draft.name}" takes {wanted.flow.__name__}; '
            f'"{reference.text}" gives {given.__name__}',
        )
    elif every != (wanted.many is not None):
        one_many = (
            "takes the values of all assets, so it names a node of `per_asset`" if wanted.many else "takes one value"
        )
        reading.wrong(
            reference.mark,
            f'input "{key}" of node "{draft.name}" {one_many}; '
            f'"{reference.text}" is {"one per asset" if every else "one value"}',
        )
    return Source(node, output if output in kind.outputs else next(iter(kind.outputs)), every)
