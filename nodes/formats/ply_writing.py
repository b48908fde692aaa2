"""Binary PLY files, one vertex for each corner that differs."""

from __future__ import annotations

import numpy as np
from tangentry.nodes.formats.side_images import images_beside
from tangentry.nodes.formats.vertices import Vertices, vertices_of
from tangentry.nodes.model import Asset
from tangentry.pipeline.flow import Array, OutFile

NORMAL, COLOUR, TANGENT = ("nx", "ny", "nz"), ("red", "green", "blue", "alpha"), ("tx", "ty", "tz", "side")


def write_ply(asset: Asset, stem: str) -> tuple[OutFile, ...]:
    """A binary PLY file of triangles, and the colour images of its materials beside it; v grows upward.

    Vertices have x y z and, if any part has them, nx ny nz, s t (further UV sets s1 t1 ...), red green blue alpha and
    tx ty tz side (bitangent = cross(normal, tangent) * side): white or 0 in parts that have none. Comments
    `TextureFile` name the images; each face's `texnumber` counts them where not all show the same, -1 for none.
    """
    found = [vertices_of(part) for part in asset.parts]
    names, images = images_beside(asset.images, f"{stem}.ply")
    maps = [next((use.image for use in one.maps if use.role == "colour"), -1) for one in asset.materials]
    shown = [maps[part.material] if part.material >= 0 else -1 for part in asset.parts]
    textures = sorted(set(shown) - {-1})
    layout = _layout(found)
    vertices = np.concatenate([_vertices(one, layout, asset.v_down) for one in found])
    faces, before = [], 0
    for image, one in zip(shown, found, strict=True):
        number = textures.index(image) if image >= 0 else -1
        faces.append(_faces(one.triangles + before, number if len(set(shown)) > 1 else None))
        before += len(one.points)
    head = _header([names[image] for image in textures], layout, before, np.concatenate(faces))
    body = [np.ascontiguousarray(table).view(np.uint8).reshape(-1) for table in (vertices, *faces)]
    placed = {names[image] for image in textures}
    return (OutFile(f"{stem}.ply", np.concatenate([head, *body])), *(one for one in images if one.name in placed))


def _header(textures: list[str], layout: list[tuple[str, str]], vertices: int, faces: Array) -> Array:
    lines = ["ply", "format binary_little_endian 1.0", "comment tangentry"]
    lines += [f"comment TextureFile {name}" for name in textures]
    lines += [f"element vertex {vertices}"]
    lines += [f"property {'uchar' if kind == 'u1' else 'float'} {name}" for name, kind in layout]
    lines += [f"element face {len(faces)}", "property list uchar int vertex_indices"]
    lines += ["property int texnumber"] if "image" in (faces.dtype.names or ()) else []
    return np.frombuffer(("\n".join([*lines, "end_header"]) + "\n").encode(), np.uint8)


def _layout(found: list[Vertices]) -> list[tuple[str, str]]:
    """Names and types of the vertices' properties."""
    names = [*"xyz", *(NORMAL if any(one.normals is not None for one in found) else ())]
    for k in range(max(len(one.uvs) for one in found)):
        names += [f"s{k or ''}", f"t{k or ''}"]
    layout = [(name, "<f4") for name in names]
    colours = [one.colours[0] for one in found if one.colours]
    if colours:
        # Bytes where they say it all, as most programs want colours.
        layout += [(name, "u1" if all(map(_are_bytes, colours)) else "<f4") for name in COLOUR]
    if any(one.tangents is not None for one in found):
        layout += [(name, "<f4") for name in TANGENT]
    return layout


def _are_bytes(colours: Array) -> bool:
    codes = np.rint(colours * np.float32(255))
    return bool(((codes >= 0) & (codes <= 255) & (codes / np.float32(255) == colours)).all())


def _vertices(one: Vertices, layout: list[tuple[str, str]], v_down: bool) -> Array:
    """(vertices,) rows of the layout."""
    columns: dict[str, Array] = dict(zip("xyz", one.points.T, strict=True))
    if one.normals is not None:
        columns |= dict(zip(NORMAL, one.normals.T, strict=True))
    for k, uv in enumerate(one.uvs):
        columns |= {f"s{k or ''}": uv[:, 0], f"t{k or ''}": 1 - uv[:, 1] if v_down else uv[:, 1]}
    for colours in one.colours[:1]:
        columns |= dict(zip(COLOUR, colours.T, strict=False))
    if one.tangents is not None:
        columns |= dict(zip(TANGENT, one.tangents.T, strict=True))
    rows = np.zeros(len(one.points), layout)
    for name, kind in layout:
        column = columns.get(name, np.float32(name in COLOUR))
        rows[name] = np.rint(column * 255) if kind == "u1" else column
    return rows


def _faces(triangles: Array, image: int | None) -> Array:
    kind = [("count", "u1"), ("corners", "<i4", 3), *([("image", "<i4")] if image is not None else [])]
    rows = np.zeros(len(triangles), kind)
    rows["count"], rows["corners"] = 3, triangles
    if image is not None:
        rows["image"] = image
    return rows
