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
import threading
import time
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
from tangentry.pipeline.work import Bench, Done, Event, Started
from tangentry.pipeline.writing import end_at_once

GRACE = 0.5  # seconds for a worker to tidy up
DEATHS_IN_A_ROW = 3  # of workers that had not begun a step: then something is wrong with all of them


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
    settled: set[StepId] = dataclasses.field(default_factory=set)  # of the task; a successor settles them again


class Workers:
    """Carries tasks out in `count` processes, started afresh (spawn). One that dies costs the step it was running."""

    def __init__(self, count: int, orders: Orders) -> None:
        self._count, self._orders = count, orders
        self._context = multiprocessing.get_context("spawn")
        self._workers: list[_Worker] = []
        self._died = 0  # in a row, without a sign of life

    def run(self, tasks: Sequence[Task]) -> Iterator[Event | Finished]:
        """Carry out tasks side by side; the events of one asset come in order."""
        waiting = deque(tasks)
        for _ in range(min(self._count, len(tasks))):
            self._workers.append(self._start())
            self._give(self._workers[-1], waiting.popleft())
        while busy := {worker.pipe: worker for worker in self._workers if worker.task}:
            for pipe in wait(list(busy)):
                yield from self._hear(busy[pipe], waiting)  # type: ignore[index]

    def close(self) -> None:
        """End the processes."""
        for worker in self._workers:
            worker.pipe.close()
            worker.process.terminate()
        until = time.monotonic() + GRACE
        for worker in self._workers:
            worker.process.join(max(0.0, until - time.monotonic()))
            worker.process.kill()  # if it is alive yet it is deep in a computation, so not half through writing a file
            worker.process.join()

    def _start(self) -> _Worker:
        ours, theirs = self._context.Pipe()
        process = self._context.Process(target=work, args=(theirs, self._orders), daemon=True)
        process.start()
        theirs.close()
        return _Worker(process, ours)

    def _give(self, worker: _Worker, task: Task | None) -> None:
        worker.task, worker.running = task, None
        if task is not None:
            with contextlib.suppress(OSError):  # it died idle; hearing from it will show that
                worker.pipe.send(task)

    def _hear(self, worker: _Worker, waiting: deque[Task]) -> Iterator[Event | Finished]:
        try:
            events: list[Event | Finished] = worker.pipe.recv()
        except (EOFError, OSError):  # half a message is an OSError
            self._replace(worker)
            return
        self._died = 0
        for event in events:
            if isinstance(event, Finished):
                worker.settled = set()
                self._give(worker, waiting.popleft() if waiting else None)
            else:
                worker.running = event.id if isinstance(event, Started) else None
            if isinstance(event, Done):
                if event.id in worker.settled:
                    continue
                worker.settled.add(event.id)
            yield event

    def _replace(self, worker: _Worker) -> None:
        """A worker died: its task goes to a new one, which leaves out the step that was running, if one was."""
        assert worker.task is not None
        worker.process.join(1)
        code = worker.process.exitcode
        how = f"by signal {-code}" if code is not None and code < 0 else f"with exit code {code}"
        self._died += 1
        if worker.running is None and self._died >= DEATHS_IN_A_ROW:
            raise TangentryError(
                f"worker processes end {how} before they begin {worker.task.member.name}; build again, with fewer "
                "workers if memory is short"
            )
        task = worker.task
        if worker.running is not None:
            why = f'node "{worker.running[1]}": its worker process ended {how} while it ran (killed, or out of memory)'
            task = dataclasses.replace(task, refuse={**task.refuse, worker.running: why})
        fresh = self._start()
        worker.pipe.close()
        worker.process, worker.pipe = fresh.process, fresh.pipe
        self._give(worker, task)


def work(pipe: Connection, orders: Orders) -> None:
    """The life of a worker process: tasks in, events out, until the pipe closes."""
    import signal

    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the main process ends its workers
    signal.signal(signal.SIGTERM, lambda *_: end_at_once(128 + signal.SIGTERM))
    with contextlib.suppress(EOFError, ConnectionError):
        while True:
            unsent: list[Event | Finished] = []
            for event in _carry(orders, pipe.recv()):
                unsent.append(event)
                if isinstance(event, (Started, Finished)):  # what else there is to say can wait for one of these
                    pipe.send(unsent)
                    unsent = []


def carry_task(orders: Orders, task: Task) -> list[Event | Finished]:
    """Carry out one task wherever this runs; gives its events."""
    return list(_carry(orders, task))


def _carry(orders: Orders, task: Task) -> Iterator[Event | Finished]:
    try:
        yield from _Tools.of(orders).carry(task)
    except TangentryError as error:
        yield Finished(task.member.name, trouble=str(error))


@dataclasses.dataclass(frozen=True)
class _Tools:
    """What a process needs for the tasks of one build, made once."""

    graph: Graph
    store: Store
    ledger: Ledger

    @staticmethod
    def of(orders: Orders) -> _Tools:
        """The tools for these orders, kept for the next task."""
        with _ONE_AT_A_TIME:
            if not _LAST or _LAST[0][0] != orders:
                store = open_store(orders.store, orders.url)
                ledger = Ledger(orders.store, read_only=True)
                _LAST[:] = [(orders, _Tools(read_graph(orders.graph, orders.sets), store, ledger))]
            return _LAST[0][1]

    def carry(self, task: Task) -> Iterator[Event | Finished]:
        """Carry out one task on a fresh bench, so that files are looked at anew."""
        steps = asset_steps(self.graph, task.member)
        by_id = {step.id: step for step in steps}
        bench = Bench(
            self.graph.folder, self.store, relative_digest(self.graph.folder, self.ledger.digest_of), by_id.__getitem__
        )
        yield from bench.carry(steps, task.last, task.refuse)
        yield Finished(task.member.name, self.ledger.learnt())


_LAST: list[tuple[Orders, _Tools]] = []
_ONE_AT_A_TIME = threading.Lock()  # a cluster's worker may carry tasks out in threads
