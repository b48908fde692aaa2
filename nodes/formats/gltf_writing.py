"""An Asset as glTF: its own document edited in place where it brought one, a new document else."""

from __future__ import annotations

import re
from pathlib import PurePosixPath

import numpy as np
from tangentry.nodes.formats.gltf_builder import Builder
from tangentry.nodes.formats.gltf_editing import edited_document
from tangentry.nodes.formats.gltf_making import new_document
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.maps.encodings import as_gltf_texels
from tangentry.nodes.model import Asset, Map
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import OutFile

SUFFIXES = {"image/png": ".png", "image/jpeg": ".jpg", "image/webp": ".webp", "image/ktx2": ".ktx2"}


def write_gltf(asset: Asset, maps: Map | None, stem: str, binary: bool) -> tuple[OutFile, ...]:
    """The files of an asset: one .glb, or .gltf with `stem.bin` and its images beside it.

    maps   normal maps to put into the materials; a sheet's material "" serves all

    Positions, normals, UVs and all else that did not change go out as they came in, accessor for accessor. Frames that
    were solved become TANGENT; vertices are split where corners of one vertex came to differ, and nowhere else.
    """
    builder = edited_document(asset) if asset.document is not None else new_document(asset)
    files = _place_images(builder, stem, binary)
    if maps is not None:
        files += _place_maps(builder, maps, stem, binary, asset)
    return (*builder.files(stem, binary), *files)


def _place_images(builder: Builder, stem: str, binary: bool) -> list[OutFile]:
    """Images into the file, or beside it; an image that was not found stays the reference it was."""
    files: list[OutFile] = []
    taken = {f"{stem}.gltf", f"{stem}.bin"}
    for number, (entry, image) in enumerate(zip(builder.document.get("images", ()), builder.images, strict=True)):
        if not len(image.content):
            continue
        if binary:
            if "bufferView" not in entry:
                entry.pop("uri", None)
                entry |= {"bufferView": builder.view(image.content), "mimeType": image.mime or "image/png"}
            continue
        name = _file_name(image.name, SUFFIXES.get(image.mime, ""), number, taken)
        entry.pop("bufferView", None)
        entry["uri"] = _as_uri(name)
        entry.pop("mimeType", None)
        files.append(OutFile(name, image.content))
    return files


def _file_name(name: str, suffix: str, number: int, taken: set[str]) -> str:
    """A plain file name for an image, unlike those taken."""
    plain = re.sub(r"[^\w.\- ]", "_", PurePosixPath(name.replace("\\", "/")).name) or f"image_{number}"
    if suffix and not plain.lower().endswith((suffix, ".jpeg")):
        plain += suffix
    if plain in taken:
        plain = f"{number}_{plain}"
    taken.add(plain)
    return plain


def _as_uri(name: str) -> str:
    from urllib.parse import quote

    return quote(name)


def _place_maps(builder: Builder, maps: Map, stem: str, binary: bool, asset: Asset) -> list[OutFile]:
    """Each normal map as the normalTexture of its material; a material without one of its own takes the sheet that serves all."""
    files: list[OutFile] = []
    textures: dict[int, int] = {}
    by_name = {sheet.material: number for number, sheet in enumerate(maps.sheets)}
    for number, sheet in enumerate(maps.sheets):
        if sheet.holds != "normal" or sheet.space not in ("tangent", ""):
            raise InputError(
                asset.name,
                f"map {sheet.name or number}",
                f"it holds {sheet.space} {sheet.holds}, not tangent-space normals",
                "turn it into them first: `relief`, `reencode`",
            )
    for material in _materials(builder, asset):
        chosen = by_name.get(str(material.get("name", "")), by_name.get(""))
        if chosen is None:
            continue
        if chosen not in textures:
            content = write_png(as_gltf_texels(maps.sheets[chosen]))
            textures[chosen] = _texture(
                builder, content, f"{stem}_normal_{chosen}" if len(maps.sheets) > 1 else f"{stem}_normal", binary, files
            )
        info = material.get("normalTexture", {})
        material["normalTexture"] = {
            "index": textures[chosen],
            **{key: info[key] for key in ("scale", "texCoord", "extensions", "extras") if key in info},
        }
    return files


def _materials(builder: Builder, asset: Asset) -> list[dict]:  # type: ignore[type-arg]
    """The document's materials; parts that have none get one, so that a map has a place."""
    materials = builder.list("materials")
    bare = [part for part in asset.parts if part.material < 0]
    if bare:
        materials.append({"name": ""})
        for mesh in builder.list("meshes"):
            for primitive in mesh["primitives"]:
                if "TANGENT" in primitive["attributes"]:
                    primitive.setdefault("material", len(materials) - 1)
        del materials[-1]["name"]
    return materials


def _texture(builder: Builder, content: np.ndarray, name: str, binary: bool, files: list[OutFile]) -> int:
    images, textures = builder.list("images"), builder.list("textures")
    if binary:
        images.append({"name": name, "bufferView": builder.view(content), "mimeType": "image/png"})
    else:
        images.append({"name": name, "uri": _as_uri(f"{name}.png")})
        files.append(OutFile(f"{name}.png", content))
    textures.append({"source": len(images) - 1})
    return len(textures) - 1
