"""Builds that share a store at the same time: each step is run by one of them, and trimming spares what they use.

Both rest on locks that the operating system lets go of when a process ends, however it ends. Where a file system or a
machine has no such locks, builds are as safe as with them; only work may be done twice.
"""

from __future__ import annotations

import contextlib
import os
import secrets
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from typing import IO

if sys.platform != "win32":
    import fcntl

    def _lock(file: IO[bytes], byte: int, wait: bool) -> bool:
        """Lock one byte of a file; False where another process has it, or where there are no locks."""
        try:
            fcntl.lockf(file, fcntl.LOCK_EX | (0 if wait else fcntl.LOCK_NB), 1, byte)
        except OSError:
            return False
        return True

    def _unlock(file: IO[bytes], byte: int) -> None:
        with contextlib.suppress(OSError):
            fcntl.lockf(file, fcntl.LOCK_UN, 1, byte)

else:

    def _lock(file: IO[bytes], byte: int, wait: bool) -> bool:
        return False

    def _unlock(file: IO[bytes], byte: int) -> None: ...


class Turns:
    """Whose turn it is to run a step: one file of locks, in which a key is the place of a byte."""

    def __init__(self, folder: Path) -> None:
        self._path = folder / "turns"
        self._file: IO[bytes] | None = None

    def close(self) -> None:
        """Let go of the file."""
        if self._file is not None:
            self._file.close()
            self._file = None

    __del__ = close

    @contextlib.contextmanager
    def of(self, key: str) -> Iterator[None]:
        """Wait while another process runs the step of that key, and make the others wait while open."""
        byte = int(key[:15], 16)
        if self._file is None:
            with contextlib.suppress(OSError):
                self._path.parent.mkdir(parents=True, exist_ok=True)
                self._file = open(self._path, "ab")  # noqa: SIM115 (held until `close`)
        if self._file is None:
            yield
            return
        _lock(self._file, byte, wait=True)
        try:
            yield
        finally:
            _unlock(self._file, byte)


class Running:
    """The builds under way on a store: a locked file for each, as old as the build."""

    def __init__(self, folder: Path) -> None:
        self._folder = folder / "running"

    @contextlib.contextmanager
    def one_more(self) -> Iterator[None]:
        """While open, one more build is under way."""
        path = self._folder / secrets.token_hex(8)
        try:
            self._folder.mkdir(parents=True, exist_ok=True)
            file = open(path, "wb")  # noqa: SIM115 (entered below)
        except OSError:
            yield  # whatever keeps us from writing here is told when something is to be kept
            return
        try:
            with file:
                _lock(file, 0, wait=False)
                yield
        finally:
            with contextlib.suppress(OSError):
                path.unlink()

    def since(self) -> float:
        """When the oldest build that is under way began; now where there is none. Forgets builds that were killed."""
        began = [time.time()]
        for path in self._folder.glob("*"):
            with contextlib.suppress(OSError), open(path, "r+b") as file:
                if _lock(file, 0, wait=False):
                    path.unlink()
                else:
                    began.append(os.fstat(file.fileno()).st_mtime)
        return min(began)
