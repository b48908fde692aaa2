"""The content-addressed store: what was made once is found again by the digest of what it was made from.

    arrays/5f/5f1c....npy     an array, named by its content; read by memory map
    values/a0/a07e....json    a value's manifest, named by its content
    results/3c/3c99....json   what a node made, named by its key: one result per set of side files it read;
                              the digest of the rest stands in its first line
    aside/                    objects that turned out damaged
    turns, running/           locks of builds under way (see sharing.py)
    ledger.sqlite             what this machine remembers (see ledger.py)

Everything is written under a unique temporary name and then renamed: two builds may share a store at any time.
Each object is checked against its name when a process first reads it.
"""

from __future__ import annotations

import contextlib
import dataclasses
import json
import os
import secrets
import time
from collections import deque
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path
from typing import Any

from tangentry.pipeline.arrays import ArrayDigests, digest_array, map_array, write_array
from tangentry.pipeline.errors import TangentryError
from tangentry.pipeline.flow import Array
from tangentry.pipeline.sharing import Running, Turns
from tangentry.pipeline.values import arrays_of, digest_text, from_manifest, to_manifest
from tangentry.pipeline.writing import WriteError, sweep, write_whole

UNREADABLE = (OSError, ValueError, TypeError)  # what spoilt objects give rise to
USED_WITHIN = 3600.0  # seconds: trim leaves alone what a build may be using


class StoreError(TangentryError):
    """The store can't be written or read; nothing that was in it is lost."""


def unwritable(folder: Path, why: object) -> StoreError:
    """The error of a store that can't be written."""
    reason = getattr(why, "strerror", None) or why
    return StoreError(
        f"{folder}: the store can't be written ({reason}); free some space or correct its permissions, or name another "
        "with --store"
    )


class Damaged(TangentryError):
    """An object is missing, or its content does not match its name; what made it must run again."""


@dataclasses.dataclass(frozen=True)
class Result:
    """What a node made: a value's digest per output (None: left out), or the input error it ended with.

    `reads` are the files it read beside those it was given, relative to the first one's folder, with digests
    (None: looked for and not there): the result holds only while they stay so. `findings` and `files` repeat what the
    pipeline itself acts on, so that a reused value need not be read for it.
    """

    outputs: dict[str, str | None]
    reads: dict[str, str | None]
    error: str | None = None
    findings: list[dict[str, Any]] = dataclasses.field(default_factory=list)  # id, severity, count, what, ...
    files: list[tuple[str, str]] = dataclasses.field(default_factory=list)  # name, digest of the content


