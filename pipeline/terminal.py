"""What people read: progress, plans, the node reference, facts. Plain lines, with a bar on a terminal."""

from __future__ import annotations

import json
import sys
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any, Self

from tangentry.pipeline.kinds import REQUIRED, Kind, Kinds, in_words, show
from tangentry.pipeline.plan import WHOLE, Planned
from tangentry.pipeline.record import AssetRecord, Record
from tangentry.pipeline.work import findings_in

if TYPE_CHECKING:
    from rich.progress import TaskID

PLAN_VERSION = 1
INSPECT_VERSION = 1
SEVERITIES = ("fault", "warning", "note")


class Progress:
    """A line for each asset that is not unchanged; on a terminal also a bar below them, from the beginning.

    of   what is counted
    """

    def __init__(self, of: str = "assets") -> None:
        self._of = of
        self._bar: Any = None
        self._task: TaskID | None = None
        self._through = 0
        if sys.stdout.isatty():
            from rich import progress

            self._bar = progress.Progress(
                progress.TextColumn("{task.description}"),
                progress.BarColumn(),
                progress.TimeElapsedColumn(),
                transient=True,
            )

    def __enter__(self) -> Self:
        if self._bar:
            self._bar.start()
            self._task = self._bar.add_task(f"looking at {self._of}", total=None)
        return self

    def __exit__(self, *_: object) -> None:
        if self._bar:
            self._bar.stop()

    def asset(self, asset: AssetRecord, total: int) -> None:
        """An asset is through."""
        if asset.state != "unchanged":
            for line in asset_lines(asset):
                self._print(line)
        self.one_through(total)

    def one_through(self, total: int) -> None:
        """One more of so many is through."""
        self._through += 1
        if self._bar:
            told = f"{self._through}/{total} {self._of}"
            self._bar.update(self._task, description=told, completed=self._through, total=total)

    def _print(self, line: str) -> None:
        if self._bar:
            self._bar.console.print(line, markup=False, highlight=False, soft_wrap=True)
        else:
            print(line, flush=True)


def asset_lines(asset: AssetRecord) -> list[str]:
    """One asset's fate: a line, and one more for each error, fault and warning."""
    lines = [f"{asset.state:10}{asset.name}"]
    lines += [f"          {error}" for error in asset.errors]
    for severity in SEVERITIES[:2]:
        lines += [f"          {severity}: {finding_text(one)}" for one in asset.findings if one["severity"] == severity]
    return lines


def finding_text(finding: dict[str, Any]) -> str:
    """A finding in one line."""
    advice = f"; {finding['advice']}" if finding.get("advice") else ""
    return f"{finding['id']} ({finding['count']}): {finding['what']}{advice}"


def closing_lines(record: Record) -> list[str]:
    """What is said at the end of a build; the last line counts."""
    lines = asset_lines(record.library)[1:] if record.library.errors else []
    lines += [
        f"made      {path}"
        for path in record.library.outputs
        if any(step["state"] == "ran" for step in record.library.steps)
    ]
    lines += [f"put back  {path}" for path in record.restored]
    lines += [f"{'removed   ' if record.tidied else 'left over '}{path}" for path in record.left_over]
    if record.left_over and not record.tidied:
        lines.append("files left over are made no longer; --tidy removes them")
    if record.stopped:
        lines.append(record.stopped)
    states = ", ".join(f"{count} {state}" for state, count in record.states.items())
    steps = f"{_many(record.count('ran'), 'step')} ran, {record.count('reused')} reused"
    lines.append(f"{_many(len(record.assets), 'asset')}: {states} ({steps})")
    return lines


def told_again(record: Record) -> list[str]:
    """What building again would say, with nothing changed."""
    again = record.unchanged()
    return [
        line for asset in again.assets if asset.state != "unchanged" for line in asset_lines(asset)
    ] + closing_lines(again)


def _many(count: int, word: str) -> str:
    return f"{count} {word}" if count == 1 else f"{count} {word}s"


# plan

WORDS = {"run": "runs", "wait": "may run", "reuse": "reused", "skip": "left out", "blocked": "can't run"}


def plan_lines(planned: list[Planned]) -> list[str]:
    """Every step that would run, with its reasons; assets with nothing to do are only counted."""
    lines: list[str] = []
    idle = 0
    for asset, steps in _by_asset(planned):
        busy = [one for one in steps if one.decision.state in ("run", "wait")]
        if not busy:
            idle += asset != WHOLE
            continue
        lines.append(asset or "whole library")
        for one in busy:
            reasons = "; ".join(str(reason) for reason in one.decision.reasons)
            lines.append(f"    {WORDS[one.decision.state]:8} {one.step.node:16} {reasons}")
    counts = {state: sum(one.decision.state == state for one in planned) for state in WORDS}
    if idle:
        lines.append(f"{_many(idle, 'asset')} with nothing to do")
    lines.append(
        f"{_many(len(planned), 'step')}: "
        + ", ".join(f"{counts[state]} {word}" for state, word in WORDS.items() if counts[state])
    )
    return lines


