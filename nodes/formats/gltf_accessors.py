"""Typed views of glTF buffers (specification, 3.6.2): strides, sparse substitution, normalised integers."""

from __future__ import annotations

from typing import Any

import numpy as np
from tangentry.nodes.formats.gltf_container import EXPORT_AGAIN
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

COMPONENTS: dict[int, np.dtype[Any]] = {
    5120: np.dtype("i1"),
    5121: np.dtype("u1"),
    5122: np.dtype("<i2"),
    5123: np.dtype("<u2"),
    5125: np.dtype("<u4"),
    5126: np.dtype("<f4"),
}
WIDTHS = {"SCALAR": 1, "VEC2": 2, "VEC3": 3, "VEC4": 4, "MAT2": 4, "MAT3": 9, "MAT4": 16}
MOST = 2**24  # elements of an accessor without data of its own: sparse or zero
MOST_BYTES = 2**32  # of all accessors together: many may read the same bytes again and again


class Accessors:
    """The accessors of one document, each decoded once."""

    def __init__(self, file: InputFile, document: dict[str, Any], buffers: list[Array]) -> None:
        self.file, self.buffers = file, buffers
        self.list: list[dict[str, Any]] = document.get("accessors", [])
        self.views: list[dict[str, Any]] = document.get("bufferViews", [])
        self._raw: dict[int, Array] = {}
        self._values: dict[int, Array] = {}
        self._room = MOST_BYTES

    def entry(self, number: int, place: str) -> dict[str, Any]:
        """The accessor's own JSON. Raises InputError where there is no such accessor."""
        if number >= len(self.list):
            raise InputError(
                self.file, place, f"accessor {number} does not exist (there are {len(self.list)})", EXPORT_AGAIN
            )
        return self.list[number]

    def raw(self, number: int, place: str) -> Array:
        """The elements as stored, (count, width) of the component type, sparse ones put in."""
        if number not in self._raw:
            entry = self.entry(number, place)
            self._raw[number] = self._read(entry, f"accessor {number} ({place})")
        return self._raw[number]

    def values(self, number: int, place: str) -> Array:
        """The elements as (count, width) float32; normalised integers in 0..1 or -1..1 (specification, 3.11)."""
        if number not in self._values:
            raw = self.raw(number, place)
            if raw.dtype.kind == "f":
                values = raw
            elif self.entry(number, place).get("normalized"):
                values = np.maximum(raw.astype(np.float32) / np.float32(np.iinfo(raw.dtype).max), np.float32(-1))
            else:
                values = raw.astype(np.float32)
            self._values[number] = np.ascontiguousarray(values, np.float32)
        return self._values[number]

    def _read(self, entry: dict[str, Any], place: str) -> Array:
        component = COMPONENTS.get(entry.get("componentType", 0))
        width, count = WIDTHS.get(entry.get("type", "")), entry.get("count", 0)
        if component is None or width is None:
            raise InputError(
                self.file,
                place,
                f"componentType {entry.get('componentType')!r}, type {entry.get('type')!r}",
                EXPORT_AGAIN,
            )
        if count < 1:
            raise InputError(self.file, place, f"count is {count}", EXPORT_AGAIN)
        self._room -= count * width * component.itemsize
        if self._room < 0:
            raise InputError(
                self.file, place, f"with it the accessors hold more than {MOST_BYTES} bytes", "split the file"
            )
        if "bufferView" in entry:
            elements = self._elements(entry["bufferView"], entry.get("byteOffset", 0), component, width, count, place)
        elif count <= MOST:
            elements = np.zeros((count, width), component)
        else:
            raise InputError(self.file, place, f"{count} elements without data", EXPORT_AGAIN)
        return self._substituted(elements, entry["sparse"], place) if "sparse" in entry else elements

    def _elements(self, view: int, offset: int, component: np.dtype[Any], width: int, count: int, place: str) -> Array:
        """(count, width) elements of a buffer view, without a copy where the bytes allow it."""
        content = self.view(view, place)
        size = component.itemsize * width
        stride = self.views[view].get("byteStride") or size
        if stride < size:
            raise InputError(self.file, place, f"byteStride {stride}, but elements of {size} bytes", EXPORT_AGAIN)
        if offset + stride * (count - 1) + size > len(content):
            there = max(0, (len(content) - offset - size) // stride + 1)
            raise InputError(
                self.file, place, f"{count} elements announced, {there} fit into bufferView {view}", EXPORT_AGAIN
            )
        rows = np.lib.stride_tricks.as_strided(content[offset:], (count, size), (stride, 1), writeable=False)
        return np.ascontiguousarray(rows).view(component)

    def view(self, number: int, place: str) -> Array:
        """The bytes of a buffer view, (size,) uint8."""
        if number >= len(self.views):
            raise InputError(
                self.file, place, f"bufferView {number} does not exist (there are {len(self.views)})", EXPORT_AGAIN
            )
        view, place = self.views[number], f"bufferView {number}"
        buffer, offset, size = view.get("buffer", 0), view.get("byteOffset", 0), view.get("byteLength", 0)
        if buffer >= len(self.buffers):
            raise InputError(
                self.file, place, f"buffer {buffer} does not exist (there are {len(self.buffers)})", EXPORT_AGAIN
            )
        if offset + size > len(self.buffers[buffer]):
            raise InputError(
                self.file,
                place,
                f"bytes {offset} + {size} lie outside buffer {buffer}, which has {len(self.buffers[buffer])}",
                EXPORT_AGAIN,
            )
        return self.buffers[buffer][offset : offset + size]

    def _substituted(self, elements: Array, sparse: dict[str, Any], place: str) -> Array:
        at, new, count = sparse.get("indices", {}), sparse.get("values", {}), sparse.get("count", 0)
        component = COMPONENTS.get(at.get("componentType", 0))
        if count < 1 or component is None or component.kind != "u" or "bufferView" not in at or "bufferView" not in new:
            raise InputError(self.file, place, "its sparse part is incomplete", EXPORT_AGAIN)
        view, offset = at["bufferView"], at.get("byteOffset", 0)
        rows = self._elements(view, offset, component, 1, count, f"{place}, sparse indices")[:, 0]
        view, offset = new["bufferView"], new.get("byteOffset", 0)
        width = elements.shape[1]
        values = self._elements(view, offset, elements.dtype, width, count, f"{place}, sparse values")
        if int(rows.max()) >= len(elements):
            raise InputError(
                self.file, place, f"sparse index {int(rows.max())}, but it has {len(elements)} elements", EXPORT_AGAIN
            )
        elements = elements.copy()
        elements[rows] = values
        return elements
