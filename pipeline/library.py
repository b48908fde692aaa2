"""The members of a library: the files its patterns match, and what a graph file may say of each."""

from __future__ import annotations

import dataclasses
import fnmatch
import glob
import os
import re
from collections.abc import Collection, Iterator
from pathlib import Path, PurePosixPath

from tangentry.pipeline.errors import GraphError
from tangentry.pipeline.graph import Graph

WILD = re.compile(r"[*?\[]")
ALTERNATIVES = re.compile(r"\{([^{}]*,[^{}]*)\}")
MOST_PATTERNS = 256  # that alternatives may unfold into


@dataclasses.dataclass(frozen=True)
class Member:
    """One file of a library. Its name is its path relative to the graph file, with forward slashes."""

    name: str
    below: str  # the path below the fixed leading part of the pattern that matched it

    @property
    def fields(self) -> dict[str, str]:
        """What fills `{file}`, `{stem}`, `{folder}` and `{below}`."""
        path = PurePosixPath(self.name)
        return {"file": self.name, "stem": path.stem, "folder": path.parent.as_posix(), "below": self.below}


def find_members(graph: Graph, written: Collection[str] = (), only: str | None = None) -> list[Member]:
    """The files of a graph's library in name order, less those in `written` (absolute paths).

    only   a pattern for the names or stems of those that are wanted

    Raises GraphError where no file matches.
    """
    found: dict[str, Member] = {}
    for pattern in graph.library:
        for one in unfold(pattern):
            fixed = graph.folder / _fixed_part(one)
            for path in _matches(graph.folder, one):
                if os.path.isfile(graph.folder / path) and os.path.abspath(graph.folder / path) not in written:
                    name = relative_name(path, graph.folder)
                    if not _is_text(name):
                        raise GraphError(f"{graph.library_mark}: {name!a} is no text in UTF-8; rename the file")
                    found.setdefault(name, Member(name, Path(os.path.relpath(graph.folder / path, fixed)).as_posix()))
    if not found:
        raise GraphError(
            f"{graph.library_mark}: no file matches {', '.join(graph.library)} (looked in {graph.folder.resolve()})"
        )
    members = [found[name] for name in sorted(found)]
    if only is None:
        return members
    chosen = [
        m for m in members if fnmatch.fnmatchcase(m.name, only) or fnmatch.fnmatchcase(PurePosixPath(m.name).stem, only)
    ]
    if not chosen:
        raise GraphError(f"--asset {only}: no asset of the library has such a name; the first is {members[0].name}")
    return chosen


def _is_text(name: str) -> bool:
    try:
        name.encode()
    except UnicodeEncodeError:
        return False
    return True


def looked_into(graph: Graph) -> list[str]:
    """The folders that a library's patterns look into: none changes but when something comes, goes or is renamed."""
    folders: list[str] = []
    for pattern in [one for written in graph.library for one in unfold(written)]:
        top = os.path.join(graph.folder, _fixed_part(pattern))
        folders += _folders(top) if WILD.search(os.path.dirname(pattern)) else [top]
    return folders


def _matches(folder: Path, pattern: str) -> Iterator[str]:
    """The paths that match, relative to a folder; `**` stands for any folders, linked ones too."""
    parts = pattern.split("/")
    if "**" not in parts:
        yield from glob.iglob(pattern, root_dir=folder)
        return
    place = parts.index("**")
    tail = "/".join(parts[place + 1 :] or ["*"])
    for top in glob.iglob("/".join(parts[:place]), root_dir=folder) if place else ["."]:
        for here in _folders(os.path.join(folder, top)):
            yield from _matches(folder, f"{glob.escape(os.path.relpath(here, folder))}/{tail}")


def _folders(top: str) -> Iterator[str]:
    """A folder and all below it; hidden ones left out, and links that lead back to where they are."""
    for here, below, _ in os.walk(top, followlinks=True):
        yield here
        real = os.path.realpath(here) + os.sep
        below[:] = [
            name
            for name in below
            if not name.startswith(".") and not real.startswith(os.path.realpath(os.path.join(here, name)) + os.sep)
        ]


def relative_name(path: str | os.PathLike[str], folder: Path) -> str:
    """A path relative to a graph's folder, with forward slashes."""
    return Path(os.path.relpath(os.path.join(folder, path), folder)).as_posix()


def unfold(pattern: str) -> list[str]:
    """A pattern's alternatives, one pattern each.

    >>> unfold("props/*.{obj,ply}")
    ['props/*.obj', 'props/*.ply']
    """
    patterns = [pattern]
    while any(ALTERNATIVES.search(one) for one in patterns):
        if len(patterns) > MOST_PATTERNS:
            raise GraphError(f"{pattern[:80]}: more than {MOST_PATTERNS} alternatives")
        nested = []
        for one in patterns:
            group = ALTERNATIVES.search(one)
            nested += (
                [one[: group.start()] + choice + one[group.end() :] for choice in group[1].split(",")]
                if group
                else [one]
            )
        patterns = nested
    return patterns


def _fixed_part(pattern: str) -> str:
    """The folders of a pattern that hold no wildcard."""
    parts = PurePosixPath(pattern).parts[:-1]
    wild = next((place for place, part in enumerate(parts) if WILD.search(part)), len(parts))
    return str(PurePosixPath(*parts[:wild])) if wild else ""
