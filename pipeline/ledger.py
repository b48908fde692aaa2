"""What this machine remembers between builds, in one SQLite file: digests of files, what was made of what, outputs.

Losing it costs time, never results: files are hashed again, reasons read "first build", outputs are compared by
content.
"""

from __future__ import annotations

import contextlib
import json
import os
import sqlite3
import time
from collections.abc import Iterable, Sequence
from pathlib import Path
from stat import S_ISREG
from typing import Any, NamedTuple

import numpy as np
from tangentry.pipeline.arrays import digest_array
from tangentry.pipeline.store import unwritable

SETTLED_NS = 2_000_000_000  # a file that changed this shortly before its digest was taken may change again unseen
TABLES = """
create table if not exists files
    (path text primary key, size integer, mtime integer, inode integer, noted integer, digest text);
create table if not exists made (graph text, asset text, node text, parts text, primary key (graph, asset, node));
create table if not exists outputs (path text primary key, graph text, asset text, node text, digest text);
"""


class Output(NamedTuple):
    """Who wrote an output file, and its digest."""

    graph: str
    asset: str
    node: str
    digest: str


Stat = tuple[int, int, int]  # size, mtime in nanoseconds, inode


def stat_of(path: str | os.PathLike[str]) -> Stat | None:
    """Size, modification time and inode of a file; None where there is no file."""
    try:
        found = os.stat(path)
    except (OSError, ValueError):
        return None
    return (found.st_size, found.st_mtime_ns, found.st_ino) if S_ISREG(found.st_mode) else None


def digest_file(path: str | os.PathLike[str]) -> str:
    """Digest of a file's content: that of its bytes as an array."""
    return digest_array(np.fromfile(path, dtype=np.uint8))


class Ledger:
    """The memory of one store. Only one process writes; workers open it to read."""

    def __init__(self, folder: Path, read_only: bool = False) -> None:
        self.read_only, self._folder = read_only, folder
        self.hashed = 0
        self._files: dict[str, tuple[Stat, int, str]] = {}
        self._new_files: dict[str, tuple[Stat, int, str]] = {}
        self._base: sqlite3.Connection | None = None
        path = folder / "ledger.sqlite"
        try:
            if read_only:
                self._base = (
                    sqlite3.connect(f"{path.as_uri()}?mode=ro", uri=True, timeout=30) if path.exists() else None
                )
            else:
                folder.mkdir(parents=True, exist_ok=True)
                self._base = _open(path)
        except (OSError, sqlite3.OperationalError) as error:
            raise unwritable(folder, error) from error
        if self._base is not None:
            rows = self._rows("select path, size, mtime, inode, noted, digest from files", ())
            self._files = {row[0]: ((row[1], row[2], row[3]), row[4], row[5]) for row in rows}

    def digest_of(self, path: str | os.PathLike[str]) -> str | None:
        """Digest of a file as it is, remembered while its size, time and inode stay; None: no such file."""
        name, now = os.path.abspath(path), stat_of(path)
        if now is None:
            return None
        remembered = self._files.get(name)
        if remembered is not None:
            stat, noted, digest = remembered
            if stat == now and noted - stat[1] > SETTLED_NS:
                return digest
        noted = time.time_ns()
        try:
            digest = digest_file(name)
        except OSError:
            return None
        self.hashed += 1
        self.note_file(name, now, noted, digest)
        return digest

    def note_file(self, name: str, stat: Stat, noted: int, digest: str) -> None:
        """Remember the digest of a file that had that stat when it was read."""
        self._files[name] = self._new_files[name] = (stat, noted, digest)

    def learnt(self) -> dict[str, tuple[Stat, int, str]]:
        """What was newly learnt about files since this was last asked."""
        learnt, self._new_files = self._new_files, {}
        return learnt

    def parts_of(self, graph: str) -> dict[tuple[str, str], dict[str, Any]]:
        """What every node of a graph was last made of, by (asset, node)."""
        known = {}
        for asset, node, parts in self._rows("select asset, node, parts from made where graph = ?", (graph,)):
            with contextlib.suppress(ValueError):  # spoilt: then the reason to run reads "never made before"
                known[asset, node] = json.loads(parts)
        return known

    def note_parts(self, graph: str, rows: Iterable[tuple[str, str, dict[str, Any]]]) -> None:
        """Remember what nodes were made of: (asset, node, parts)."""
        self._write(
            "insert or replace into made values (?, ?, ?, ?)",
            [(graph, asset, node, json.dumps(parts, separators=(",", ":"))) for asset, node, parts in rows],
        )

    def outputs(self) -> dict[str, Output]:
        """Every file that a graph wrote, by path."""
        return {
            row[0]: Output(*row[1:]) for row in self._rows("select path, graph, asset, node, digest from outputs", ())
        }

    def note_output(self, path: str, output: Output) -> None:
        """Remember a file that a graph writes: at once, so that a build that is killed knows its own files again."""
        self._write("insert or replace into outputs values (?, ?, ?, ?, ?)", [(path, *output)])

    def forget_output(self, path: str) -> None:
        """Forget a file that was removed."""
        self._write("delete from outputs where path = ?", [(path,)])

    def close(self) -> None:
        """Write down what was learnt about files, and close."""
        if self._base is None:
            return
        try:
            if not self.read_only:
                self._flush()
        finally:
            self._base.close()
            self._base = None

    def _flush(self) -> None:
        learnt = self.learnt()
        self._write(
            "insert or replace into files values (?, ?, ?, ?, ?, ?)",
            [(name, *stat, noted, digest) for name, (stat, noted, digest) in learnt.items()],
        )

    def _rows(self, query: str, values: tuple[str, ...]) -> list[tuple[Any, ...]]:
        """What a query finds; nothing where there is no ledger, or a spoilt one that may only be read."""
        try:
            return self._base.execute(query, values).fetchall() if self._base is not None else []
        except sqlite3.DatabaseError:
            return []

    def _write(self, statement: str, rows: Sequence[tuple[Any, ...]]) -> None:
        assert self._base is not None and not self.read_only
        if not rows:
            return
        try:
            self._base.executemany(statement, rows)
            self._base.commit()
        except sqlite3.DatabaseError as error:
            raise unwritable(self._folder, error) from error


def _open(path: Path) -> sqlite3.Connection:
    """The ledger, made anew where it is missing or spoilt."""
    try:
        base = sqlite3.connect(path, timeout=30)
        base.text_factory = lambda content: content.decode("utf-8", errors="replace")
        base.execute("pragma synchronous = off")
        base.executescript(TABLES)
        if base.execute("pragma quick_check(1)").fetchone() != ("ok",):
            raise sqlite3.DatabaseError("spoilt")
        return base
    except sqlite3.OperationalError:
        raise
    except sqlite3.DatabaseError:
        os.replace(path, path.with_suffix(".spoilt"))
        return _open(path)
