"""What must run, and why: as data, before anything runs.

A graph is laid out over its library as a networkx DAG of steps, one per asset and node. A step's key is the digest of
its parts: kind, source, settings, the digests of its input values and of the files it is given.

    parts  {kind: weld, source: 71b0..., settings: {within: 0.0}, inputs: {asset: 5f1c...}, files: {}}  ->  key

Where the store has a result for the key, and the side files it read are as they were, the step is reused. Parts are
compared with those of the last build, so the reason for running is a value: `setting within changed 0.0 -> 1e-06`.
"""

from __future__ import annotations

import dataclasses
import os
from collections.abc import Callable, Iterable, Iterator, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from tangentry.pipeline.errors import GraphError
from tangentry.pipeline.filling import fill
from tangentry.pipeline.graph import Graph
from tangentry.pipeline.kinds import REQUIRED, Kind, show
from tangentry.pipeline.library import Member
from tangentry.pipeline.linking import Entry, Source
from tangentry.pipeline.store import Result, Store
from tangentry.pipeline.values import canonical, digest_text

if TYPE_CHECKING:
    import networkx as nx

KEY_FORMAT = 1  # of what a key is made from
WHOLE = ""  # the asset that whole_library steps count as

StepId = tuple[str, str]  # asset, node
Parts = dict[str, Any]


@dataclasses.dataclass(frozen=True)
class Step:
    """One node for one asset."""

    asset: str
    node: str
    kind: Kind
    inputs: dict[
        str, tuple[StepId, str] | list[tuple[StepId, str]]
    ]  # step and output; a list where it takes all assets'
    settings: dict[str, Any]  # as the function takes them, files apart
    reads: dict[str, str]  # setting -> input file, relative to the graph's folder
    makes: dict[str, str]  # setting -> file to be made, relative to the graph's folder

    @property
    def id(self) -> StepId:
        """The asset and the node."""
        return self.asset, self.node


@dataclasses.dataclass(frozen=True)
class Reason:
    """Why a step runs: a part that changed, before and after."""

    what: str  # "first", "setting", "file", "input", "source", "kind", "lost"
    name: str = ""
    before: Any = None
    after: Any = None

    def __str__(self) -> str:
        if self.what == "setting":
            return f"setting {self.name} changed {show(self.before)} -> {show(self.after)}"
        if self.what == "file":
            if self.before is None or self.after is None:
                return f"file {self.name} {'appeared' if self.before is None else 'is gone'}"
            return f"file {self.name} changed"
        words = {
            "first": "never made before",
            "input": f"input {self.name} changed",
            "source": f"source of {self.name} changed",
            "kind": f"kind changed {self.before} -> {self.after}",
            "lost": "its result is no longer in the store",
            "upstream": f"{self.name} runs first",
        }
        return words[self.what]


@dataclasses.dataclass(frozen=True)
class Decision:
    """What becomes of a step: "reuse", "run", "wait", "skip" (an input is left out), "blocked" (one failed)."""

    state: str
    key: str = ""
    parts: Parts = dataclasses.field(default_factory=dict)
    result: Result | None = None
    reasons: tuple[Reason, ...] = ()
    because: str = ""  # of "skip" and "blocked": the node


Outcome = dict[str, str | None] | None  # digests by output (None: left out); None: the step failed


def lay_out(graph: Graph, members: Sequence[Member]) -> nx.DiGraph[StepId]:
    """The DAG of all steps; the attribute "step" of each holds it.

    Raises GraphError where two steps would make one file, or where one would be made over a file that is read.
    """
    import networkx as nx

    dag: nx.DiGraph[StepId] = nx.DiGraph()
    read = {os.path.normpath(member.name): f"{member.name}, an asset of the library" for member in members}
    made: dict[str, str] = {}
    problems: list[str] = []
    for step in all_steps(graph, members):
        dag.add_node(step.id, step=step)
        for source in sources(step):
            dag.add_edge(source, step.id)
        where = f"{step.asset or graph.path.name}, node {step.node}"
        read.update((os.path.normpath(path), where) for path in step.reads.values())
        for path in step.makes.values():
            one = os.path.normpath(path)
            if one in made:
                problems.append(
                    f"{path} would be made twice: by {made[one]} and by {where}; "
                    "put {stem} or {below} into its name"
                )
            made[one] = where
    problems += [
        f"{path} would be made by {made[path]}, over what is read by {read[path]}; name another file"
        for path in made
        if path in read
    ]
    if problems:
        raise GraphError(*(f"{graph.path}: {problem}" for problem in problems))
    return dag


