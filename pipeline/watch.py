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
        looked_into = {path for path in paths if os.path.isdir(path)}
        mute = [os.path.realpath(path) for path in ignored()]

        def wanted(
            _: object, path: str, paths: set[str] = paths, looked_into: set[str] = looked_into, mute: list[str] = mute
        ) -> bool:
            if os.path.basename(path).startswith(".") or any(
                path == one or path.startswith(one + os.sep) for one in mute
            ):
                return False
            return path in paths or os.path.dirname(path) in looked_into

        folders = looked_into | {os.path.dirname(path) for path in paths}
        existing = sorted(folder for folder in folders if os.path.isdir(folder))
        for batch in watch(
            *existing, watch_filter=wanted, step=QUIET_MS, debounce=LONGEST_MS, recursive=False, raise_interrupt=True
        ):
            yield sorted({path for _, path in batch})
            break  # what to watch may have changed with the build
