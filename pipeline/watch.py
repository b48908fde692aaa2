"""Building again whenever something a build rests on is saved; saves that come in a burst make one build."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path

from tangentry.pipeline.errors import TangentryError

QUIET_MS = 300  # a burst is over when nothing was saved for so long
LONGEST_MS = 5000  # and a build begins after so long at the latest


def changes(rests_on: Callable[[], Iterable[Path | str]], ignored: Callable[[], Iterable[Path]]) -> Iterator[list[str]]:
    """Lists of saved files, one a burst: files that the last build rests on, and new ones in the folders it looked into.

    Both functions are asked anew before each wait; what they name is that of the last build. Raises TangentryError where
    `watchfiles` (the extra `tangentry[watch]`) is not installed.
    """
    try:
        from watchfiles import watch
    except ImportError:
        raise TangentryError("--watch needs the package watchfiles: pip install 'tangentry[watch]'") from None
    while True:
        paths = {os.path.realpath(path) for path in rests_on()}
        folders = _folders(paths)
        mute = [os.path.realpath(path) for path in ignored()]

        def wanted(_: object, path: str, mute: list[str] = mute) -> bool:
            name = os.path.basename(path)
            return not (name.startswith(".") or any(path == one or path.startswith(one + os.sep) for one in mute))

        for batch in watch(*folders, watch_filter=wanted, step=QUIET_MS, debounce=LONGEST_MS, recursive=False, raise_interrupt=True):
            yield sorted({path for _, path in batch})
            break  # what to watch may have changed with the build


def _folders(paths: set[str]) -> list[str]:
    """The folders that hold the paths, or are among them."""
    found = {path if os.path.isdir(path) else os.path.dirname(path) for path in paths}
    return sorted(folder for folder in found if os.path.isdir(folder))
