"""An Asset as glTF: its own document edited in place where it brought one, a new document else."""

from __future__ import annotations

import re
from pathlib import PurePosixPath
from typing import Any
from urllib.parse import quote

from tangentry.nodes.formats.gltf_builder import Builder, buffer_name
from tangentry.nodes.formats.gltf_editing import edited_document
from tangentry.nodes.formats.gltf_making import new_document
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.maps.encodings import as_gltf_texels
from tangentry.nodes.model import Asset, Map
from tangentry.pipeline.flow import Array, OutFile

SUFFIXES = {
    "image/png": ".png",
    "image/jpeg": ".jpg",
    "image/webp": ".webp",
    "image/ktx2": ".ktx2",
    "image/avif": ".avif",
    "image/vnd-ms.dds": ".dds",
}
UNKNOWN = "application/octet-stream"


def write_gltf(asset: Asset, maps: Map | None, name: str, vectors: str = "float") -> tuple[OutFile, ...]:
    """The files of an asset: one .glb, or .gltf with its buffer, `stem.bin`, and its images beside it.

    maps     normal maps to put into the materials; a sheet's material "" serves all
    vectors  form of normals and tangents: "float", or "short" or "byte", normalised (KHR_mesh_quantization)

    Positions, normals, UVs and all else that did not change go out as they came in, accessor for accessor. Frames that
    were solved become TANGENT; vertices are split where corners of one vertex came to differ, and nowhere else.
    """
    builder = edited_document(asset, vectors) if asset.document is not None else new_document(asset, vectors)
    stem, _, suffix = name.rpartition(".")
    binary = suffix.lower() == "glb"
    buffers = range(max(len(builder.list("buffers")), 1))
    taken = {name.lower(), *(buffer_name(name, number).lower() for number in buffers)}
    files = _place_images(builder, taken, binary)
    if maps is not None:
        files += _place_maps(builder, maps, stem, binary, asset, taken)
    return (*builder.files(name, binary), *files)


def _place_images(builder: Builder, taken: set[str], binary: bool) -> list[OutFile]:
    """Images into the file, or beside it; an image that was not found stays the reference it was."""
    files: list[OutFile] = []
    for number, (entry, image) in enumerate(zip(builder.document.get("images", ()), builder.images, strict=True)):
        if not len(image.content):
            continue
        if binary:
            if "bufferView" not in entry:
                entry.pop("uri", None)
                entry |= {"bufferView": builder.view(image.content), "mimeType": image.mime or UNKNOWN}
            continue
        name = _file_name(image.name, SUFFIXES.get(image.mime, ""), number, taken)
        entry.pop("bufferView", None)
        entry["uri"] = quote(name)
        files.append(OutFile(name, image.content))
    return files


def _file_name(name: str, suffix: str, number: int, taken: set[str]) -> str:
    """A plain file name for an image, unlike those taken, which are in lower case as some disks see them."""
    plain = re.sub(r"[^\w.\- ]", "_", PurePosixPath(name.replace("\\", "/")).name) or f"image_{number}"
    if suffix and not plain.lower().endswith((suffix, ".jpeg")):
        plain += suffix
    while plain.lower() in taken:
        plain = f"{number}_{plain}"
    taken.add(plain.lower())
    return plain


def _place_maps(builder: Builder, maps: Map, stem: str, binary: bool, asset: Asset, taken: set[str]) -> list[OutFile]:
    """Each normal map as the normalTexture of its material; one without its own sheet takes that which serves all."""
    files: list[OutFile] = []
    textures: dict[int, int] = {}
    sheets = [sheet for sheet in maps.sheets if sheet.level == 0]
    names = [f"{stem}_normal_{number}" if len(sheets) > 1 else f"{stem}_normal" for number in range(len(sheets))]
    texels = [as_gltf_texels(sheet, asset.name, name) for sheet, name in zip(sheets, names, strict=True)]
    by_name = {sheet.material: number for number, sheet in enumerate(sheets)}
    for material in _materials(builder, asset):
        chosen = by_name.get(str(material.get("name", "")), by_name.get(""))
        if chosen is None:
            continue
        if chosen not in textures:
            content = write_png(texels[chosen])
            textures[chosen] = _texture(builder, content, names[chosen], binary, files, taken)
        info = material.get("normalTexture", {})
        material["normalTexture"] = {
            "index": textures[chosen],
            **{key: info[key] for key in ("scale", "texCoord", "extensions", "extras") if key in info},
        }
    return files


def _materials(builder: Builder, asset: Asset) -> list[dict[str, Any]]:
    """The document's materials; parts that have none get one, so that a map has a place."""
    materials = builder.list("materials")
    bare = [part for part in asset.parts if part.material < 0]
    if bare:
        materials.append({"name": ""})
        for mesh in builder.list("meshes"):
            for primitive in mesh.get("primitives", ()):
                if "TANGENT" in primitive.get("attributes", {}):
                    primitive.setdefault("material", len(materials) - 1)
        del materials[-1]["name"]
    return materials


def _texture(builder: Builder, content: Array, name: str, binary: bool, files: list[OutFile], taken: set[str]) -> int:
    images, textures = builder.list("images"), builder.list("textures")
    if binary:
        images.append({"name": name, "bufferView": builder.view(content), "mimeType": "image/png"})
    else:
        file = _file_name(name, ".png", len(images), taken)
        images.append({"name": name, "uri": quote(file)})
        files.append(OutFile(file, content))
    textures.append({"source": len(images) - 1})
    return len(textures) - 1
