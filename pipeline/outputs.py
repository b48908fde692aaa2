"""Files that a graph makes, put in place and kept there: results like any other.

A missing or altered file is restored from the store without running its node. A file that this graph did not write is
never overwritten, unless that is asked for. Every file is written whole, then renamed.
"""

from __future__ import annotations

import contextlib
import dataclasses
import os
from collections.abc import Callable, Iterable
from pathlib import Path

from tangentry.pipeline.errors import TangentryError
from tangentry.pipeline.flow import Array
from tangentry.pipeline.ledger import Ledger, Output, stat_of
from tangentry.pipeline.plan import Step, StepId
from tangentry.pipeline.store import Result
from tangentry.pipeline.writing import WriteError, write_whole


class OutputError(TangentryError):
    """A file can't be put in its place."""


@dataclasses.dataclass
class Outputs:
    """The output files of one graph, and what its ledger knows of them."""

    graph: str  # the graph's name in the ledger
    folder: Path
    home: Path  # paths in the ledger are relative to this
    ledger: Ledger
    overwrite: bool = False
    written: list[str] = dataclasses.field(default_factory=list)  # in this build, relative to the graph's folder
    claimed: dict[str, StepId] = dataclasses.field(default_factory=dict)  # who makes what, by names in the ledger

    def __post_init__(self) -> None:
        self._known = self.ledger.outputs()
        self._places: dict[str, str] = {}  # folder -> the same, as the ledger names it
        self._by_step: dict[StepId, list[str]] = {}
        for name, one in self._known.items():
            if one.graph == self.graph:
                self._by_step.setdefault((one.asset, one.node), []).append(name)

    def place(self, step: Step, result: Result, content_of: Callable[[str], Array]) -> list[str]:
        """Put a step's files in place; gives their paths relative to the graph's folder. Raises OutputError."""
        paths = []
        folder = os.path.dirname(next(iter(step.makes.values())))
        for name, digest in result.files:
            path = os.path.normpath(os.path.join(folder, name))
            if os.path.relpath(path, folder or ".").startswith(".."):
                raise OutputError(
                    f'{name}: node "{step.node}" may only write below {folder or "the folder of the graph"}'
                )
            self._place(path, step.id, digest, content_of)
            paths.append(Path(path).as_posix())
        return paths

    def keep_claims(self, step: Step) -> None:
        """A step that could not be settled keeps what it wrote before."""
        self.claimed.update(dict.fromkeys(self._by_step.get(step.id, ()), step.id))

    def _place(self, path: str, id: StepId, digest: str, content_of: Callable[[str], Array]) -> None:
        target = self.folder / path
        name = self._name(target)
        if self.claimed.setdefault(name, id) != id:
            raise OutputError(
                f"{path}: is also made by {' '.join(self.claimed[name])}; put {{stem}} or {{below}} into its name"
            )
        known = self._known.get(name)
        altered = self.ledger.digest_of(target) != digest
        if altered and os.path.lexists(target) and not (known and known.graph == self.graph) and not self.overwrite:
            raise OutputError(
                f"{path}: is there already and was not written by this graph; move it away, or build with --overwrite"
            )
        record = Output(self.graph, *id, digest)
        if known != record:
            self._known[name] = record
            self.ledger.note_output(name, record)
        if altered:
            self._write(target, path, digest, content_of)

    def _name(self, target: Path) -> str:
        """A file's name in the ledger."""
        place, last = os.path.split(target)
        if place not in self._places:
            self._places[place] = os.path.relpath(os.path.realpath(place), self.home)
        return os.path.normpath(os.path.join(self._places[place], last))

    def _write(self, target: Path, path: str, digest: str, content_of: Callable[[str], Array]) -> None:
        content = content_of(digest)
        try:
            write_whole(target, lambda file: file.write(content.data))
        except WriteError as error:
            if error.hopeless:
                raise
            raise OutputError(f"{path}: can't be written: {error.reason}") from error
        self.written.append(Path(path).as_posix())
        stat = stat_of(target)
        if stat is not None:
            self.ledger.note_file(os.path.abspath(target), stat, stat[1], digest)

    def left_over(self, assets: Iterable[str] | None) -> list[Path]:
        """Files this graph wrote once and makes no longer; for some assets only, where these are given."""
        chosen = None if assets is None else set(assets)
        return sorted(
            self.home / name
            for name, one in self._known.items()
            if one.graph == self.graph
            and name not in self.claimed
            and (chosen is None or one.asset in chosen)
            and (self.home / name).is_file()
        )

    def remove(self, paths: Iterable[Path]) -> None:
        """Remove files that are left over."""
        for path in paths:
            with contextlib.suppress(FileNotFoundError):
                path.unlink()
            self.ledger.forget_output(os.path.relpath(path, self.home))
