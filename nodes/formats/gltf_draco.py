"""Meshes compressed by Draco (KHR_draco_mesh_compression), unpacked into plain accessors by DracoPy, an extra."""

from __future__ import annotations

from typing import Any

import numpy as np
from tangentry.nodes.formats.gltf_accessors import COMPONENTS, WIDTHS, Accessors
from tangentry.nodes.formats.gltf_builder import bounds
from tangentry.nodes.formats.gltf_container import EXPORT_AGAIN
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

NAME = "KHR_draco_mesh_compression"
NOTE = "its Draco-compressed meshes were unpacked, and go out uncompressed"


def unpack(file: InputFile, document: dict[str, Any], buffers: list[Array]) -> bool:
    """Unpack a document in place: accessors of compressed primitives get buffer views; says whether there were any.

    Raises InputError where the extra is not installed, or the compressed data can't be read or is not what the
    accessors announce.
    """
    packed = [
        (f"mesh {m} primitive {p}", primitive)
        for m, mesh in enumerate(document.get("meshes", []))
        for p, primitive in enumerate(mesh.get("primitives", []))
        if NAME in primitive.get("extensions", {})
    ]
    if not packed:
        return False
    accessors = Accessors(file, document, buffers)
    for place, primitive in packed:
        _primitive(file, place, document, primitive, accessors)
    unlist(document, NAME)
    return True


def unlist(document: dict[str, Any], name: str) -> None:
    """Take an extension from the lists of those that the document uses and requires."""
    for field in ("extensionsUsed", "extensionsRequired"):
        if name in document.get(field, []):
            document[field].remove(name)
            if not document[field]:
                del document[field]


def _primitive(
    file: InputFile, place: str, document: dict[str, Any], primitive: dict[str, Any], accessors: Accessors
) -> None:
    extension = primitive["extensions"].pop(NAME)
    if not primitive["extensions"]:
        del primitive["extensions"]
    view, ids = extension.get("bufferView"), extension.get("attributes")
    if type(view) is not int or view < 0 or not isinstance(ids, dict):
        raise InputError(file, f"{place}, {NAME}", "it lacks its bufferView or attributes", EXPORT_AGAIN)
    mesh = _decoded(file, place, accessors.view(view, place).tobytes())
    for name, id in ids.items():
        found = mesh.get_attribute_by_unique_id(id) if type(id) is int and 0 <= id < 2**31 else None
        if found is None or name not in primitive.get("attributes", {}):
            raise InputError(file, f"{place}, {NAME}", f"its attribute {name} is not in the data", EXPORT_AGAIN)
        _put(file, f"{place}, {name}", document, accessors, primitive["attributes"][name], np.asarray(found["data"]))
    if "indices" in primitive:
        _put(file, f"{place}, indices", document, accessors, primitive["indices"], np.asarray(mesh.faces).reshape(-1))


def _decoded(file: InputFile, place: str, content: bytes) -> Any:
    try:
        import DracoPy
    except ImportError:
        raise InputError(
            file, NAME, "Draco-compressed meshes need an extra", "pip install 'tangentry[draco]', or export without it"
        ) from None
    try:
        mesh = DracoPy.decode(content)
    except (ValueError, TypeError, RuntimeError, DracoPy.FileTypeException) as error:
        raise InputError(file, f"{place}, {NAME}", f"it can't be decoded ({error})", EXPORT_AGAIN) from None
    if getattr(mesh, "faces", None) is None:
        raise InputError(file, f"{place}, {NAME}", "it holds points without faces", EXPORT_AGAIN)
    return mesh


def _put(
    file: InputFile, place: str, document: dict[str, Any], accessors: Accessors, number: int, values: Array
) -> None:
    """Give an accessor these values, in a buffer of their own."""
    entry = accessors.entry(number, place)
    component, width = COMPONENTS.get(entry.get("componentType", 0)), WIDTHS.get(entry.get("type", ""))
    count = entry.get("count", 0)
    if component is None or width is None or values.size != count * width:
        raise InputError(
            file, place, f"{count} elements announced, but the Draco data holds {values.size} numbers", EXPORT_AGAIN
        )
    rows = np.ascontiguousarray(values.reshape(count, width).astype(component))
    content = rows.view(np.uint8).reshape(-1)
    accessors.buffers.append(content)
    document["buffers"].append({"byteLength": len(content)})
    accessors.views.append({"buffer": len(accessors.buffers) - 1, "byteLength": len(content)})
    entry.pop("byteOffset", None)
    entry["bufferView"] = len(accessors.views) - 1
    if "min" in entry or "max" in entry:  # Draco rounds, and the announced bounds are those before rounding
        entry |= bounds(rows)
