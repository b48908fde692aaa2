"""The content-addressed store: what was made once is found again by the digest of what it was made from.

    arrays/5f/5f1c....npy     an array, named by its content; read by memory map, never with pickle
    values/a0/a07e....json    a value's manifest, named by its content
    results/3c/3c99....json   what a node made, named by its key: one result per set of side files it read
    aside/                    objects that turned out damaged
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
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import numpy as np
from tangentry.pipeline.errors import TangentryError
from tangentry.pipeline.flow import Array
from tangentry.pipeline.values import (
    ArrayDigests,
    arrays_of,
    digest_array,
    digest_text,
    from_manifest,
    to_manifest,
)

USED_WITHIN = 3600.0  # seconds: trim leaves alone what a build may be using


class StoreError(TangentryError):
    """The store can't be written or read; nothing that was in it is lost."""


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
        written = self._write(
            self._place("arrays", digest),
            lambda file: np.lib.format.write_array(
                file, np.ascontiguousarray(array).reshape(array.shape), allow_pickle=False
            ),
        )
        self.written += written
        return digest

    def fetch_array(self, digest: str) -> Array:
        """The array of that digest, by memory map. Raises Damaged where it is missing or spoilt."""
        path = self._place("arrays", digest)
        self._bring(path)
        try:
            array = _map(path)
            if digest not in self._checked:
                if digest_array(array) != digest:
                    raise ValueError("content does not match its name")
                self._checked.add(digest)
        except (OSError, ValueError, EOFError, SyntaxError) as error:
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
            kept = json.loads(path.read_bytes())
            return [Result(**one) for one in kept]
        except FileNotFoundError:
            return []
        except (OSError, ValueError, KeyError, TypeError):
            self._set_aside(path)
            return []

    def keep_result(self, key: str, result: Result) -> None:
        """Keep a result under its key, beside those that were made from other side files."""
        path = self._place("results", key)
        others = [one for one in self.results(key) if one.reads != result.reads]
        text = json.dumps([dataclasses.asdict(one) for one in [result, *others]], separators=(",", ":"))
        self._write(path, lambda file: file.write(text.encode()), replace=True)

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
        """Remove results not used for `keep_days`, and the oldest until `max_size` bytes are left; then what no result needs.

        Gives how many objects went, and their bytes. What was used within the last hour stays.
        """
        now = time.time()
        results = sorted((path.stat().st_mtime, path) for path in self._objects("results"))
        total = sum(size for _, size in self.size().values())
        if keep_days is not None:
            old = [path for used, path in results if now - used > max(keep_days * 86400.0, USED_WITHIN)]
        else:
            old = []
        gone = _remove(old)
        count, freed = len(old), gone
        remaining = [path for used, path in results if path not in set(old) and now - used > USED_WITHIN]
        count, freed = self._drop_unneeded(count, freed, now)
        while max_size is not None and total - freed > max_size and remaining:
            batch, remaining = remaining[: max(1, len(remaining) // 8)], remaining[max(1, len(remaining) // 8) :]
            freed += _remove(batch)
            count, freed = self._drop_unneeded(count + len(batch), freed, now)
        return count, freed

    def _drop_unneeded(self, count: int, freed: int, now: float) -> tuple[int, int]:
        needed_values: set[str] = set()
        for path in self._objects("results"):
            for result in self.results(path.stem):
                needed_values.update(digest for digest in result.outputs.values() if digest)
        needed_arrays: set[str] = set()
        for path in self._objects("values"):
            if path.stem in needed_values:
                with contextlib.suppress(OSError, ValueError):
                    needed_arrays.update(arrays_of(path.read_text("utf-8")))
        for room, needed in (("values", needed_values), ("arrays", needed_arrays)):
            spare = [p for p in self._objects(room) if p.stem not in needed and now - p.stat().st_mtime > USED_WITHIN]
            freed += _remove(spare)
            count += len(spare)
        return count, freed

    def touch(self, key: str) -> None:
        """Note that a result was used now, so that trimming keeps it."""
        with contextlib.suppress(OSError):
            os.utime(self._place("results", key))

    # Places

    def _place(self, room: str, digest: str) -> Path:
        return self.folder / room / digest[:2] / (digest + (".npy" if room == "arrays" else ".json"))

    def _objects(self, room: str) -> Iterator[Path]:
        for path in sorted((self.folder / room).glob("*/*")):
            if path.suffix in (".npy", ".json"):
                yield path

    def _set_aside(self, path: Path) -> None:
        with contextlib.suppress(OSError):
            aside = self.folder / "aside"
            aside.mkdir(parents=True, exist_ok=True)
            os.replace(path, aside / f"{path.name}.{secrets.token_hex(4)}")

    def _write(self, path: Path, fill: Callable[[Any], object], replace: bool = False) -> bool:
        """Write a file whole or not at all; True if it had to be written."""
        if not replace and path.exists():
            return False
        try:
            write_whole(path, fill)
        except OSError as error:
            raise StoreError(
                f"{self.folder}: the store can't be written ({error.strerror or error}); free some space or correct its permissions, or name another with --store"
            ) from error
        self._send(path)
        return True

    def _bring(self, path: Path) -> None:
        """Before an object is read: a store that others share fetches it."""

    def _send(self, path: Path) -> None:
        """After an object was written: a store that others share hands it on."""


def write_whole(path: Path, fill: Callable[[Any], object]) -> None:
    """Write a file under a unique temporary name and rename it, so that nobody ever sees half of it."""
    path.parent.mkdir(parents=True, exist_ok=True)
    unfinished = path.with_name(f".{path.name[:80]}.{os.getpid()}.{secrets.token_hex(4)}.unfinished")
    try:
        with open(unfinished, "wb") as file:
            fill(file)
        os.replace(unfinished, path)
    except BaseException:
        unfinished.unlink(missing_ok=True)
        raise


def _map(path: Path) -> Array:
    """An array by memory map, read-only. The map is taken off its file object, so plain views of it stay plain arrays."""
    try:
        mapped = np.load(path, mmap_mode="r", allow_pickle=False)
    except ValueError:
        mapped = np.load(path, allow_pickle=False)  # an empty array can't be mapped
        mapped.setflags(write=False)
    array: Array = np.asarray(mapped).view(np.ndarray)
    return array


SOUND: dict[str, Callable[[Path], bool]] = {
    "arrays": lambda path: digest_array(_map(path)) == path.stem,
    "values": lambda path: digest_text(path.read_text("utf-8")) == path.stem,
    "results": lambda path: bool(json.loads(path.read_bytes())),
}  # by room: does an object's content match its name?


def _holds(sound: Callable[[Path], bool], path: Path) -> bool:
    try:
        return sound(path)
    except (OSError, ValueError, EOFError, SyntaxError):
        return False


def _remove(paths: list[Path]) -> int:
    freed = 0
    for path in paths:
        with contextlib.suppress(OSError):
            size = path.stat().st_size
            path.unlink()
            freed += size
    return freed
