"""The shape of a glTF document as far as it is worked with: checked once while reading, trusted from then on.

What stands here follows the tables of the specification (chapter 5). Members that are not named may be anything: they
are carried through. Whether a number refers to something that is there is asked where it is used.
"""

from __future__ import annotations

from typing import Any

from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import InputFile

WHOLE, FINITE, FLAG, TEXT = "a whole number of 0 or more", "a finite number", "true or false", "text"
EACH = "*"  # in place of a member's name: every member

NUMBERS = [FINITE]
EXTENSIONS: dict[str, Any] = {EACH: {}}
SPARSE_PART = {"bufferView": WHOLE, "byteOffset": WHOLE, "componentType": WHOLE}
TRANSFORM = {"offset": NUMBERS, "scale": NUMBERS, "rotation": FINITE, "texCoord": WHOLE}
USE = {
    "index": WHOLE,
    "texCoord": WHOLE,
    "scale": FINITE,
    "strength": FINITE,
    "extensions": {EACH: {}, "KHR_texture_transform": TRANSFORM},
}
PRIMITIVE = {
    "attributes": {EACH: WHOLE},
    "indices": WHOLE,
    "material": WHOLE,
    "mode": WHOLE,
    "targets": [{EACH: WHOLE}],
    "extensions": EXTENSIONS,
}
SHAPE = {
    "asset": {"version": TEXT},
    "extensionsUsed": [TEXT],
    "extensionsRequired": [TEXT],
    "buffers": [{"uri": TEXT, "byteLength": WHOLE, "extensions": EXTENSIONS}],
    "bufferViews": [
        {"buffer": WHOLE, "byteOffset": WHOLE, "byteLength": WHOLE, "byteStride": WHOLE, "extensions": EXTENSIONS}
    ],
    "accessors": [
        {
            "bufferView": WHOLE,
            "byteOffset": WHOLE,
            "componentType": WHOLE,
            "normalized": FLAG,
            "count": WHOLE,
            "type": TEXT,
            "min": NUMBERS,
            "max": NUMBERS,
            "sparse": {"count": WHOLE, "indices": SPARSE_PART, "values": SPARSE_PART},
            "extensions": EXTENSIONS,
        }
    ],
    "images": [{"uri": TEXT, "bufferView": WHOLE, "mimeType": TEXT, "name": TEXT}],
    "textures": [{"source": WHOLE, "sampler": WHOLE, "extensions": {EACH: {"source": WHOLE}}}],
    "materials": [
        {
            "name": TEXT,
            "pbrMetallicRoughness": {"baseColorTexture": USE, "metallicRoughnessTexture": USE},
            "normalTexture": USE,
            "occlusionTexture": USE,
            "emissiveTexture": USE,
            "extensions": EXTENSIONS,
        }
    ],
    "meshes": [{"name": TEXT, "primitives": [PRIMITIVE], "weights": NUMBERS}],
    "animations": [
        {
            "samplers": [{"input": WHOLE, "output": WHOLE, "interpolation": TEXT}],
            "channels": [{"sampler": WHOLE, "target": {"node": WHOLE, "path": TEXT}}],
        }
    ],
    "skins": [{"inverseBindMatrices": WHOLE, "joints": [WHOLE], "skeleton": WHOLE}],
    "nodes": [
        {
            "mesh": WHOLE,
            "skin": WHOLE,
            "children": [WHOLE],
            "matrix": NUMBERS,
            "translation": NUMBERS,
            "rotation": NUMBERS,
            "scale": NUMBERS,
            "weights": NUMBERS,
            "extensions": {EACH: {}, "EXT_mesh_gpu_instancing": {"attributes": {EACH: WHOLE}}},
        }
    ],
    "scenes": [{"nodes": [WHOLE]}],
    "scene": WHOLE,
}


def check_shape(file: InputFile, document: dict[str, Any]) -> None:
    """Raise InputError where a member of the document is not of the kind that the specification gives it.

    The message names its place: `meshes[2].primitives[0].attributes.POSITION: found "4", but ...`.
    """
    _check(file, "", document, SHAPE)


def check_texture(file: InputFile, place: str, info: dict[str, Any]) -> None:
    """The same for an extension's use of a texture."""
    _check(file, place, info, USE)


def _check(file: InputFile, place: str, found: Any, wanted: Any) -> None:
    if isinstance(wanted, str):
        if not _fits(found, wanted):
            shown = repr(found) if len(repr(found)[:100]) < 60 else repr(found)[:57] + "..."
            raise InputError(file, place, f"{shown}, where {wanted} belongs", "export the file again")
    elif isinstance(wanted, list):
        if not isinstance(found, list):
            raise InputError(file, place, "not a list", "export the file again")
        for number, one in enumerate(found):
            _check(file, f"{place}[{number}]", one, wanted[0])
    else:
        if not isinstance(found, dict):
            raise InputError(file, place, "not an object", "export the file again")
        for name, one in found.items():
            if name in wanted or EACH in wanted:
                _check(file, f"{place}.{name}" if place else name, one, wanted.get(name, wanted.get(EACH)))


def _fits(found: Any, wanted: str) -> bool:
    if wanted == TEXT:
        return isinstance(found, str)
    if wanted == FLAG:
        return isinstance(found, bool)
    if isinstance(found, bool) or not isinstance(found, (int, float)):
        return False
    if wanted == WHOLE:
        return isinstance(found, int) and found >= 0
    return abs(found) < 1e300
