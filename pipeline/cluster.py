"""Tasks carried out by the workers of a Dask cluster (the extra `tangentry[cluster]`), a whole asset each.

The graph's folder must be reachable under the same path from every worker; the store through a shared folder or an
fsspec URL. A worker that dies costs nothing that was kept: its asset is carried out again elsewhere and goes on from
what the store has.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from typing import Any

from tangentry.pipeline.errors import TangentryError
from tangentry.pipeline.executors import Finished, Orders, Task, carry_task
from tangentry.pipeline.work import Event

REACH_SECONDS = 15
AHEAD = 64  # tasks in the scheduler's hands at once


class Cluster:
    """Carries tasks out on the cluster whose scheduler is at an address, `tcp://host:8786`."""

    def __init__(self, address: str, orders: Orders) -> None:
        try:
            import distributed
        except ImportError:
            raise TangentryError("--cluster needs the package distributed: pip install 'tangentry[cluster]'") from None
        client: Any = distributed.Client
        try:
            self._client: Any = client(address, timeout=REACH_SECONDS, set_as_default=False)
        except (OSError, ValueError) as error:
            raise TangentryError(f"--cluster {address}: no scheduler answers there ({error})") from None
        self._orders = orders

    def run(self, tasks: Sequence[Task]) -> Iterator[Event | Finished]:
        """Carry out tasks side by side; an asset's events come together, when it is through."""
        import distributed

        waiting = iter(tasks)
        under_way = {self._submit(task): task for task in itertools.islice(waiting, AHEAD)}
        as_completed: Any = distributed.as_completed
        done = as_completed(list(under_way), loop=self._client.loop)
        for future in done:
            yield from self._events(future, under_way.pop(future))
            for task in itertools.islice(waiting, 1):
                fresh = self._submit(task)
                under_way[fresh] = task
                done.add(fresh)

    def close(self) -> None:
        """Let go of the cluster; its workers stay."""
        self._client.close()

    def _submit(self, task: Task) -> Any:
        return self._client.submit(carry_task, self._orders, task, pure=False)

    def _events(self, future: Any, task: Task) -> list[Event | Finished]:
        """An asset's events; where its task kept killing workers, only that it failed."""
        if future.status == "finished":
            events: list[Event | Finished] = future.result()
            return events
        return [Finished(task.member.name, error=f"the cluster gave it up: {future.exception()}")]
