"""Carrying out the steps of one asset: each is decided, run if it must, and kept in the store. Decides nothing itself.

Values stay in memory until the asset is done; a value that the store has lost is made again by running its step.
"""

from __future__ import annotations

import dataclasses
import math
import os
import time
import traceback
from collections.abc import Callable, Generator, Iterable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
from tangentry.pipeline.errors import InputError, NodeError, one_line
from tangentry.pipeline.flow import Files, Finding, Findings, InputFile
from tangentry.pipeline.plan import KEY_FORMAT, Decision, Outcome, Parts, Reason, Step, StepId, decide, outcome_of
from tangentry.pipeline.store import Damaged, Result, Store, StoreError
from tangentry.pipeline.values import canonical, digest_text

MOST_LISTED = 100  # elements of a finding that the record names


@dataclasses.dataclass(frozen=True)
class Started:
    """A step begins to run."""

    id: StepId


@dataclasses.dataclass(frozen=True)
class Done:
    """A step is settled."""

    id: StepId
    state: str  # "ran", "reused", "skipped", "blocked", "failed"
    parts: Parts = dataclasses.field(default_factory=dict)  # with "reads"
    result: Result | None = None
    error: str = ""
    detail: str = ""  # the traceback of a node's own fault
    because: str = ""  # of "skipped" and "blocked": the node
    reasons: tuple[Reason, ...] = ()
    seconds: float = 0.0

    @property
    def outcome(self) -> Outcome:
        """Digests of the outputs; None where the step failed or was blocked."""
        return self.result.outputs if self.result is not None and not self.error else None


Event = Started | Done


class Bench:
    """Where steps are carried out: a store, the files of a graph's folder, and the values in hand."""

    def __init__(
        self, folder: Path, store: Store, digest_of: Callable[[str], str | None], step_of: Callable[[StepId], Step]
    ) -> None:
        self.folder, self.store, self.digest_of, self.step_of = folder, store, digest_of, step_of
        self.known: dict[StepId, Outcome] = {}
        self._warm: dict[str | None, Any] = {}

    def carry(
        self, steps: Iterable[Step], last: dict[StepId, Parts], refuse: dict[StepId, str] | None = None
    ) -> Iterator[Event]:
        """Settle steps, given in an order in which they can run. Those in `refuse` fail with the message given."""
        for step in steps:
            if refuse and step.id in refuse:
                done = Done(step.id, "failed", error=refuse[step.id])
            else:
                decision = decide(step, self.known, self.store, self.digest_of, last.get(step.id))
                done = self._settled(step, decision) or (yield from self._in_turn(step, decision, last.get(step.id)))
            self.known[step.id] = done.outcome
            yield done

    def _in_turn(self, step: Step, decision: Decision, last: Parts | None) -> Generator[Event, None, Done]:
        """Run a step, unless another build on this store is just running it: then wait for what that one makes."""
        with self.store.turns.of(decision.key):
            if self.store.results(decision.key):
                done = self._settled(step, decide(step, self.known, self.store, self.digest_of, last))
                if done is not None:
                    return done
            yield Started(step.id)
            return self.run(step, decision)

    def forget(self) -> None:
        """Let go of the values in hand."""
        self._warm.clear()

    def _settled(self, step: Step, decision: Decision) -> Done | None:
        """How a step is settled by a decision alone; None where it must run."""
        if decision.state == "reuse" and decision.result is not None:
            self.store.touch(decision.key)
            parts = {**decision.parts, "reads": decision.result.reads}
            return Done(
                step.id,
                "failed" if decision.result.error else "reused",
                parts,
                decision.result,
                decision.result.error or "",
            )
        if decision.state == "skip":
            return Done(
                step.id, "skipped", result=Result(outcome_of(step, decision) or {}, {}), because=decision.because
            )
        if decision.state == "blocked":
            return Done(step.id, "blocked", because=decision.because)
        return None

    def run(self, step: Step, decision: Decision) -> Done:
        """Run a step's function and keep what it makes."""
        began = time.perf_counter()
        files = {name: InputFile(path, self.folder) for name, path in step.reads.items()}
        error = detail = ""
        values: dict[str, Any] = {}
        result = Result({}, {})
        try:
            inputs = {name: self._input(step, name) for name in step.inputs}
            makes = {name: os.path.basename(path) for name, path in step.makes.items()}
            made = _outputs(step, step.kind.function(**inputs, **step.settings, **files, **makes))
            kept = {name: None if value is None else self.store.keep(value) for name, value in made.items()}
            result, values = Result(kept, {}, None, findings_in(made), self._files_in(made)), made
        except StoreError:
            raise
        except InputError as fault:
            error = str(fault)
        except (Exception, SystemExit) as fault:  # the one place where a node's own fault is caught, whatever it is
            error = f'node "{step.node}" ({step.kind.name}) failed: {one_line(fault)}'
            detail = "".join(traceback.format_exception(fault))
        reads = self._side_reads(step, files)
        result = dataclasses.replace(result, reads=reads, error=error or None)
        parts = {**self._as_read(decision.parts, files), "reads": reads}
        # A fault of the input is as repeatable as a value, a fault of the node may not be; and a key must not vouch for
        # what newer source made.
        if not detail and step.kind.source.is_current:
            self.store.keep_result(_key(parts), result)
        self._warm.update({result.outputs[name]: value for name, value in values.items() if value is not None})
        return Done(
            step.id,
            "failed" if error else "ran",
            parts,
            result,
            error,
            detail,
            "",
            decision.reasons,
            time.perf_counter() - began,
        )

    def _input(self, step: Step, name: str) -> Any:
        source = step.inputs[name]
        if isinstance(source, tuple):
            return self.value(*source)
        kept = {one[0]: self.value(one, output) for one, output in source if (self.known.get(one) or {}).get(output)}
        many = step.kind.inputs[name].many
        return kept if many is dict else many(kept.values())  # type: ignore[misc]

    def value(self, id: StepId, output: str) -> Any:
        """The value of a step's output, None where it was left out; made again where the store has lost it."""
        digest = (self.known[id] or {}).get(output)
        if digest is None or digest in self._warm:
            return None if digest is None else self._warm[digest]
        try:
            value = self.store.fetch(digest, self.step_of(id).kind.outputs[output])
        except Damaged:
            return self.remake(id, output)
        self._warm[digest] = value
        return value

    def remake(self, id: StepId, output: str) -> Any:
        """The value of a step's output, made by running the step again."""
        step = self.step_of(id)
        for source in step.inputs.values():
            for one, _ in source if isinstance(source, list) else [source]:
                if one not in self.known:
                    list(self.carry([self.step_of(one)], {}))
        done = self.run(step, decide(step, self.known, self.store, self.digest_of))
        if done.error:
            raise NodeError(done.error)
        self.known[id] = done.outcome
        return self._warm.get((done.outcome or {}).get(output))

    def _side_reads(self, step: Step, files: dict[str, InputFile]) -> dict[str, str | None]:
        """Digests of the files that were read or looked for beside those given, relative to the first one's folder."""
        given = {os.path.normpath(self.folder / path) for path in step.reads.values()}
        first = os.path.dirname(self.folder / next(iter(step.reads.values()), ""))
        seen: dict[str, str | None] = {}
        for file in files.values():
            for path, content in file.seen():
                if os.path.normpath(path) not in given:
                    seen[Path(os.path.relpath(path, first)).as_posix()] = (
                        None if content is None else self.store.digest(content)
                    )
        return seen

    def _as_read(self, parts: Parts, files: dict[str, InputFile]) -> Parts:
        """The parts with the digests of what was really read: a file may have changed since it was looked at."""
        read: dict[str, list[str | None]] = {}
        for name, (path, digest) in parts["files"].items():
            content = files[name].reads.get(files[name].name)
            read[name] = [path, digest if content is None else self.store.digest(content)]
        return {**parts, "files": read}

    def _files_in(self, values: dict[str, Any]) -> list[tuple[str, str]]:
        """Name and digest of every file to be put in place. Raises NodeError where one is not what it should be."""
        files = [one for value in values.values() if isinstance(value, Files) for one in value.files]
        for one in files:
            if not isinstance(one.name, str) or one.content.dtype != np.uint8:
                raise NodeError(f"returned the file {one.name!r} as {one.content.dtype}; a name and uint8 are wanted")
        return [(one.name, self.store.digest(one.content)) for one in files]


