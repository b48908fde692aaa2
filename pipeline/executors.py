"""Where the steps of assets are carried out. Each executor takes tasks and gives events; only digests travel.

Here      in this process, one asset after another
Workers   in processes of their own; a whole asset stays on one of them, so its arrays stay warm
Cluster   on the workers of a Dask cluster (cluster.py)
"""

from __future__ import annotations

import contextlib
import dataclasses
import multiprocessing
import secrets
from collections import deque
from collections.abc import Callable, Iterator, Sequence
from multiprocessing.connection import Connection, wait
from pathlib import Path
from typing import Any

from tangentry.pipeline.errors import TangentryError
from tangentry.pipeline.graph import Graph, read_graph
from tangentry.pipeline.ledger import Ledger, Stat
from tangentry.pipeline.library import Member
from tangentry.pipeline.plan import Parts, StepId, asset_steps, relative_digest
from tangentry.pipeline.remote import open_store
from tangentry.pipeline.store import Store
from tangentry.pipeline.work import Bench, Event, Started


@dataclasses.dataclass(frozen=True)
class Task:
    """One asset to be carried out."""

    member: Member
    last: dict[StepId, Parts]
    refuse: dict[StepId, str] = dataclasses.field(default_factory=dict)  # steps that must not run again, and why


@dataclasses.dataclass(frozen=True)
class Finished:
    """A task is through; what was learnt about files on the way."""

    asset: str
    files: dict[str, tuple[Stat, int, str]] = dataclasses.field(default_factory=dict)
    error: str = ""  # why the asset could not be carried out
    trouble: str = ""  # what keeps the whole build from going on (the store can't be written)


@dataclasses.dataclass(frozen=True)
class Orders:
    """What a process must know to carry out tasks of one build."""

    graph: Path
    sets: dict[str, Any]
    store: Path
    url: str  # of a shared store; "" where there is none
    build: str = dataclasses.field(default_factory=lambda: secrets.token_hex(8))  # each build reads the graph anew


class Here:
    """Carries tasks out in this process, on a bench that its owner shares."""

    def __init__(self, carry: Callable[[Task], Iterator[Event]]) -> None:
        self._carry = carry

    def run(self, tasks: Sequence[Task]) -> Iterator[Event | Finished]:
        """Carry out tasks one after another."""
        for task in tasks:
            yield from self._carry(task)
            yield Finished(task.member.name)

    def close(self) -> None:
        """Nothing to end."""


@dataclasses.dataclass
class _Worker:
    process: Any
    pipe: Connection
    task: Task | None = None
    running: StepId | None = None


class Workers:
    """Carries tasks out in `count` processes, started afresh (spawn). One that dies costs the step it was running, no more."""

    def __init__(self, count: int, orders: Orders) -> None:
        self._count, self._orders = count, orders
        self._context = multiprocessing.get_context("spawn")
        self._workers: list[_Worker] = []

    def run(self, tasks: Sequence[Task]) -> Iterator[Event | Finished]:
        """Carry out tasks side by side; the events of one asset come in order."""
        waiting = deque(tasks)
        self._workers = [self._start() for _ in range(min(self._count, len(tasks)))]
        for worker in self._workers:
            self._give(worker, waiting)
        while any(worker.task for worker in self._workers):
            for pipe in wait([worker.pipe for worker in self._workers if worker.task]):
                worker = next(one for one in self._workers if one.pipe is pipe)
                yield from self._hear(worker, waiting)

    def close(self) -> None:
        """End the processes."""
        for worker in self._workers:
            worker.pipe.close()
            worker.process.terminate()
        for worker in self._workers:
            worker.process.join(1)
            if worker.process.is_alive():
                worker.process.kill()

    def _start(self) -> _Worker:
        ours, theirs = self._context.Pipe()
        process = self._context.Process(target=work, args=(theirs, self._orders), daemon=True)
        process.start()
        theirs.close()
        return _Worker(process, ours)

    def _give(self, worker: _Worker, waiting: deque[Task]) -> None:
        worker.task, worker.running = (waiting.popleft() if waiting else None), None
        if worker.task is not None:
            with contextlib.suppress(BrokenPipeError):  # it died idle; hearing from it will show that
                worker.pipe.send(worker.task)

    def _hear(self, worker: _Worker, waiting: deque[Task]) -> Iterator[Event | Finished]:
        try:
            message = worker.pipe.recv()
        except (EOFError, ConnectionError):
            self._replace(worker)
            return
        if isinstance(message, Started):
            worker.running = message.id
        elif isinstance(message, Finished):
            self._give(worker, waiting)
        else:
            worker.running = None
        yield message

    def _replace(self, worker: _Worker) -> None:
        """A worker died: its task goes to a new one, which leaves out the step that was running."""
        worker.process.join(1)
        code = worker.process.exitcode
        how = f"by signal {-code}" if code is not None and code < 0 else f"with exit code {code}"
        assert worker.task is not None
        fresh = self._start()
        worker.process, worker.pipe = fresh.process, fresh.pipe
        if worker.running is None:
            raise TangentryError(
                f"a worker process ended {how} before it began {worker.task.member.name}; build again, with fewer workers if memory is short"
            )
        refuse = {
            worker.running: f'node "{worker.running[1]}": its worker process ended {how} while it ran (killed, or out of memory)'
        }
        worker.task = dataclasses.replace(worker.task, refuse={**worker.task.refuse, **refuse})
        worker.running = None
        worker.pipe.send(worker.task)


def work(pipe: Connection, orders: Orders) -> None:
    """The life of a worker process: tasks in, events out, until the pipe closes."""
    import signal

    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the main process ends its workers
    tools = _Tools.of(orders)
    while True:
        try:
            task: Task = pipe.recv()
        except EOFError:
            return
        try:
            for event in tools.carry(task):
                pipe.send(event)
        except BrokenPipeError:
            return


def carry_task(orders: Orders, task: Task) -> list[Event | Finished]:
    """Carry out one task wherever this runs; gives its events."""
    return list(_Tools.of(orders).carry(task))


@dataclasses.dataclass(frozen=True)
class _Tools:
    """What a process needs for the tasks of one build, made once."""

    graph: Graph
    store: Store
    ledger: Ledger

    @staticmethod
    def of(orders: Orders) -> _Tools:
        """The tools for these orders, kept for the next task."""
        if _LAST and _LAST[0][0] == orders:
            return _LAST[0][1]
        tools = _Tools(
            read_graph(orders.graph, orders.sets),
            open_store(orders.store, orders.url),
            Ledger(orders.store, read_only=True),
        )
        _LAST[:] = [(orders, tools)]
        return tools

    def carry(self, task: Task) -> Iterator[Event | Finished]:
        """Carry out one task on a fresh bench, so that files are looked at anew."""
        steps = asset_steps(self.graph, task.member)
        by_id = {step.id: step for step in steps}
        bench = Bench(
            self.graph.folder, self.store, relative_digest(self.graph.folder, self.ledger.digest_of), by_id.__getitem__
        )
        try:
            yield from bench.carry(steps, task.last, task.refuse)
            yield Finished(task.member.name, self.ledger.learnt())
        except TangentryError as error:
            yield Finished(task.member.name, trouble=str(error))


_LAST: list[tuple[Orders, _Tools]] = []
