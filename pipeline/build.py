"""Building: a plan carried out, outputs put in place, what happened told to whoever listens.

for event in build(graph): ...        or        record = run_build(graph)
"""

from __future__ import annotations

import dataclasses
import json
import os
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

from tangentry.pipeline.cluster import Cluster
from tangentry.pipeline.errors import NodeError, TangentryError
from tangentry.pipeline.executors import Finished, Here, Orders, Task, Workers
from tangentry.pipeline.flow import Array
from tangentry.pipeline.graph import Graph
from tangentry.pipeline.ledger import Ledger
from tangentry.pipeline.library import Member, find_members, looked_into
from tangentry.pipeline.outputs import OutputError, Outputs
from tangentry.pipeline.plan import (
    WHOLE,
    Parts,
    Planned,
    Step,
    StepId,
    all_steps,
    assets_of,
    lay_out,
    plan,
    relative_digest,
    side_files,
    whole_steps,
)
from tangentry.pipeline.record import AssetRecord, Record
from tangentry.pipeline.remote import open_store
from tangentry.pipeline.seal import store_place
from tangentry.pipeline.store import Damaged, Store
from tangentry.pipeline.values import digest_text
from tangentry.pipeline.work import Bench, Done, Event
from tangentry.pipeline.writing import write_whole

Listener = Callable[[AssetRecord, int], None]  # an asset is through; how many there are


@dataclasses.dataclass(frozen=True)
class Site:
    """A graph with its store and its ledger."""

    graph: Graph
    store: Store
    ledger: Ledger
    url: str = ""  # of a shared store

    @staticmethod
    def open(graph: Graph, store: str | os.PathLike[str] | None = None, read_only: bool = False) -> Site:
        """The graph's own store, `.tangentry` beside the graph file, unless another folder or a URL is named."""
        folder, url = store_place(graph.path, store)
        opened = open_store(folder, url)
        opened.read_only = read_only
        return Site(graph, opened, Ledger(folder.absolute(), read_only), url)

    def close(self) -> None:
        """Write down what was learnt, and let go of both."""
        self.store.close()
        self.ledger.close()

    @property
    def home(self) -> Path:
        """What the ledger's paths are relative to: a project that moves as a whole keeps its memory."""
        return self.store.folder.resolve()

    @property
    def name(self) -> str:
        """The graph's name in the ledger."""
        return os.path.relpath(self.graph.path.resolve(), self.home)

    @property
    def last_record(self) -> Path:
        """Where the record of the last build is kept."""
        return self.store.folder / "records" / f"{digest_text(self.name)[:16]}.json"

    def members(self, only: str | None = None) -> list[Member]:
        """The library's files, less those this graph wrote itself."""
        if not self.graph.library:
            return []
        written = {
            os.path.normpath(self.home / path) for path, one in self.ledger.outputs().items() if one.graph == self.name
        }
        return find_members(self.graph, written, only)


def make_plan(graph: Graph, store: str | os.PathLike[str] | None = None, only: str | None = None) -> list[Planned]:
    """What a build would do now, touching nothing."""
    site = Site.open(graph, store, read_only=True)
    try:
        members = site.members(only)
        lay_out(graph, members)
        digest_of = relative_digest(graph.folder, site.ledger.digest_of)
        return plan(all_steps(graph, members), site.store, digest_of, site.ledger.parts_of(site.name))
    finally:
        site.close()


def read_last_record(graph: Graph, store: str | os.PathLike[str] | None = None) -> dict[str, Any] | None:
    """The record of a graph's last build, in plain data; None where there is none."""
    site = Site.open(graph, store, read_only=True)
    site.close()
    try:
        record: dict[str, Any] = json.loads(site.last_record.read_bytes())
        return record
    except (OSError, ValueError):
        return None


def run_build(
    graph: Graph,
    *,
    store: str | os.PathLike[str] | None = None,
    only: str | None = None,
    workers: int = 1,
    cluster: str = "",
    stop_at_first: bool = False,
    overwrite: bool = False,
    tidy: bool = False,
    listener: Listener = lambda asset, total: None,
) -> Record:
    """Make everything that is out of date; gives what happened.

    store          folder of the store; `.tangentry` beside the graph file by default
    only           pattern of the assets to build
    workers        how many processes
    cluster        address of a Dask scheduler whose workers do it instead
    stop_at_first  end at the first asset that fails
    overwrite      replace files that this graph did not write
    tidy           remove the outputs of assets that are gone
    listener       called as each asset is through

    Raises GraphError where the graph can't be laid out, StoreError where the store can't be written.
    """
    site = Site.open(graph, store)
    try:
        with site.store.running.one_more():
            return _Build(site, only, overwrite).run(workers, cluster, stop_at_first, tidy, listener)
    finally:
        site.close()


