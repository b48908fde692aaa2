"""Files written whole or not at all. Imports next to nothing: also builds that have nothing to do come by here."""

from __future__ import annotations

import contextlib
import os
import secrets
import time
from collections.abc import Callable
from errno import EDQUOT, ENOSPC, EROFS
from pathlib import Path
from typing import Any, NoReturn

from tangentry.pipeline.errors import TangentryError

SUFFIX = ".unfinished"
ABANDONED_AFTER = 3600.0  # seconds: whoever was writing it so long ago is no more

_UNDER_WAY: set[Path] = set()  # temporary files of this process


class WriteError(TangentryError):
    """A file can't be written; what was there before is there still."""

    def __init__(self, path: Path, cause: OSError) -> None:
        self.reason = cause.strerror or str(cause)
        self.hopeless = cause.errno in (ENOSPC, EDQUOT, EROFS)  # the next file will fare no better
        super().__init__(f"{path}: can't be written: {self.reason}")


def write_whole(path: Path, fill: Callable[[Any], object]) -> None:
    """Write a file under a unique temporary name and rename it, so that nobody ever sees half of it.

    Raises WriteError where the disk is full, the place is read-only, and the like.
    """
    unfinished = path.with_name(f".{path.name[:80]}.{os.getpid()}.{secrets.token_hex(4)}{SUFFIX}")
    _UNDER_WAY.add(unfinished)
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        with open(unfinished, "wb") as file:
            fill(file)
        os.replace(unfinished, path)
    except BaseException as error:
        with contextlib.suppress(OSError):
            unfinished.unlink()
        if isinstance(error, OSError):
            raise WriteError(path, error) from error
        raise
    finally:
        _UNDER_WAY.discard(unfinished)


def end_at_once(code: int) -> NoReturn:
    """End this process here and now, but for what it is just writing: that goes first."""
    for path in list(_UNDER_WAY):
        with contextlib.suppress(OSError):
            path.unlink()
    os._exit(code)


def sweep(folder: Path) -> None:
    """Remove what killed processes left unfinished below a folder, long ago."""
    for path in folder.rglob(f".*{SUFFIX}"):
        with contextlib.suppress(OSError):
            if time.time() - path.stat().st_mtime > ABANDONED_AFTER:
                path.unlink()
