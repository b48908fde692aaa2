"""glTF files for tests: made here byte by byte, and read by a plain reader of their own."""

from __future__ import annotations

import base64
import json
import struct
from pathlib import Path
from typing import Any
from urllib.parse import quote, unquote

import numpy as np

CODES = {"i1": 5120, "u1": 5121, "i2": 5122, "u2": 5123, "u4": 5125, "f4": 5126}
KINDS = {code: np.dtype(f"<{kind}") for kind, code in CODES.items()}
WIDTHS = {"SCALAR": 1, "VEC2": 2, "VEC3": 3, "VEC4": 4, "MAT2": 4, "MAT3": 9, "MAT4": 16}
PIXEL = base64.b64decode(
    "iVBORw0KGgoAAAANSUhEUgAAAAEAAAABCAIAAACQd1PeAAAADElEQVQImWNoaPgPAAODAgBVuNY/AAAAAElFTkSuQmCC"
)  # one texel of (128, 128, 255)


class Making:
    """A document under construction, its one buffer growing."""

    def __init__(self) -> None:
        self.json: dict[str, Any] = {"asset": {"version": "2.0"}, "accessors": [], "bufferViews": [], "meshes": []}
        self.data = b""

    def view(self, content: bytes, **more: Any) -> int:
        """Add a buffer view."""
        self.data += b"\0" * (-len(self.data) % 4)
        self.json["bufferViews"].append({"buffer": 0, "byteOffset": len(self.data), "byteLength": len(content), **more})
        self.data += content
        return len(self.json["bufferViews"]) - 1

    def accessor(self, values: Any, kind: str, type: str, **more: Any) -> int:
        """Add an accessor with a view of its own, POSITION-like ones with their bounds."""
        array = np.asarray(values, f"<{kind}").reshape(-1, WIDTHS[type])
        if more.pop("bounds", False):
            more |= {"min": array.min(axis=0).tolist(), "max": array.max(axis=0).tolist()}
        padded = np.zeros((len(array), -(-array.itemsize * array.shape[1] // 4) * 4), np.uint8)
        padded[:, : array.itemsize * array.shape[1]] = array.view(np.uint8).reshape(len(array), -1)
        tight = type == "SCALAR" or padded.shape[1] == array.itemsize * array.shape[1]
        content = array.tobytes() if tight else padded.tobytes()
        view = self.view(content, **({} if tight else {"byteStride": padded.shape[1]}))
        return self.entry(view, 0, array, type, **more)

    def entry(self, view: int | None, offset: int, array: np.ndarray, type: str, **more: Any) -> int:
        """Add an accessor of part of a view."""
        entry = {"componentType": CODES[array.dtype.str[1:]], "count": len(array), "type": type, **more}
        if view is not None:
            entry |= {"bufferView": view, "byteOffset": offset}
        self.json["accessors"].append(entry)
        return len(self.json["accessors"]) - 1

    def write(self, path: Path, buffer: str = "") -> Path:
        """Write .glb, or .gltf whose buffer is a data URI, or a file where it is given a name."""
        first, *others = self.json.get("buffers", [{}])
        document = {**self.json, "buffers": [{"byteLength": len(self.data), **first}, *others]}
        if path.suffix == ".glb":
            path.write_bytes(glb(document, self.data))
            return path
        document["buffers"][0]["uri"] = quote(buffer) or data_uri(self.data)
        if buffer:
            (path.parent / buffer).write_bytes(self.data)
        path.write_text(json.dumps(document))
        return path


def data_uri(content: bytes) -> str:
    """Bytes in a text (RFC 2397)."""
    return "data:application/octet-stream;base64," + base64.b64encode(content).decode()


def glb(document: dict[str, Any], data: bytes) -> bytes:
    """A GLB file (glTF 2.0 specification, 4.4)."""
    text = json.dumps(document).encode()
    text += b" " * (-len(text) % 4)
    data += b"\0" * (-len(data) % 4)
    body = struct.pack("<II", len(text), 0x4E4F534A) + text + struct.pack("<II", len(data), 0x004E4942) + data
    return struct.pack("<4sII", b"glTF", 2, 12 + len(body)) + body


def meaning(path: Path) -> dict[str, Any]:
    """What a file says: its JSON with the values of accessors and the bytes of images in place of where they lie.

    Buffers and views are only where things lie, so they are left out, but for what they carry besides.
    """
    document, buffers = _read(path)
    views = document.pop("bufferViews", [])
    told = [_told(buffer) for buffer in document.pop("buffers", [])]
    for accessor in document.get("accessors", []):
        if "bufferView" in accessor:
            view = views[accessor["bufferView"]]
            accessor |= {"of view": _told(view)} if _told(view) else {}
            accessor |= {"of buffer": told[view["buffer"]]} if told[view["buffer"]] else {}
        accessor["values"] = _values(accessor, views, buffers).tobytes()
        for name in ("bufferView", "byteOffset", "sparse"):
            accessor.pop(name, None)
    for image in document.get("images", []):
        if "bufferView" in image:
            image["bytes"] = _bytes(views, buffers, image.pop("bufferView")).tobytes()
        elif image.get("uri", "").startswith("data:"):
            image["bytes"] = base64.b64decode(image.pop("uri").split(",", 1)[1])
        elif (path.parent / unquote(image["uri"])).exists():
            image["bytes"] = (path.parent / unquote(image.pop("uri"))).read_bytes()
        image.pop("mimeType", None)
    return {name: value for name, value in document.items() if value != []}


def _told(entry: dict[str, Any]) -> dict[str, Any]:
    return {name: value for name, value in entry.items() if name in ("name", "extras", "extensions")}


def _read(path: Path) -> tuple[dict[str, Any], list[np.ndarray]]:
    content, binary = path.read_bytes(), b""
    if content[:4] == b"glTF":
        size = struct.unpack("<I", content[12:16])[0]
        content, binary = content[20 : 20 + size], content[28 + size :]
    document = json.loads(content)
    buffers = []
    for buffer in document.get("buffers", []):
        uri = buffer.get("uri")
        if uri is None:
            data = binary
        elif uri.startswith("data:"):
            data = base64.b64decode(uri.split(",", 1)[1])
        else:
            data = (path.parent / unquote(uri)).read_bytes()
        buffers.append(np.frombuffer(data, np.uint8))
    return document, buffers


def _bytes(views: list[dict[str, Any]], buffers: list[np.ndarray], number: int) -> np.ndarray:
    view = views[number]
    return buffers[view["buffer"]][view.get("byteOffset", 0) :][: view["byteLength"]]


def _elements(
    views: list[dict[str, Any]],
    buffers: list[np.ndarray],
    place: dict[str, Any],
    kind: np.dtype,
    width: int,
    count: int,
) -> np.ndarray:
    data = _bytes(views, buffers, place["bufferView"])[place.get("byteOffset", 0) :]
    size = kind.itemsize * width
    stride = views[place["bufferView"]].get("byteStride") or size
    rows = [data[k * stride : k * stride + size] for k in range(count)]
    return np.frombuffer(b"".join(row.tobytes() for row in rows), kind).reshape(count, width)


def _values(accessor: dict[str, Any], views: list[dict[str, Any]], buffers: list[np.ndarray]) -> np.ndarray:
    kind, width, count = KINDS[accessor["componentType"]], WIDTHS[accessor["type"]], accessor["count"]
    if "bufferView" in accessor:
        values = _elements(views, buffers, accessor, kind, width, count).copy()
    else:
        values = np.zeros((count, width), kind)
    if "sparse" in accessor:
        sparse = accessor["sparse"]
        at, changed = sparse["indices"], sparse["count"]
        rows = _elements(views, buffers, at, KINDS[at["componentType"]], 1, changed)[:, 0]
        values[rows] = _elements(views, buffers, sparse["values"], kind, width, changed)
    return values