class _Build:
    """One build under way."""

    def __init__(self, site: Site, only: str | None, overwrite: bool) -> None:
        self.site, self.graph, self.only = site, site.graph, only
        self.members = site.members(only)
        self.dag = lay_out(self.graph, self.members)
        self.last = site.ledger.parts_of(site.name)
        self.outputs = Outputs(site.name, self.graph.folder, site.home, site.ledger, overwrite)
        self.bench = Bench(
            self.graph.folder, site.store, relative_digest(self.graph.folder, site.ledger.digest_of), self.step_of
        )
        self.record = Record(self.graph.path.as_posix())
        self.assets = {member.name: AssetRecord(member.name) for member in assets_of(self.graph, self.members)}
        self.parts: dict[StepId, Parts] = {}

    def step_of(self, id: StepId) -> Step:
        """A step by its asset and node."""
        step: Step = self.dag.nodes[id]["step"]
        return step

    def run(self, workers: int, cluster: str, stop_at_first: bool, tidy: bool, listener: Listener) -> Record:
        tasks = [Task(member, self._last_of(member.name)) for member in assets_of(self.graph, self.members)]
        executor = self._executor(workers, cluster, len(tasks))
        try:
            for event in executor.run(tasks):
                if isinstance(event, Finished):
                    self._finish(event)
                    listener(self.assets[event.asset], len(tasks))
                    if stop_at_first and self.assets[event.asset].errors:
                        self.record.stopped = f"stopped at the first failure: {event.asset}"
                        break
                elif isinstance(event, Done):
                    self._settle(event)
            else:
                self._whole_library()
        finally:
            executor.close()
            changed = [(*id, parts) for id, parts in self.parts.items() if parts != self.last.get(id)]
            self.site.ledger.note_parts(self.site.name, changed)
        return self._conclude(tidy)

    def _executor(self, workers: int, cluster: str, tasks: int) -> Here | Workers | Cluster:
        orders = Orders(self.graph.path.absolute(), self.graph.sets, self.site.store.folder.absolute(), self.site.url)
        if cluster:
            return Cluster(cluster, orders)
        return Workers(workers, orders) if workers > 1 and tasks > 1 else Here(self._carry_here)

    def _last_of(self, asset: str) -> dict[StepId, Parts]:
        return {(asset, node): self.last[asset, node] for node in self.graph.per_asset if (asset, node) in self.last}

    def _carry_here(self, task: Task) -> Iterator[Event]:
        steps = [self.step_of((task.member.name, node)) for node in self.graph.per_asset]
        yield from self.bench.carry(steps, task.last, task.refuse)
        self.bench.forget()

    def _whole_library(self) -> None:
        for event in self.bench.carry(whole_steps(self.graph, list(self.assets)), self.last):
            if isinstance(event, Done):
                self._settle(event)

    def _finish(self, event: Finished) -> None:
        if event.trouble:
            raise TangentryError(event.trouble)
        if event.error:
            self.assets[event.asset].errors.append(event.error)
            for node in self.graph.per_asset:
                if (event.asset, node) not in self.bench.known:
                    self.outputs.keep_claims(self.step_of((event.asset, node)))
        for name, (stat, noted, digest) in event.files.items():
            self.site.ledger.note_file(name, stat, noted, digest)

    def _settle(self, done: Done) -> None:
        """Note a settled step, and put its files in place."""
        self.bench.known[done.id] = done.outcome
        record = self.record.library if done.id[0] == WHOLE else self.assets[done.id[0]]
        record.add(done)
        if done.parts:
            self.parts[done.id] = done.parts
        step = self.step_of(done.id)
        if done.state in ("failed", "blocked"):
            self.outputs.keep_claims(step)
        elif done.result is not None and step.makes:
            before = len(self.outputs.written)
            try:
                record.outputs += self.outputs.place(step, done.result, lambda digest: self._content(done, digest))
            except (OutputError, NodeError) as error:
                record.errors.append(str(error))
            if done.state == "reused":
                self.record.restored += self.outputs.written[before:]

    def _content(self, done: Done, digest: str) -> Array:
        """The content of a file, made again where the store has lost it."""
        try:
            return self.site.store.fetch_array(digest)
        except Damaged:
            for output in self.step_of(done.id).kind.outputs:
                self.bench.remake(done.id, output)
            return self.site.store.fetch_array(digest)

    def depends_on(self) -> Iterator[Path | str]:
        """Every file and folder that this build depended on or made."""
        yield from self.graph.files
        for entry in [*self.graph.per_asset.values(), *self.graph.whole_library.values()]:
            yield from entry.kind.source.files
        yield from looked_into(self.graph)
        for id, parts in self.parts.items():
            step = self.step_of(id)
            for path in [*step.reads.values(), *side_files(step, parts.get("reads", {}))]:
                yield os.path.join(self.graph.folder, path)
        for name in self.outputs.claimed:
            yield os.path.join(self.site.home, name)

    def _conclude(self, tidy: bool) -> Record:
        reached = [asset for asset in self.assets.values() if asset.steps or asset.errors or not self.record.stopped]
        self.record.assets = reached
        self.record.restored.sort()
        if not self.record.stopped:
            left = self.outputs.left_over(None if self.only is None else self.assets)
            self.record.left_over = [
                Path(os.path.relpath(path, self.graph.folder.resolve())).as_posix() for path in left
            ]
            if tidy:
                self.outputs.remove(left)
                self.record.tidied = True
        self.record.rests_on = list(self.depends_on())
        if self.only is None:
            write_whole(self.site.last_record, lambda file: file.write(self.record.text().encode()))
        return self.record