def _key(parts: Parts) -> str:
    return digest_text(
        canonical({"format": KEY_FORMAT, **{name: part for name, part in parts.items() if name != "reads"}})
    )


def _outputs(step: Step, returned: Any) -> dict[str, Any]:
    """What a function returned, by output. Raises NodeError where it is not what the signature promises."""
    kind = step.kind
    values = (
        {"": returned}
        if "" in kind.outputs
        else dict(zip(kind.outputs, returned, strict=True))
        if isinstance(returned, tuple)
        else {}
    )
    if not values:
        raise NodeError(f"returned {type(returned).__name__}; its signature promises {', '.join(kind.outputs)}")
    for name, value in values.items():
        if value is None and name in kind.may_skip:
            continue
        if not isinstance(value, kind.outputs[name]):
            raise NodeError(f"returned {type(value).__name__}; its signature promises {kind.outputs[name].__name__}")
    return values


def findings_in(values: dict[str, Any]) -> list[dict[str, Any]]:
    """The findings among values as plain data, one for each id and severity, with what was found in each part."""
    found: dict[tuple[str, str], dict[str, Any]] = {}
    for value in values.values():
        for item in value.items if isinstance(value, Findings) else ():
            plain = {"id": item.id, "severity": item.standing, "count": 0, "what": item.what, "advice": item.advice}
            one = found.setdefault((item.id, item.standing), plain | {"where": []})
            one["count"] += int(item.count)
            one["where"].append(_where(item))
            if item.accepted:
                one["accepted"] = item.accepted
    return list(found.values())


def _where(item: Finding) -> dict[str, Any]:
    return {
        "part": item.part,
        "material": item.material,
        "what": item.what,
        "count": int(item.count),
        "element": item.element,
        "elements": item.elements[:MOST_LISTED].tolist(),
        "charts": [] if item.charts is None else item.charts[:MOST_LISTED].tolist(),
        "measured": [float(f"{one:.6g}") if math.isfinite(one) else None for one in item.measured[:MOST_LISTED]],
        "limit": item.limit,
    }
