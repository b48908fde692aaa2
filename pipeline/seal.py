"""The seal on a finished build: every file it depended on or made, as it was. While all are so, there is nothing to do.

    line 1      JSON: what was asked, what to say, the exit code, when it was sealed, how many paths
    then        the paths, a line each
    then        size, modification time (ns) and inode of each, 64-bit integers; -1 -1 -1: not there
    then        the record of building again with nothing changed

Directories that the library's patterns look into are among the paths: a member that comes, goes or is renamed changes
them. This file imports next to nothing: it stands on the path of a build that has nothing to do.
"""

from __future__ import annotations

import json
import os
import time
from array import array
from collections.abc import Iterable
from pathlib import Path
from typing import NamedTuple

SETTLED_NS = 2_000_000_000  # what changed this shortly before the sealing may change again unseen
VERSION = 2


class Word(NamedTuple):
    """What a sealed build said, and its exit code."""

    text: str
    code: int
    record: bytes


def store_place(graph: Path, store: str | os.PathLike[str] | None) -> tuple[Path, str]:
    """The store's folder, `.tangentry` beside the graph unless another is named, and the URL behind it, if any."""
    own = graph.parent / ".tangentry"
    if store is None:
        return own, ""
    name = os.fspath(store)
    return (own / "copies" / _short(name), name) if "://" in name else (Path(store), "")


def unbroken(folder: Path, asked: list[str]) -> Word | None:
    """What the last build for these words said, if nothing has changed since; None where that is not sure."""
    try:
        content = _place(folder, asked).read_bytes()
        head, _, rest = content.partition(b"\n")
        sealed = json.loads(head)
        if sealed["version"] != VERSION or sealed["asked"] != asked:
            return None
        paths = os.fsdecode(rest[: sealed["names"]]).split("\n")
        stats, end = array("q"), sealed["names"] + 24 * len(paths)
        stats.frombytes(rest[sealed["names"] : end])
    except (OSError, ValueError, KeyError, TypeError):
        return None
    if len(stats) != 3 * len(paths) or _stats(paths) != stats:
        return None
    return Word(sealed["text"], sealed["code"], rest[end:])


def seal(folder: Path, asked: list[str], paths: Iterable[Path | str], word: Word) -> bool:
    """Seal a finished build; False where files are too fresh to be trusted."""
    names = sorted({os.path.abspath(path) for path in paths})
    if any("\n" in name for name in names):
        return False
    stats = _stats(names)
    if max(stats[1::3], default=0) > time.time_ns() - SETTLED_NS:
        return False
    text = os.fsencode("\n".join(names))
    head = {"version": VERSION, "asked": asked, "text": word.text, "code": word.code, "names": len(text)}
    from tangentry.pipeline.writing import write_whole

    content = b"".join([json.dumps(head).encode(), b"\n", text, stats.tobytes(), word.record])
    write_whole(_place(folder, asked), lambda file: file.write(content))
    return True


def _place(folder: Path, asked: list[str]) -> Path:
    return folder / "seals" / _short(json.dumps(asked))


def _short(text: str) -> str:
    """A file name for a text; what is found there is compared, so a clash costs time only."""
    import zlib

    return f"{zlib.crc32(text.encode()):08x}"


def _stats(paths: list[str]) -> array[int]:
    stats = array("q")
    add, stat = stats.extend, os.stat
    for path in paths:
        try:
            found = stat(path)
        except OSError:
            add((-1, -1, -1))
        else:
            is_folder = found.st_mode & 0o170000 == 0o040000
            add((0 if is_folder else found.st_size, found.st_mtime_ns, found.st_ino))
    return stats
