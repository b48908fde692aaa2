"""Waiting for something that a build rests on to be saved; saves that come in a burst count as one."""

from __future__ import annotations

import os
from collections.abc import Iterable
from pathlib import Path

from tangentry.pipeline.errors import TangentryError

QUIET_MS = 300  # a burst is over when nothing was saved for so long
LONGEST_MS = 5000  # and is cut off after so long


def wait_for_saves(rests_on: Iterable[Path | str], ignored: Iterable[Path | str]) -> list[str]:
    """The files of the next burst: those that a build rests on, and new ones in the folders it looked into.

    Raises TangentryError where `watchfiles` (the extra `tangentry[watch]`) is not installed.
    """
    try:
        from watchfiles import watch
    except ImportError:
        raise TangentryError("--watch needs the package watchfiles: pip install 'tangentry[watch]'") from None
    paths = {os.path.realpath(path) for path in rests_on}
    looked_into = {path for path in paths if os.path.isdir(path)}
    mute = [os.path.realpath(path) for path in ignored]

    def wanted(_: object, path: str) -> bool:
        if os.path.basename(path).startswith(".") or any(path == one or path.startswith(one + os.sep) for one in mute):
            return False
        return path in paths or os.path.dirname(path) in looked_into

    folders = looked_into | {os.path.dirname(path) for path in paths}
    existing = sorted(folder for folder in folders if os.path.isdir(folder))
    bursts = watch(*existing, watch_filter=wanted, step=QUIET_MS, debounce=LONGEST_MS, recursive=False)
    return sorted({path for _, path in next(bursts, set())})
