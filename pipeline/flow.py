"""What a node kind needs to know of the pipeline: flow values, the files it reads, the files and findings it makes.

A flow value is a frozen dataclass of plain values and read-only arrays:

    @flow_value
    class Chart:
        corners: Array      # (corners,) int32
        area: float

A node kind is a function of flow values. It reads files through `InputFile`, which remembers everything that was
really read, and gives new files back as `Files` without touching a disk: the pipeline puts them in place.
"""

from __future__ import annotations

import dataclasses
import os
from pathlib import Path
from typing import Literal, TypeVar, dataclass_transform

import numpy as np
from tangentry.pipeline.errors import InputError

Array = np.ndarray
T = TypeVar("T")


def _freeze(value: object) -> None:
    """Make the arrays of one field read-only, in place: they keep their identity, so their digests are remembered."""
    if isinstance(value, np.ndarray):
        value.setflags(write=False)
    elif isinstance(value, (tuple, list)):
        for item in value:
            _freeze(item)
    elif isinstance(value, dict):
        for item in value.values():
            _freeze(item)


def _freeze_fields(self: object) -> None:
    for field in dataclasses.fields(self):  # type: ignore[arg-type]
        _freeze(getattr(self, field.name))


@dataclass_transform(frozen_default=True, eq_default=False)
def flow_value(cls: type[T]) -> type[T]:
    """A frozen dataclass whose arrays are made read-only; what flows along the edges of a graph.

    Fields may be None, bool, int, float, str, numpy arrays, other flow values, and tuples or str-keyed dicts of these.
    """
    if "__post_init__" not in cls.__dict__:
        cls.__post_init__ = _freeze_fields  # type: ignore[attr-defined]
    return dataclasses.dataclass(frozen=True, eq=False, repr=False)(cls)


class InputFile:
    """A file that a node may read, and the files beside it; remembers everything that was read or looked for.

    path    as it stands in messages; relative paths are taken from `root`

    `reads` maps each path, relative to the first file's folder, to the bytes read, or None where there was no file.
    """

    def __init__(self, path: str | os.PathLike[str], root: str | os.PathLike[str] = ".") -> None:
        self.path = os.fspath(path)
        self.real = Path(root) / self.path
        self.reads: dict[str, Array | None] = {}
        self._from = self.real.parent

    @staticmethod
    def of(file: InputFile | str | os.PathLike[str]) -> InputFile:
        """The file itself, or one for a plain path: nodes called from Python take either."""
        return file if isinstance(file, InputFile) else InputFile(file)

    def __str__(self) -> str:
        return self.path

    @property
    def name(self) -> str:
        """The last part of the path, suffix included."""
        return self.real.name

    @property
    def stem(self) -> str:
        """The last part of the path without its suffix."""
        return self.real.stem

    @property
    def suffix(self) -> str:
        """The suffix in lower case, with its dot."""
        return self.real.suffix.lower()

    @property
    def exists(self) -> bool:
        """Is there such a file? Looking counts as reading: a file that appears later makes the node run again."""
        try:
            if self.real.is_file():
                return True
        except OSError:  # no file can have such a name (too long), so none will appear
            return False
        if "\0" not in self.path:
            self.reads[self._key] = None
        return False

    def bytes(self) -> Array:
        """The file's content, (size,) uint8, read-only. Raises InputError where it can't be read."""
        known = self.reads.get(self._key)
        if known is None:
            try:
                content = np.fromfile(self.real, dtype=np.uint8)
            except FileNotFoundError:
                self.reads[self._key] = None
                raise InputError(
                    self, "", "there is no such file", "correct the path, or set if_missing: skip"
                ) from None
            except IsADirectoryError:
                raise InputError(self, "", "this is a folder, not a file", "name a file") from None
            except OSError as error:
                raise InputError(
                    self, "", f"can't be read ({error.strerror or error})", "check its permissions"
                ) from None
            content.setflags(write=False)
            self.reads[self._key] = content
            return content
        return known

    def beside(self, name: str) -> InputFile:
        """The file of that relative path, counted from this file's folder; what it reads is remembered here too."""
        other = InputFile(os.path.join(os.path.dirname(self.path), name))
        other.real = self.real.parent / name
        other.reads, other._from = self.reads, self._from
        return other

    def seen(self) -> list[tuple[Path, Array | None]]:
        """Every file that was read or looked for through this one, with its content."""
        return [(self._from / name, content) for name, content in self.reads.items()]

    @property
    def _key(self) -> str:
        return Path(os.path.relpath(self.real, self._from)).as_posix()


class OutputFile(str):
    """Marks a setting that names a file to be made. The node sees its last part; the pipeline knows the folder."""


@flow_value
class OutFile:
    """One file to be put in place."""

    name: str  # relative to the folder of the node's `file` setting
    content: Array  # (size,) uint8


@flow_value
class Files:
    """Files that a node made; the pipeline puts them in place and keeps them there."""

    files: tuple[OutFile, ...]


Severity = Literal["fault", "warning", "note"]
SEVERITIES: tuple[Severity, ...] = ("fault", "warning", "note")  # the worst first
VERDICTS = ("faulty", "warned", "sound")  # likewise


@flow_value
class Finding:
    """One thing found in one part of an asset: what, where, how much."""

    id: str  # stable, in the trade's words: "uv-degenerate"
    severity: str  # one of Severity; only a fault holds an asset back
    count: int  # how many elements
    what: str  # one sentence, for people
    advice: str  # what to do about it
    part: str  # name of the part, "" for the whole asset
    material: str  # name of its material
    element: str  # what `elements` number: "face", "corner", "edge", "point", "texel" or ""
    elements: Array  # (count,) int32, or fewer where listing them says nothing
    measured: Array  # (len(elements),) float32, the figure beside `limit`; may be empty
    limit: float | None  # the limit that was passed
    accepted: str = ""  # why the graph file accepts it; then it counts as a note
    charts: Array | None = None  # (len(elements),) int32: the chart each lies in, -1: none; None where there are no UVs

    @property
    def standing(self) -> str:
        """The severity it counts with: what is accepted counts as a note."""
        return "note" if self.accepted else self.severity


@flow_value
class Findings:
    """What is wrong with one asset."""

    asset: str  # the asset's name
    items: tuple[Finding, ...]
    facts: dict[str, float | str]  # counts and measures of the asset: faces, corners, vertices, frames, ...

    @property
    def faulty(self) -> bool:
        """Is there a fault that nobody accepted?"""
        return self.verdict == "faulty"

    @property
    def verdict(self) -> str:
        """One of VERDICTS."""
        standings = {item.standing for item in self.items}
        return "faulty" if "fault" in standings else "warned" if "warning" in standings else "sound"