def all_steps(graph: Graph, members: Sequence[Member]) -> Iterator[Step]:
    """Every step: asset after asset, then those of the whole library, each in an order in which they can run."""
    assets = assets_of(graph, members)
    for asset in assets:
        yield from asset_steps(graph, asset)
    yield from whole_steps(graph, [asset.name for asset in assets])


def assets_of(graph: Graph, members: Sequence[Member]) -> list[Member]:
    """The library's members; for a graph without a library, one that stands for the graph itself."""
    return list(members) if graph.library else [Member(graph.path.name, "")]


def asset_steps(graph: Graph, asset: Member) -> list[Step]:
    """The steps of one asset."""
    fields = asset.fields if graph.library else {}
    return [_step(graph, entry, asset.name, fields, []) for entry in graph.per_asset.values()]


def whole_steps(graph: Graph, assets: Sequence[str]) -> list[Step]:
    """The steps over the values of all assets."""
    return [_step(graph, entry, WHOLE, {}, assets) for entry in graph.whole_library.values()]


def _step(graph: Graph, entry: Entry, asset: str, fields: dict[str, str], assets: Sequence[str]) -> Step:
    settings: dict[str, Any] = {}
    reads: dict[str, str] = {}
    makes: dict[str, str] = {}
    for name, setting in entry.kind.settings.items():
        if name not in entry.settings:
            if setting.default is not REQUIRED:
                settings[name] = setting.default
            continue
        try:
            value = setting.read(fill(entry.settings[name], fields, (), lambda what: None))
        except ValueError as error:
            raise GraphError(f'{entry.mark}: setting "{name}" of node "{entry.name}" for {asset} {error}') from None
        if setting.file == "read" and value is not None:
            reads[name] = value
        elif setting.file == "made" and value is not None:
            makes[name] = _inside(graph, value, entry)
        else:
            settings[name] = value
    inputs = {name: _sources(source, asset, assets) for name, source in entry.inputs.items()}
    return Step(asset, entry.name, entry.kind, inputs, settings, reads, makes)


def _sources(source: Source, asset: str, assets: Sequence[str]) -> tuple[StepId, str] | list[tuple[StepId, str]]:
    if source.every:
        return [((one, source.node), source.output) for one in assets]
    return (asset, source.node), source.output


def _inside(graph: Graph, path: str, entry: Entry) -> str:
    """An output's path, which stays under the graph's folder or under a folder that the command line opened."""
    home = os.path.realpath(graph.folder)
    real = os.path.realpath(os.path.join(home, path))
    for root in (home, *(os.path.realpath(os.path.join(home, one)) for one in graph.opened)):
        if real == root or not real.startswith(root.rstrip(os.sep) + os.sep):
            continue
        return path
    raise GraphError(
        f'{entry.mark}: node "{entry.name}" would write {path}, outside the folder of the graph file; write below it, '
        "or open the place from the command line: --set OPTION=FOLDER"
    )


def sources(step: Step) -> Iterator[StepId]:
    """The steps that a step takes values from."""
    for source in step.inputs.values():
        if isinstance(source, list):
            yield from (one for one, _ in source)
        else:
            yield source[0]


def decide(
    step: Step,
    known: dict[StepId, Outcome],
    store: Store,
    digest_of: Callable[[str], str | None],
    last: Parts | None = None,
) -> Decision:
    """What becomes of a step whose inputs are `known`; `digest_of` gives the digest of a file of the graph's folder."""
    inputs: dict[str, Any] = {}
    for name, source in step.inputs.items():
        if isinstance(source, list):
            given = [(one[0], (known.get(one) or {}).get(output)) for one, output in source]
            inputs[name] = [[asset, digest] for asset, digest in given if digest is not None]
            continue
        outcome = known[source[0]]
        if outcome is None:
            return Decision("blocked", because=source[0][1])
        if outcome[source[1]] is None and not step.kind.inputs[name].optional:
            return Decision("skip", because=source[0][1])
        inputs[name] = outcome[source[1]]
    parts: Parts = {
        "kind": step.kind.name,
        "source": step.kind.source.digest,
        "settings": {
            name: step.kind.settings[name].plain(value)
            for name, value in step.settings.items()
            if not step.kind.settings[name].file
        },
        "inputs": {name: value for name, value in inputs.items() if value is not None},
        "files": {name: [path, digest_of(path)] for name, path in step.reads.items()},
        "makes": {name: os.path.basename(path) for name, path in step.makes.items()},
    }
    key = digest_text(canonical({"format": KEY_FORMAT, **parts}))
    for result in store.results(key):
        if all(digest_of(side) == digest for side, digest in side_files(step, result.reads).items()):
            return Decision("reuse", key, parts, result)
    return Decision("run", key, parts, None, tuple(_reasons(step, parts, last, digest_of)))


