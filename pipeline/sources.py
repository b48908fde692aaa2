"""The digest of the source that a node kind depends on: its file, and what that imports inside its package.

Imports are read from the text, at any depth of a function, and followed; nothing is run. Files beside a module that
share its stem (the frame and the look of a page) are part of its source.
"""

from __future__ import annotations

import ast
import glob
import os
from collections.abc import Iterable
from functools import lru_cache
from pathlib import Path

from tangentry.pipeline.values import digest_text


def digest_files(folder: Path, files: Iterable[Path]) -> str:
    """Digest of the names and the text of source files in a folder."""
    return digest_text("".join(f"{path.relative_to(folder).as_posix()}\n{_text(*_version(path))}\n" for path in files))


def versions_of(files: Iterable[Path]) -> tuple[object, ...]:
    """What changes when a file does: name, size, modification time."""
    return tuple(_version(path) if path.exists() else None for path in files)


def reached(folder: Path, file: Path, package: str = "") -> set[Path]:
    """The files of a package's folder that a file of it imports, itself included, transitively."""
    found: set[Path] = set()
    waiting = [file]
    while waiting:
        path = waiting.pop()
        if path in found:
            continue
        found |= {path, *_beside(path)}
        here = path.parent.relative_to(folder).parts
        for level, module, names in _imports(*_version(path)):
            inside = _inside(level, module, package, here)
            if inside is not None:
                waiting += _files(folder, inside, names)
    return found


def _inside(level: int, module: str, package: str, here: tuple[str, ...]) -> tuple[str, ...] | None:
    """The path, inside the package, of an imported module; None where it is outside."""
    parts = tuple(part for part in module.split(".") if part)
    if level:
        return (here[: len(here) - level + 1] if level > 1 else here) + parts
    if not package:
        return parts
    own = tuple(package.split("."))
    return parts[len(own) :] if parts[: len(own)] == own else None


def _files(folder: Path, inside: tuple[str, ...], names: tuple[str, ...]) -> list[Path]:
    """The files that `from inside import names` runs: packages on the way, the module, and modules among the names."""
    steps = [folder.joinpath(*inside[:count], "__init__.py") for count in range(1, len(inside) + 1)]
    module = folder.joinpath(*inside)
    steps += [module.with_suffix(".py")] if inside else []
    steps += [module / f"{name}.py" for name in names] + [module / name / "__init__.py" for name in names]
    return [path for path in steps if path.is_file()]


def _beside(path: Path) -> list[Path]:
    """The data files of a module, which it finds by its own place: those of its stem that aren't Python's own."""
    if "__file__" not in _text(*_version(path)):
        return []
    return [one for one in path.parent.glob(f"{glob.escape(path.stem)}.*") if one.suffix not in (".py", ".pyc", ".pyi")]


def _version(path: Path) -> tuple[str, int, int]:
    stat = os.stat(path)
    return str(path), stat.st_size, stat.st_mtime_ns


@lru_cache(maxsize=4096)
def _text(path: str, size: int, mtime: int) -> str:
    return Path(path).read_text("utf-8", errors="replace")


@lru_cache(maxsize=4096)
def _imports(path: str, size: int, mtime: int) -> tuple[tuple[int, str, tuple[str, ...]], ...]:
    """Every import of a file: (level, module, names)."""
    try:
        tree = ast.parse(_text(path, size, mtime))
    except SyntaxError:
        return ()  # importing it will say so
    found: list[tuple[int, str, tuple[str, ...]]] = []
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            found += [(0, alias.name, ()) for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            found.append((node.level, node.module or "", tuple(alias.name for alias in node.names)))
    return tuple(found)
