"""Waiting for something that a build rests on to be saved; saves that come in a burst count as one."""

from __future__ import annotations

import os
from collections.abc import Iterable
from pathlib import Path

from tangentry.pipeline.errors import TangentryError

QUIET_MS = 300  # a burst is over when nothing was saved for so long
LONGEST_MS = 5000  # and is cut off after so long


def wait_for_saves(
    rests_on: Iterable[Path | str], outputs: Iterable[Path | str], store: Path, began: float
) -> list[str]:
    """The files of the next burst: those that a build rests on, and new ones in the folders it looked into.

    outputs, store   what builds themselves write
    began            when the build began (seconds since the epoch): what was saved while it ran is the next burst

    Raises TangentryError where `watchfiles` (the extra `tangentry[watch]`) is not installed.
    """
    try:
        from watchfiles import watch
    except ImportError:
        raise TangentryError("--watch needs the package watchfiles: pip install 'tangentry[watch]'") from None
    own, own_folder = {os.path.realpath(path) for path in outputs}, os.path.realpath(store) + os.sep

    def concerns_us(path: str) -> bool:
        return not (path in own or path.startswith(own_folder) or os.path.basename(path).startswith("."))

    paths = {path for path in map(os.path.realpath, rests_on) if concerns_us(path)}
    looked_into = {path for path in paths if os.path.isdir(path)}

    def wanted(_: object, path: str) -> bool:
        return (path in paths or os.path.dirname(path) in looked_into) and concerns_us(path)

    folders = looked_into | {os.path.dirname(path) for path in paths}
    existing = sorted(folder for folder in folders if os.path.isdir(folder))
    bursts = watch(
        *existing,
        watch_filter=wanted,
        step=QUIET_MS,
        debounce=LONGEST_MS,
        rust_timeout=QUIET_MS,
        yield_on_timeout=True,
        recursive=False,
    )
    next_burst = {path for _, path in next(bursts, set())}  # the watch is on now; what was saved before?
    saved = next_burst | {path for path in paths if _saved(path) > began}
    while not saved:
        saved = {path for _, path in next(bursts, set())}
    return sorted(saved)


def _saved(path: str) -> float:
    try:
        return os.stat(path).st_mtime
    except OSError:
        return 0.0