def side_files(step: Step, reads: dict[str, str | None]) -> dict[str, str | None]:
    """The side files of a result, relative to the graph's folder rather than to the first file's."""
    folder = os.path.dirname(next(iter(step.reads.values()), ""))
    return {os.path.normpath(os.path.join(folder, name)): digest for name, digest in reads.items()}


def _reasons(step: Step, parts: Parts, last: Parts | None, digest_of: Callable[[str], str | None]) -> Iterator[Reason]:
    """How the parts differ from the last build's."""
    if last is None:
        yield Reason("first")
        return
    count = 0
    for reason in _differences(step, parts, last, digest_of):
        count += 1
        yield reason
    if not count:
        yield Reason("lost")


def _differences(step: Step, parts: Parts, last: Parts, digest_of: Callable[[str], str | None]) -> Iterator[Reason]:
    if parts["kind"] != last["kind"]:
        yield Reason("kind", before=last["kind"], after=parts["kind"])
    elif parts["source"] != last["source"]:
        yield Reason("source", parts["kind"])
    for what in ("settings", "makes"):
        for name in {**last[what], **parts[what]}:
            if last[what].get(name) != parts[what].get(name):
                yield Reason("setting", name, last[what].get(name), parts[what].get(name))
    for name in {**last["files"], **parts["files"]}:
        before, after = last["files"].get(name, [None, None]), parts["files"].get(name, [None, None])
        if before[0] != after[0]:
            yield Reason("setting", name, before[0], after[0])
        elif before[1] != after[1]:
            yield Reason("file", after[0], before[1], after[1])
    for side, before in side_files(step, last.get("reads", {})).items():
        if digest_of(side) != before:
            yield Reason("file", side, before, digest_of(side))
    for name in {**last["inputs"], **parts["inputs"]}:
        if last["inputs"].get(name) != parts["inputs"].get(name):
            yield Reason("input", name)


@dataclasses.dataclass(frozen=True)
class Planned:
    """A step and what a build would do with it now."""

    step: Step
    decision: Decision


def plan(
    steps: Iterable[Step],
    store: Store,
    digest_of: Callable[[str], str | None],
    last: dict[StepId, Parts],
) -> list[Planned]:
    """What a build would do with every step. Those behind one that runs wait: it may give the same value."""
    known: dict[StepId, Outcome] = {}
    waiting: set[StepId] = set()
    planned = []
    for step in steps:
        behind = next((source for source in sources(step) if source in waiting), None)
        if behind is not None:
            decision = Decision("wait", reasons=(Reason("upstream", behind[1]),))
        else:
            decision = decide(step, known, store, digest_of, last.get(step.id))
        if decision.state in ("wait", "run"):
            waiting.add(step.id)
        known[step.id] = outcome_of(step, decision)
        planned.append(Planned(step, decision))
    return planned


def outcome_of(step: Step, decision: Decision) -> Outcome:
    """What a decision alone tells of a step's outputs."""
    if decision.state == "reuse" and decision.result is not None:
        return None if decision.result.error is not None else decision.result.outputs
    return None if decision.state == "blocked" else dict.fromkeys(step.kind.outputs)


def relative_digest(folder: Path, digest_of: Callable[[str], str | None]) -> Callable[[str], str | None]:
    """`digest_of` for paths relative to a graph's folder, each asked once."""
    seen: dict[str, str | None] = {}
    home = os.path.abspath(folder)

    def ask(path: str) -> str | None:
        if path not in seen:
            seen[path] = digest_of(os.path.join(home, path))
        return seen[path]

    return ask
