"""A new glTF document for an asset that came from another format."""

from __future__ import annotations

from typing import Any

import numpy as np
from tangentry.nodes.formats.gltf_builder import Builder, bounds
from tangentry.nodes.formats.gltf_reading import sniff
from tangentry.nodes.formats.vertices import vertices_of
from tangentry.nodes.model import Asset, Image, MapUse, Part
from tangentry.pipeline.flow import Array

SHOWN = ("image/png", "image/jpeg")  # what core glTF 2.0 textures may be (specification, 3.8.3)


def new_document(asset: Asset, vectors: str) -> Builder:
    """A document with a node and a mesh for each run of parts of one name, a primitive for each part."""
    builder = Builder(vectors)
    builder.document |= {"scene": 0, "scenes": [{"nodes": []}], "nodes": [], "meshes": []}
    if asset.materials:
        _materials(builder, asset)
    named: str | None = None
    for part in asset.parts:
        if part.name != named or not builder.list("meshes"):
            named = part.name
            builder.list("nodes").append({"name": part.name, "mesh": len(builder.list("meshes"))})
            builder.list("scenes")[0]["nodes"].append(len(builder.list("nodes")) - 1)
            builder.list("meshes").append({"name": part.name, "primitives": []})
        builder.list("meshes")[-1]["primitives"].append(_primitive(builder, asset, part))
    return builder


def _primitive(builder: Builder, asset: Asset, part: Part) -> dict[str, Any]:
    found = vertices_of(part)
    attributes = {"POSITION": builder.accessor(found.points, **bounds(found.points))}
    if found.normals is not None:
        attributes["NORMAL"] = builder.directions(_unit_or_up(found.normals))
    if found.tangents is not None and found.normals is not None:
        attributes["TANGENT"] = builder.directions(found.tangents)
    for number, uv in enumerate(found.uvs):
        attributes[f"TEXCOORD_{number}"] = builder.accessor(uv if asset.v_down else _turned(uv))
    for number, colour in enumerate(found.colours):
        attributes[f"COLOR_{number}"] = builder.accessor(colour)
    primitive: dict[str, Any] = {
        "attributes": attributes,
        "indices": builder.indices(found.triangles.ravel(), len(found.points)),
    }
    if part.material >= 0:
        primitive["material"] = part.material
    return primitive


def _turned(uv: Array) -> Array:
    """UVs with v counted from the other end."""
    return np.stack([uv[:, 0], 1 - uv[:, 1]], axis=1).astype(np.float32)


def _unit_or_up(normals: Array) -> Array:
    length = np.linalg.norm(normals, axis=1, keepdims=True)
    return np.where(length > 0, normals / np.where(length > 0, length, 1), [0, 0, 1]).astype(np.float32)


def _materials(builder: Builder, asset: Asset) -> None:
    """Materials with the colour, normal and emissive maps that glTF can show; all images go along: rows correspond."""
    used: dict[int, int] = {}
    for material in asset.materials:
        entry: dict[str, Any] = {"name": material.name, "pbrMetallicRoughness": {"metallicFactor": 0.0}}
        for use in material.maps:
            if use.role in ("colour", "normal", "emissive") and _can_show(asset.images[use.image]):
                info = _info(builder, use, used)
                if use.role == "colour":
                    entry["pbrMetallicRoughness"]["baseColorTexture"] = info
                else:
                    entry[f"{use.role}Texture"] = info
        builder.list("materials").append(entry)
    _only_shown(builder, asset, used)


def _can_show(image: Image) -> bool:
    return sniff(image.content) in SHOWN


def _info(builder: Builder, use: MapUse, used: dict[int, int]) -> dict[str, Any]:
    if use.image not in used:
        builder.list("textures").append({"source": use.image})
        used[use.image] = len(builder.list("textures")) - 1
    info: dict[str, Any] = {"index": used[use.image]}
    if use.uv:
        info["texCoord"] = use.uv
    if use.role == "normal" and use.strength != 1.0:
        info["scale"] = use.strength
    return info


def _only_shown(builder: Builder, asset: Asset, used: dict[int, int]) -> None:
    """Leave out the images that no texture shows."""
    shown = sorted(used)
    for texture in builder.list("textures"):
        texture["source"] = shown.index(texture["source"])
    builder.images = [asset.images[row] for row in shown]
    builder.document["images"] = [{"name": image.name} for image in builder.images]
