"""A glTF document under construction: JSON and the contents of its buffer views, packed into buffers at the end."""

from __future__ import annotations

import base64
import json
from typing import Any
from urllib.parse import quote

import numpy as np
from tangentry.nodes.formats.gltf_buffers import ALIGN, joined
from tangentry.nodes.geometry.packing import BYTE, SHORT, pack_vectors
from tangentry.nodes.model import Image
from tangentry.pipeline.flow import Array, OutFile

GENERATOR = "tangentry"
TYPE_CODES = {
    np.dtype("i1"): 5120,
    np.dtype("u1"): 5121,
    np.dtype("<i2"): 5122,
    np.dtype("<u2"): 5123,
    np.dtype("<u4"): 5125,
    np.dtype("<f4"): 5126,
}
VECTORS = {1: "SCALAR", 2: "VEC2", 3: "VEC3", 4: "VEC4"}
QUANTISED = "KHR_mesh_quantization"
VERTICES, INDICES = 34962, 34963  # buffer view targets


class Builder:
    """Takes views and accessors, gives files."""

    def __init__(self, vectors: str, document: dict[str, Any] | None = None, views: list[Array] | None = None) -> None:
        self.most = {"short": SHORT, "byte": BYTE}.get(vectors, 0)  # of the codes for directions; 0: they stay float
        self.document: dict[str, Any] = (
            document if document is not None else {"asset": {"version": "2.0", "generator": GENERATOR}}
        )
        self._views: list[Array] = views if views is not None else []
        self.images: list[Image] = []  # what the document's images hold, one for one

    def list(self, name: str) -> list[dict[str, Any]]:
        """A top-level list, made if it is not there."""
        found: list[dict[str, Any]] = self.document.setdefault(name, [])
        return found

    def view(self, content: Array, **more: int) -> int:
        """Add a buffer view of these bytes, (size,) uint8; gives its number."""
        self.list("bufferViews").append({"buffer": 0, "byteLength": len(content), **more})
        self._views.append(content)
        return len(self._views) - 1

    def accessor(self, values: Array, replaces: int | None = None, **more: Any) -> int:
        """Add an accessor of (count, width) vertex data, or put it in another's place; gives its number."""
        size = values.dtype.itemsize * values.shape[1]
        stride = (size + ALIGN - 1) // ALIGN * ALIGN
        rows = np.ascontiguousarray(values).view(np.uint8).reshape(len(values), size)
        if stride != size:
            rows = np.concatenate([rows, np.zeros((len(rows), stride - size), np.uint8)], axis=1)
        strided = {"byteStride": stride} if stride != size else {}
        view = self.view(rows.reshape(-1), target=VERTICES, **strided)
        return self._entry(view, values, replaces, **more)

    def directions(self, values: Array, replaces: int | None = None) -> int:
        """Add an accessor of normals or tangents, in the form that was asked for (KHR_mesh_quantization)."""
        if not self.most:
            return self.accessor(values, replaces)
        for name in ("extensionsUsed", "extensionsRequired"):
            listed: list[str] = self.document.setdefault(name, [])
            if QUANTISED not in listed:
                listed.append(QUANTISED)
        return self.accessor(pack_vectors(values, self.most), replaces, normalized=True)

    def indices(self, corners: Array, vertices: int, replaces: int | None = None) -> int:
        """Add an accessor of indices, of the smallest type that holds them; gives its number."""
        kind = (
            np.uint8
            if vertices < 256 and replaces is not None and self._component(replaces) == 5121
            else np.uint16
            if vertices < 65536
            else np.uint32
        )
        values = corners.astype(kind)[:, None]
        return self._entry(self.view(values.view(np.uint8).reshape(-1), target=INDICES), values, replaces)

    def _component(self, accessor: int) -> int:
        return int(self.list("accessors")[accessor]["componentType"])

    def _entry(self, view: int, values: Array, replaces: int | None, **more: Any) -> int:
        entry = {
            "bufferView": view,
            "componentType": TYPE_CODES[values.dtype.newbyteorder("<")],
            "count": len(values),
            "type": VECTORS[values.shape[1]],
            **more,
        }
        accessors = self.list("accessors")
        if replaces is None:
            accessors.append(entry)
            return len(accessors) - 1
        kept = {name: value for name, value in accessors[replaces].items() if name in ("name", "extras", "extensions")}
        accessors[replaces] = kept | entry
        return replaces

    def files(self, name: str, binary: bool) -> tuple[OutFile, ...]:
        """The document as a file of that name: GLB, or JSON with its buffers in files beside it, `stem.bin` first."""
        self._drop_unused_views()
        bodies = joined(self.document, self._views)
        beside = []
        for number, body in enumerate(bodies):
            if not binary:
                beside.append(OutFile(buffer_name(name, number), body))
                self.document["buffers"][number]["uri"] = quote(beside[-1].name)
            elif number > 0:  # a GLB file has room for the first one only
                coded = base64.b64encode(body.tobytes()).decode()
                self.document["buffers"][number]["uri"] = f"data:application/octet-stream;base64,{coded}"
        for empty in [name for name, value in self.document.items() if value == [] and name != "scenes"]:
            del self.document[empty]
        text = json.dumps(self.document, ensure_ascii=False, separators=(",", ":")).encode()
        if binary:
            return (OutFile(name, _glb(text, bodies[0] if bodies else np.zeros(0, np.uint8))),)
        return (OutFile(name, np.frombuffer(text, np.uint8)), *beside)

    def _drop_unused_views(self) -> None:
        """Leave out the views that nothing names; whatever names a view in glTF and its extensions says bufferView."""
        mentions: list[dict[str, Any]] = []
        waiting: list[Any] = [value for name, value in self.document.items() if name != "bufferViews"]
        while waiting:
            data = waiting.pop()
            if isinstance(data, dict) and type(data.get("bufferView")) is int and data["bufferView"] < len(self._views):
                mentions.append(data)
            waiting += data.values() if isinstance(data, dict) else data if isinstance(data, list) else ()
        used = sorted({mention["bufferView"] for mention in mentions})
        renumbered = {old: new for new, old in enumerate(used)}
        for mention in mentions:
            mention["bufferView"] = renumbered[mention["bufferView"]]
        views = self.document.get("bufferViews", [])
        self._views = [self._views[old] for old in used]
        if views:
            self.document["bufferViews"] = [views[old] for old in used]


def buffer_name(name: str, number: int) -> str:
    """The file of a buffer beside the document of that name."""
    stem = name.rpartition(".")[0]
    return f"{stem}_{number}.bin" if number else f"{stem}.bin"


def _glb(text: bytes, body: Array) -> Array:
    """The two chunks of a GLB file (specification, 4.4)."""
    text += b" " * (-len(text) % 4)
    chunks = [np.array([len(text), 0x4E4F534A], "<u4").view(np.uint8), np.frombuffer(text, np.uint8)]
    if len(body):
        chunks += [np.array([len(body), 0x004E4942], "<u4").view(np.uint8), body]
    size = 12 + sum(len(chunk) for chunk in chunks)
    return np.concatenate([np.array([0x46546C67, 2, size], "<u4").view(np.uint8), *chunks])


def bounds(values: Array) -> dict[str, Any]:
    """`min` and `max` of vertex data, as POSITION needs them."""
    return {"min": values.min(axis=0).tolist(), "max": values.max(axis=0).tolist()}
