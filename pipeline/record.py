"""What happened in a build, as data: one JSON object, version 1. Within a version, keys are only added.

tangentry_record   1
graph              the graph file, as it was named
ran, reused, skipped, blocked, failed
                   how many steps ended so: its function ran; what it made before was taken; an input that it
                   needs was left out; one that it needs failed; it failed itself
states             how many assets ended in each state
assets             what happened to each asset, in name order
    name           its file, relative to the graph file
    state          "failed" where a step failed or a file could not be put in its place, else "faulty" where a finding
                   is a fault, else "made" where a step ran, else "unchanged"
    error          what failed, in words; null where nothing did
    findings       of all its steps; see `work.findings_in`
    outputs        its files, relative to the graph file
    steps          in the order in which they ran
        node       its name in the graph
        state      "ran", "reused", "skipped", "blocked" or "failed"
        reasons    why it ran: what ("first", "setting", "file", "input", "source", "kind", "lost"), name, before,
                   after, and the same as text; not there where it did not run
        because    the node on whose account it was skipped or blocked; only there
        seconds    how long it ran; only where it did
        faulty     true; only where its findings hold a fault
        error      what failed, in words; only where it failed
        detail     the traceback; only where the node itself is at fault
library            what happened to the steps of `whole_library`, alike; its name is ""
restored           files put back: those that were gone or altered while nothing that makes them ran
left_over          files that the graph made once and makes no longer; removed with --tidy
stopped            why the build ended before all was done; null where it did not
"""

from __future__ import annotations

import dataclasses
import json
from pathlib import Path
from typing import Any

from tangentry.pipeline.plan import WHOLE
from tangentry.pipeline.work import Done

VERSION = 1
STATES = ("made", "unchanged", "faulty", "failed")


@dataclasses.dataclass
class AssetRecord:
    """What happened to one asset, or to the whole library's own steps."""

    name: str
    steps: list[dict[str, Any]] = dataclasses.field(default_factory=list)
    errors: list[str] = dataclasses.field(default_factory=list)
    findings: list[dict[str, Any]] = dataclasses.field(default_factory=list)
    outputs: list[str] = dataclasses.field(default_factory=list)
    seconds: float = 0.0

    def add(self, done: Done) -> None:
        """Note a settled step."""
        step: dict[str, Any] = {"node": done.id[1], "state": done.state}
        if done.reasons:
            step["reasons"] = [{**dataclasses.asdict(reason), "text": str(reason)} for reason in done.reasons]
        if done.because:
            step["because"] = done.because
        if done.state == "failed":
            step["error"] = done.error
            self.errors.append(done.error)
        if done.detail:
            step["detail"] = done.detail
        if done.state == "ran":
            step["seconds"] = round(done.seconds, 6)
        self.seconds += done.seconds
        self.steps.append(step)
        if done.result is not None:
            self.findings += done.result.findings
            if any(one["severity"] == "fault" for one in done.result.findings):
                step["faulty"] = True

    @property
    def state(self) -> str:
        """One of STATES."""
        if self.errors:
            return "failed"
        if any(one["severity"] == "fault" for one in self.findings):
            return "faulty"
        return "made" if any(step["state"] == "ran" for step in self.steps) else "unchanged"

    @property
    def lasting(self) -> bool:
        """Would building again, with nothing changed, end alike? A node's own fault and a refused file may not last."""
        failed = [step for step in self.steps if step["state"] == "failed"]
        return len(failed) == len(self.errors) and not any("detail" in step for step in failed)

    def unchanged(self) -> AssetRecord:
        """The record of building again with nothing changed."""
        steps = [{**step, "state": "reused"} if step["state"] == "ran" else step for step in self.steps]
        return dataclasses.replace(self, steps=steps)

    def plain(self) -> dict[str, Any]:
        """The record in JSON's types."""
        return {
            "name": self.name,
            "state": self.state,
            "error": "; ".join(self.errors) or None,
            "findings": self.findings,
            "outputs": self.outputs,
            "steps": self.steps,
        }


@dataclasses.dataclass
class Record:
    """What happened in one build."""

    graph: str
    assets: list[AssetRecord] = dataclasses.field(default_factory=list)
    library: AssetRecord = dataclasses.field(default_factory=lambda: AssetRecord(WHOLE))
    restored: list[str] = dataclasses.field(default_factory=list)  # output files put back or written anew
    left_over: list[str] = dataclasses.field(default_factory=list)
    tidied: bool = False
    stopped: str = ""  # why the build ended early
    rests_on: list[Path | str] = dataclasses.field(default_factory=list)  # every file it depended on or made

    def count(self, state: str) -> int:
        """How many steps ended in that state."""
        return sum(step["state"] == state for one in [*self.assets, self.library] for step in one.steps)

    @property
    def states(self) -> dict[str, int]:
        """How many assets ended in each state."""
        found = [asset.state for asset in self.assets]
        return {state: found.count(state) for state in STATES}

    @property
    def sound(self) -> bool:
        """Did everything work, with nothing faulty?"""
        return not (
            self.stopped or self.library.errors or any(asset.state in ("faulty", "failed") for asset in self.assets)
        )

    @property
    def lasting(self) -> bool:
        """Would building again, with nothing changed, end alike?"""
        return not self.stopped and all(one.lasting for one in [*self.assets, self.library])

    def unchanged(self) -> Record:
        """The record of building again with nothing changed."""
        assets = [asset.unchanged() for asset in self.assets]
        left_over = [] if self.tidied else self.left_over
        return Record(self.graph, assets, self.library.unchanged(), left_over=left_over)

    def plain(self) -> dict[str, Any]:
        """The record in JSON's types."""
        return {
            "tangentry_record": VERSION,
            "graph": self.graph,
            **{state: self.count(state) for state in ("ran", "reused", "skipped", "blocked", "failed")},
            "states": self.states,
            "assets": [asset.plain() for asset in self.assets],
            "library": self.library.plain(),
            "restored": self.restored,
            "left_over": self.left_over,
            "stopped": self.stopped or None,
        }

    def text(self) -> str:
        """The record as JSON."""
        return json.dumps(self.plain(), indent=1, ensure_ascii=False) + "\n"
