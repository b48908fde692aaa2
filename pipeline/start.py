"""A small project to begin from, written into a folder: a graph file and a prop, ready to build."""

from __future__ import annotations

from importlib.resources import files
from importlib.resources.abc import Traversable
from pathlib import Path

from tangentry.pipeline.errors import GraphError
from tangentry.pipeline.writing import write_whole

STARTER = "tangentry.graphs.start"


def start(folder: Path) -> list[Path]:
    """Write the starter project; gives the files. Raises GraphError where one is there already, and writes nothing."""
    found = list(_files(files(STARTER), Path()))
    there = [folder / path for path, _ in found if (folder / path).exists()]
    if there:
        raise GraphError(f"{there[0]}: is there already; name an empty or a new folder")
    for path, content in found:
        write_whole(folder / path, lambda file, content=content: file.write(content))  # type: ignore[misc]
    return [folder / path for path, _ in found]


def _files(place: Traversable, at: Path) -> list[tuple[Path, bytes]]:
    found: list[tuple[Path, bytes]] = []
    for one in sorted(place.iterdir(), key=lambda one: one.name):
        if one.is_dir() and one.name != "__pycache__":
            found += _files(one, at / one.name)
        elif one.is_file() and one.name != "__init__.py":
            found.append((at / one.name, one.read_bytes()))
    return found