def plan_json(planned: list[Planned]) -> str:
    """A plan as JSON, version 1. Within a version, keys are only added.

    tangentry_plan   1
    steps            every step: its asset ("" for those of `whole_library`), node and kind
        state        "run", "reuse", "wait" (runs if what it waits for turns out changed), "skip" (an input that it
                     needs is left out) or "blocked" (one that it needs failed)
        reasons      as in the record; of "wait", the node that it waits for
    """
    steps = [
        {
            "asset": one.step.asset,
            "node": one.step.node,
            "kind": one.step.kind.name,
            "state": one.decision.state,
            "reasons": [
                {"what": r.what, "name": r.name, "before": r.before, "after": r.after, "text": str(r)}
                for r in one.decision.reasons
            ],
        }
        for one in planned
    ]
    return json.dumps({"tangentry_plan": PLAN_VERSION, "steps": steps}, indent=1, ensure_ascii=False)


def _by_asset(planned: list[Planned]) -> Iterable[tuple[str, list[Planned]]]:
    found: dict[str, list[Planned]] = {}
    for one in planned:
        found.setdefault(one.step.asset, []).append(one)
    return found.items()


# nodes


def kinds_lines(kinds: Kinds) -> list[str]:
    """Every kind with what it takes, gives and does."""
    lines = []
    for name in kinds.names:
        kind = kinds.get(name)
        lines.append(f"{name:14} {_takes(kind)} -> {_gives(kind)}")
        lines.append(f"{'':14} {kind.line}")
    return [*lines, "", "tangentry nodes KIND tells all about one."]


def _takes(kind: Kind) -> str:
    words = [
        f"{'all ' if one.many else ''}{one.flow.__name__}" + ("?" if one.optional else "")
        for one in kind.inputs.values()
    ]
    return ", ".join([*words, *("file" for setting in kind.settings.values() if setting.file == "read")]) or "nothing"


def _gives(kind: Kind) -> str:
    return ", ".join(f"{name + ': ' if name else ''}{given.__name__}" for name, given in kind.outputs.items())


def kind_lines(kind: Kind) -> list[str]:
    """One kind in full."""
    lines = [f"{kind.name}: {_takes(kind)} -> {_gives(kind)}", ""]
    if kind.inputs:
        lines.append("inputs")
        for one in kind.inputs.values():
            every = "the values of all assets, each " if one.many else ""
            lines.append(f"  {one.name:14} {every}{one.flow.__name__}{', may be left out' if one.optional else ''}")
    if kind.settings:
        lines.append("settings")
        for setting in kind.settings.values():
            default = (
                "must be given"
                if setting.default is REQUIRED
                else f"default {show(setting.default if setting.file else setting.plain(setting.default))}"
            )
            lines.append(f"  {setting.name:14} {in_words(setting.annotation)}; {default}")
            if setting.about:
                lines.append(f"  {'':14} {setting.about}")
    return [*lines, "", kind.about]


# inspect


def facts_lines(found: list[tuple[str, Any]]) -> list[str]:
    """The facts of each file, a line a fact; or its error."""
    lines: list[str] = []
    for file, facts in found:
        if isinstance(facts, Exception):
            lines += [str(facts), ""]
            continue
        width = max((len(name) for name in facts.facts), default=0)
        lines.append(file)
        lines += [
            f"    {name:{width}}  {value if isinstance(value, str) else format(value, '.6g')}"
            for name, value in facts.facts.items()
        ]
        lines += [
            f"    {one['severity']}: {one['id']} ({one['count']}): {one['what']}" for one in findings_in({"": facts})
        ]
        lines.append("")
    return lines[:-1]


def facts_json(found: list[tuple[str, Any]]) -> str:
    """The facts of each file as JSON, version 1."""
    files = [
        {"file": file, "error": str(facts), "facts": None, "findings": []}
        if isinstance(facts, Exception)
        else {"file": file, "error": None, "facts": facts.facts, "findings": findings_in({"": facts})}
        for file, facts in found
    ]
    return json.dumps({"tangentry_inspect": INSPECT_VERSION, "files": files}, indent=1, ensure_ascii=False)


def bytes_text(size: float) -> str:
    """A number of bytes for people.

    >>> bytes_text(1234567)
    '1.2 MB'
    """
    for unit in ("bytes", "kB", "MB", "GB"):
        if size < 1000:
            return f"{size:.0f} {unit}" if unit == "bytes" else f"{size:.1f} {unit}"
        size /= 1000
    return f"{size:.1f} TB"
