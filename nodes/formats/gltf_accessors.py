"""Typed views of glTF buffers (specification, 3.6.2): strides, sparse substitution, normalised integers; every bound checked."""

from __future__ import annotations

from typing import Any

import numpy as np
from tangentry.nodes.formats.gltf_container import EXPORT_AGAIN, entries
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

COMPONENTS = {
    5120: np.dtype("i1"),
    5121: np.dtype("u1"),
    5122: np.dtype("<i2"),
    5123: np.dtype("<u2"),
    5125: np.dtype("<u4"),
    5126: np.dtype("<f4"),
}
WIDTHS = {"SCALAR": 1, "VEC2": 2, "VEC3": 3, "VEC4": 4, "MAT2": 4, "MAT3": 9, "MAT4": 16}
MOST = 2**28  # elements of an accessor without data of its own: sparse or zero


class Accessors:
    """The accessors of one document, each decoded once."""

    def __init__(self, file: InputFile, document: dict[str, Any], buffers: list[Array]) -> None:
        self.file, self.buffers = file, buffers
        self.list = entries(file, document, "accessors")
        self.views = entries(file, document, "bufferViews")
        self._raw: dict[int, Array] = {}
        self._values: dict[int, Array] = {}

    def entry(self, number: object, place: str) -> dict[str, Any]:
        """The accessor's own JSON. Raises InputError where there is no such accessor."""
        if not isinstance(number, int) or not 0 <= number < len(self.list):
            raise InputError(
                self.file, place, f"accessor {number!r} does not exist (there are {len(self.list)})", EXPORT_AGAIN
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
        component, width, count = (
            COMPONENTS.get(entry.get("componentType", 0)),
            WIDTHS.get(str(entry.get("type"))),
            entry.get("count"),
        )
        if component is None or width is None:
            raise InputError(
                self.file,
                place,
                f"componentType {entry.get('componentType')!r}, type {entry.get('type')!r}",
                EXPORT_AGAIN,
            )
        if not isinstance(count, int) or count < 1:
            raise InputError(self.file, place, f"count is {count!r}", EXPORT_AGAIN)
        if "bufferView" in entry:
            elements = self._elements(entry["bufferView"], entry.get("byteOffset", 0), component, width, count, place)
        elif count <= MOST:
            elements = np.zeros((count, width), component)
        else:
            raise InputError(self.file, place, f"{count} elements without data", EXPORT_AGAIN)
        return self._substituted(elements, entry["sparse"], place) if "sparse" in entry else elements

    def _elements(
        self, view: object, offset: object, component: np.dtype[Any], width: int, count: int, place: str
    ) -> Array:
        """(count, width) elements of a buffer view, without a copy where the bytes allow it."""
        if not isinstance(view, int) or not 0 <= view < len(self.views):
            raise InputError(
                self.file, place, f"bufferView {view!r} does not exist (there are {len(self.views)})", EXPORT_AGAIN
            )
        stride = self.views[view].get("byteStride") or component.itemsize * width
        content = self.view(view)
        size = component.itemsize * width
        if not isinstance(offset, int) or not isinstance(stride, int) or offset < 0 or stride < size:
            raise InputError(self.file, place, f"byteOffset {offset!r}, byteStride {stride!r}", EXPORT_AGAIN)
        if offset + stride * (count - 1) + size > len(content):
            there = max(0, (len(content) - offset - size) // stride + 1)
            raise InputError(
                self.file, place, f"{count} elements announced, {there} fit into bufferView {view}", EXPORT_AGAIN
            )
        rows = np.lib.stride_tricks.as_strided(content[offset:], (count, size), (stride, 1), writeable=False)
        return np.ascontiguousarray(rows).view(component)

    def view(self, number: int) -> Array:
        """The bytes of a buffer view, (size,) uint8."""
        view, place = self.views[number], f"bufferView {number}"
        buffer, offset, size = view.get("buffer"), view.get("byteOffset", 0), view.get("byteLength")
        if not isinstance(buffer, int) or not 0 <= buffer < len(self.buffers):
            raise InputError(
                self.file, place, f"buffer {buffer!r} does not exist (there are {len(self.buffers)})", EXPORT_AGAIN
            )
        if (
            not isinstance(offset, int)
            or not isinstance(size, int)
            or offset < 0
            or size < 0
            or offset + size > len(self.buffers[buffer])
        ):
            raise InputError(
                self.file,
                place,
                f"bytes {offset!r} + {size!r} lie outside buffer {buffer}, which has {len(self.buffers[buffer])}",
                EXPORT_AGAIN,
            )
        return self.buffers[buffer][offset : offset + size]

    def _substituted(self, elements: Array, sparse: Any, place: str) -> Array:
        try:
            count, at, new = sparse["count"], sparse["indices"], sparse["values"]
            component = COMPONENTS[at["componentType"]]
            rows = self._elements(
                at["bufferView"], at.get("byteOffset", 0), component, 1, count, f"{place}, sparse indices"
            )[:, 0]
            values = self._elements(
                new["bufferView"],
                new.get("byteOffset", 0),
                elements.dtype,
                elements.shape[1],
                count,
                f"{place}, sparse values",
            )
        except (KeyError, TypeError, ValueError) as error:
            raise InputError(self.file, place, f"its sparse part is incomplete ({error})", EXPORT_AGAIN) from None
        if rows.size and int(rows.max()) >= len(elements):
            raise InputError(
                self.file, place, f"sparse index {int(rows.max())}, but it has {len(elements)} elements", EXPORT_AGAIN
            )
        elements = elements.copy()
        elements[rows] = values
        return elements