class Store:
    """The store in a folder, which is made when something is first kept."""

    def __init__(self, folder: str | os.PathLike[str]) -> None:
        self.folder = Path(folder)
        self.digest = ArrayDigests()
        self.written = 0  # arrays really written
        self.read_only = False  # then damage is noticed, but nothing is set aside
        self.turns = Turns(self.folder)
        self.running = Running(self.folder)
        self._checked: set[str] = set()

    # Values

    def keep(self, value: object) -> str:
        """Keep a flow value; gives its digest. What is already here is not written again."""
        manifest = to_manifest(value, self._keep_array)
        digest = digest_text(manifest)
        self._write(self._place("values", digest), lambda file: file.write(manifest.encode()))
        return digest

    def fetch(self, digest: str, wanted: type) -> Any:
        """The value of that digest. Raises Damaged where it is missing or spoilt."""
        path = self._place("values", digest)
        self._bring(path)
        try:
            manifest = path.read_text("utf-8", errors="replace")
            if digest_text(manifest) != digest:
                raise ValueError("content does not match its name")
            return from_manifest(manifest, wanted, self.fetch_array)
        except (OSError, ValueError) as error:
            self._set_aside(path)
            raise Damaged(f"{path}: {error}") from error

    def _keep_array(self, array: Array) -> str:
        digest = self.digest(array)
        self.written += self._write(self._place("arrays", digest), lambda file: write_array(file, array))
        return digest

    def fetch_array(self, digest: str) -> Array:
        """The array of that digest, by memory map. Raises Damaged where it is missing or spoilt."""
        path = self._place("arrays", digest)
        self._bring(path)
        try:
            array = map_array(path)
            if digest not in self._checked:
                if digest_array(array) != digest:
                    raise ValueError("content does not match its name")
                self._checked.add(digest)
        except UNREADABLE as error:
            self._set_aside(path)
            raise Damaged(f"{path}: {error}") from error
        self.digest.remember(array, digest)
        return array

    # Results

    def results(self, key: str) -> list[Result]:
        """Every result kept under a key; unreadable ones are set aside."""
        path = self._place("results", key)
        self._bring(path)
        try:
            return [Result(**one) for one in json.loads(_signed(path))]
        except FileNotFoundError:
            return []
        except UNREADABLE:
            self._set_aside(path)
            return []

    def keep_result(self, key: str, result: Result) -> None:
        """Keep a result under its key, beside those that were made from other side files."""
        path = self._place("results", key)
        others = [one for one in self.results(key) if one.reads != result.reads]
        text = json.dumps([dataclasses.asdict(one) for one in [result, *others]], separators=(",", ":"))
        self._write(path, lambda file: file.write(f"{digest_text(text)}\n{text}".encode()), replace=True)

    def close(self) -> None:
        """Let go of what is open."""
        self.turns.close()

    # Care

    def size(self) -> dict[str, tuple[int, int]]:
        """For arrays, values and results: how many there are, and their bytes."""
        sizes = {}
        for room in ("arrays", "values", "results"):
            files = [path.stat().st_size for path in self._objects(room)]
            sizes[room] = (len(files), sum(files))
        return sizes

    def verify(self) -> list[Path]:
        """Set aside every object whose content does not match its name; gives their paths."""
        bad = [path for room, sound in SOUND.items() for path in self._objects(room) if not _holds(sound, path)]
        for path in bad:
            self._set_aside(path)
        return bad

    def trim(self, keep_days: float | None = None, max_size: int | None = None) -> tuple[int, int]:
        """Remove results not used for `keep_days`, the oldest until `max_size` bytes are left, what none needs.

        Gives how many objects went, and their bytes. What was used within the last hour, or since the oldest build
        that is still under way began, stays.
        """
        now = time.time()
        spared_from = min(now - USED_WITHIN, self.running.since())
        sweep(self.folder)
        total = sum(size for _, size in self.size().values())
        results = [path for used, path in sorted((_used(path), path) for path in self._objects("results"))]
        old_from = spared_from if keep_days is None else min(spared_from, now - keep_days * 86400.0)
        old = [path for path in results if _used(path) < old_from] if keep_days is not None else []
        left = deque(path for path in results[len(old) :] if _used(path) < spared_from)
        count, freed = _remove(old, old_from)
        while True:
            more, less = self._drop_unneeded(spared_from)
            count, freed = count + more, freed + less
            if max_size is None or total - freed <= max_size or not left:
                return count, freed
            more, less = _remove([left.popleft() for _ in range(max(1, len(left) // 8))], spared_from)
            count, freed = count + more, freed + less

    def _drop_unneeded(self, spared_from: float) -> tuple[int, int]:
        """Remove values that no result names, and arrays that none of the others names."""
        results = [result for path in self._objects("results") for result in self.results(path.stem)]
        values = {digest for result in results for digest in result.outputs.values() if digest}
        arrays: set[str] = set()
        for path in self._objects("values"):
            if path.stem in values or _used(path) >= spared_from:
                with contextlib.suppress(OSError, ValueError):
                    arrays.update(arrays_of(path.read_text("utf-8")))
        spare = [path for path in self._objects("values") if path.stem not in values]
        spare += [path for path in self._objects("arrays") if path.stem not in arrays]
        return _remove(spare, spared_from)

    def touch(self, key: str) -> None:
        """Note that a result was used now, so that trimming keeps it."""
        self._touch(self._place("results", key))

    def _touch(self, path: Path) -> bool:
        """Note that an object was used now; False where it is not there."""
        try:
            os.utime(path)
        except FileNotFoundError:
            return False
        except OSError:  # a store that can be read only
            return path.exists()
        return True

    # Places

    def _place(self, room: str, digest: str) -> Path:
        return self.folder / room / digest[:2] / (digest + (".npy" if room == "arrays" else ".json"))

    def _objects(self, room: str) -> Iterator[Path]:
        for path in sorted((self.folder / room).glob("*/*")):
            if path.suffix in (".npy", ".json"):
                yield path

    def _set_aside(self, path: Path) -> None:
        if self.read_only:
            return
        with contextlib.suppress(OSError):
            aside = self.folder / "aside"
            aside.mkdir(parents=True, exist_ok=True)
            os.replace(path, aside / f"{path.name}.{secrets.token_hex(4)}")

    def _write(self, path: Path, fill: Callable[[Any], object], replace: bool = False) -> bool:
        """Write a file whole or not at all; True if it had to be written. One that is there counts as used now."""
        if not replace and self._touch(path):
            return False
        try:
            write_whole(path, fill)
        except WriteError as error:
            raise unwritable(self.folder, error.reason) from error
        self._send(path)
        return True

    def _bring(self, path: Path) -> None:
        """Before an object is read: a store that others share fetches it."""

    def _send(self, path: Path) -> None:
        """After an object was written: a store that others share hands it on."""


def _signed(path: Path) -> str:
    """The rest of a file whose first line is its digest. Raises ValueError where it is not."""
    digest, _, text = path.read_text("utf-8").partition("\n")
    if digest_text(text) != digest:
        raise ValueError("content does not match its digest")
    return text


SOUND: dict[str, Callable[[Path], bool]] = {
    "arrays": lambda path: digest_array(map_array(path)) == path.stem,
    "values": lambda path: digest_text(path.read_text("utf-8")) == path.stem,
    "results": lambda path: bool(_signed(path)),
}  # by room: does an object's content match its name?


def _holds(sound: Callable[[Path], bool], path: Path) -> bool:
    try:
        return sound(path)
    except UNREADABLE:
        return False


def _used(path: Path) -> float:
    """When an object was last used; 0 where it is gone."""
    try:
        return path.stat().st_mtime
    except OSError:
        return 0.0


def _remove(paths: Iterable[Path], used_from: float) -> tuple[int, int]:
    """Remove objects, less those that came into use meanwhile; gives how many went, and their bytes."""
    count = freed = 0
    for path in paths:
        with contextlib.suppress(OSError):
            stat = path.stat()
            if stat.st_mtime < used_from:
                path.unlink()
                count, freed = count + 1, freed + stat.st_size
    return count, freed
