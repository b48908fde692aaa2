"""Where node kinds live: installed packages, and the folder that a graph file names in `kinds:`; treated alike.

Packages are found through the entry-point group `tangentry.nodes`, this package's own nodes among them. The modules
of a project's folder may import their neighbours plainly (`import helper`) or as `from . import helper`, at their top
or inside a function. Two projects in one process may have neighbours of the same name, so only one project's are at
hand at a time.
"""

from __future__ import annotations

import contextlib
import dataclasses
import importlib
import importlib.machinery
import importlib.util
import re
import sys
import types
from collections.abc import Callable, Iterator
from functools import cached_property, wraps
from importlib.metadata import entry_points
from pathlib import Path
from typing import Any

from tangentry.pipeline.errors import GraphError
from tangentry.pipeline.sources import digest_files, reached, versions_of
from tangentry.pipeline.values import digest_text

GROUP = "tangentry.nodes"
PROJECT = "tangentry_project_"  # names of the packages that projects' folders become


@dataclasses.dataclass(frozen=True)
class Source:
    """The source that a kind depends on, as it was when its digest was taken."""

    digest: str
    files: tuple[Path, ...]
    versions: tuple[object, ...]

    @property
    def is_current(self) -> bool:
        """Is it as it was? If not, what a function imports only when it is called may be newer than the digest."""
        return self.versions == versions_of(self.files)


@dataclasses.dataclass(frozen=True)
class Home:
    """A place where kinds live: the files of one package or folder."""

    package: str
    folder: Path

    @property
    def _is_project(self) -> bool:
        return self.package.startswith(PROJECT)

    @cached_property
    def _outermost(self) -> tuple[str, Path]:
        """The package that holds this one at the outermost, and its folder: a kind's source may lie anywhere in it."""
        package, folder = self.package, self.folder
        while "." in package and (folder.parent / "__init__.py").is_file():
            package, folder = package.rpartition(".")[0], folder.parent
        return "" if self._is_project else package, folder

    def files(self) -> dict[str, Path]:
        """The files that hold a function of their own name."""
        found = {}
        for path in sorted(self.folder.glob("*.py")):
            definition = rf"^def {re.escape(path.stem)}\("
            if not path.stem.startswith("_") and re.search(definition, path.read_text("utf-8", "replace"), re.M):
                found[path.stem] = path
        return found

    def source(self, path: Path) -> Source:
        """The source that a file depends on."""
        package, folder = self._outermost
        files = tuple(sorted(reached(folder, path, package)))
        versions = versions_of(files)  # before they are read: a change from now on is noticed
        return Source(digest_files(folder, files), files, versions)

    def refresh(self) -> None:
        """Let everything be imported anew if anything in the package has changed since it was last imported."""
        _, folder = self._outermost
        now = digest_files(folder, sorted(folder.glob("**/*.py")))
        if _IMPORTED.setdefault(folder, now) != now:
            for name in [self.package, *(name for name, _ in _modules_below(folder))]:
                sys.modules.pop(name, None)
            _PUT_AWAY.pop(folder, None)
            _IMPORTED[folder] = now

    def load(self, path: Path) -> Callable[..., Any]:
        """The function of a file."""
        if not self._is_project:
            function: Callable[..., Any] = getattr(importlib.import_module(f"{self.package}.{path.stem}"), path.stem)
            return function
        _bring_to_hand(self.folder)
        return self._at_hand(getattr(self._project_module(path.stem), path.stem))

    def _project_module(self, name: str) -> types.ModuleType:
        if self.package not in sys.modules:
            spec = importlib.machinery.ModuleSpec(self.package, None, is_package=True)
            spec.submodule_search_locations = [str(self.folder)]
            sys.modules[self.package] = importlib.util.module_from_spec(spec)
        importlib.invalidate_caches()
        return importlib.import_module(f"{self.package}.{name}")

    def _at_hand(self, function: Callable[..., Any]) -> Callable[..., Any]:
        """The function with its neighbours at hand when it is called: it may import some only then."""

        @wraps(function)
        def call(*given: Any, **named: Any) -> Any:
            _bring_to_hand(self.folder)
            return function(*given, **named)

        return call


_IMPORTED: dict[Path, str] = {}  # folder -> digest of its source when it was imported
_AT_HAND: list[Path] = []  # the project whose modules are at hand
_PUT_AWAY: dict[Path, dict[str, types.ModuleType]] = {}  # plainly named modules of the other projects


def installed_homes() -> Iterator[Home]:
    """The packages that are installed. Raises GraphError where an entry point names none."""
    for entry in sorted(entry_points(group=GROUP)):
        try:
            spec = importlib.util.find_spec(entry.value)
        except (ImportError, ValueError):
            spec = None
        if spec is None or not spec.submodule_search_locations:
            raise GraphError(
                f'the entry point for "{entry.value}" (group {GROUP}) names no package; correct or uninstall it'
            )
        yield Home(entry.value, Path(next(iter(spec.submodule_search_locations))).resolve())


def project_home(folder: Path) -> Home:
    """The folder of a project's own kinds. Raises GraphError where there is none."""
    if not folder.is_dir():
        raise GraphError(f"{folder}: there is no such folder of node kinds")
    real = folder.resolve()
    return Home(PROJECT + digest_text(str(real))[:16], real)


def _bring_to_hand(folder: Path) -> None:
    """Let plain imports find a project's modules, last of all; those of another project are put away."""
    if [folder] == _AT_HAND:
        return
    for other in _AT_HAND:
        with contextlib.suppress(ValueError):
            sys.path.remove(str(other))
        plain = [(name, module) for name, module in _modules_below(other) if not name.startswith(PROJECT)]
        _PUT_AWAY[other] = {name: sys.modules.pop(name) for name, _ in plain}
    sys.path.append(str(folder))
    sys.modules.update(_PUT_AWAY.pop(folder, {}))
    _AT_HAND[:] = [folder]


def _modules_below(folder: Path) -> Iterator[tuple[str, types.ModuleType]]:
    """Imported modules whose files lie below a folder, less those of an environment that lies there too."""
    for name, module in list(sys.modules.items()):
        file = Path(getattr(module, "__file__", None) or "/")
        if file.is_relative_to(folder) and "site-packages" not in file.relative_to(folder).parts:
            yield name, module
