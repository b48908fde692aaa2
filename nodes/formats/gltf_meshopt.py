"""Buffer views compressed by EXT_meshopt_compression or its KHR successor, unpacked by meshopt, an extra."""

from __future__ import annotations

from typing import Any

import numpy as np
from tangentry.nodes.formats.gltf_container import EXPORT_AGAIN
from tangentry.nodes.formats.gltf_draco import unlist
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

NAMES = ("EXT_meshopt_compression", "KHR_meshopt_compression")
NOTE = "its meshopt-compressed data was unpacked, and goes out uncompressed"
WHOLE = ("buffer", "byteLength", "byteStride", "count")
DENSEST = 2048  # bytes that one may become: its vertex codec spends a quarter of a byte on 256 at least


def unpack(file: InputFile, document: dict[str, Any], buffers: list[Array]) -> bool:
    """Unpack a document in place: compressed buffer views get buffers of their own; says whether there were any.

    Raises InputError where the extra is not installed, or the compressed data can't be read.
    """
    found = False
    for number, view in enumerate(document.get("bufferViews", [])):
        for name in NAMES:
            if name in view.get("extensions", {}):
                content = _decoded(file, f"bufferView {number}, {name}", _without(view, name), buffers)
                document["buffers"].append({"byteLength": len(content)})
                buffers.append(content)
                view |= {"buffer": len(buffers) - 1, "byteLength": len(content)}
                view.pop("byteOffset", None)
                found = True
    if found:
        for name in NAMES:
            unlist(document, name)
            for buffer in document["buffers"]:  # it tells that its data stands in for what is compressed
                if name in buffer.get("extensions", {}):
                    _without(buffer, name)
    return found


def _without(entry: dict[str, Any], name: str) -> Any:
    """Take an extension out; gives it."""
    extension = entry["extensions"].pop(name)
    if not entry["extensions"]:
        del entry["extensions"]
    return extension


def _decoded(file: InputFile, place: str, extension: dict[str, Any], buffers: list[Array]) -> Array:
    try:
        import meshopt
    except ImportError:
        raise InputError(
            file, place, "meshopt-compressed data needs an extra", "pip install 'tangentry[meshopt]', or export without"
        ) from None
    numbers: list[Any] = [extension.get(name) for name in WHOLE] + [extension.get("byteOffset", 0)]
    if not all(type(number) is int and number >= 0 for number in numbers):
        raise InputError(file, place, f"{', '.join(WHOLE)} are not all whole numbers", EXPORT_AGAIN)
    buffer, size, stride, count, offset = numbers
    if buffer >= len(buffers) or offset + size > len(buffers[buffer]):
        raise InputError(file, place, f"bytes {offset} + {size} of buffer {buffer} are not there", EXPORT_AGAIN)
    if not 0 < count * stride <= DENSEST * size:
        raise InputError(file, place, f"{count} elements of {stride} bytes can't be in {size} bytes", EXPORT_AGAIN)
    content = buffers[buffer][offset : offset + size].tobytes()
    try:
        rows = meshopt.decode_gltf_buffer(content, count, stride, extension.get("mode"), extension.get("filter"))
    except (ValueError, TypeError, RuntimeError) as error:
        raise InputError(file, place, f"it can't be decoded ({error})", EXPORT_AGAIN) from None
    return np.ascontiguousarray(rows).view(np.uint8).reshape(-1)
