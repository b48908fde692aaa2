"""Binary PLY files, one vertex for each corner that differs."""

from __future__ import annotations

import numpy as np
from tangentry.nodes.formats.side_images import images_beside
from tangentry.nodes.formats.vertices import Vertices, vertices_of
from tangentry.nodes.model import Asset
from tangentry.pipeline.flow import Array, OutFile


def write_ply(asset: Asset, stem: str) -> tuple[OutFile, ...]:
    """A binary PLY file of triangles, and the colour images of its materials beside it; v grows upward.

    Vertices have x y z, and where every part has them: nx ny nz, s t (further UV sets s1 t1 ...), red green blue alpha,
    tx ty tz side (bitangent = cross(normal, tangent) * side). Comments `TextureFile` name the images, and each face's
    `texnumber` counts them where there are several, -1 for none.
    """
    found = [vertices_of(part) for part in asset.parts]
    names, images = images_beside(asset.images, f"{stem}.ply")
    colour_maps = [next((use.image for use in one.maps if use.role == "colour"), -1) for one in asset.materials]
    shown = sorted(set(colour_maps) - {-1})
    layout = _layout(found)
    vertices = np.concatenate([_vertices(one, layout, asset.v_down) for one in found])
    numbered = len(shown) > 1
    faces, before = [], 0
    for part, one in zip(asset.parts, found, strict=True):
        image = colour_maps[part.material] if part.material >= 0 else -1
        faces.append(_faces(one.triangles + before, (shown.index(image) if image >= 0 else -1) if numbered else None))
        before += len(one.points)
    header = ["ply", "format binary_little_endian 1.0", "comment tangentry"]
    header += [f"comment TextureFile {names[row]}" for row in shown]
    header += [f"element vertex {before}"]
    header += [f"property {'uchar' if kind == 'u1' else 'float'} {name}" for name, kind in layout]
    header += [f"element face {sum(map(len, faces))}", "property list uchar int vertex_indices"]
    header += ["property int texnumber"] if numbered else []
    head = np.frombuffer(("\n".join([*header, "end_header"]) + "\n").encode(), np.uint8)
    body = [np.ascontiguousarray(table).view(np.uint8).reshape(-1) for table in (vertices, *faces)]
    placed = {names[row] for row in shown}
    return (OutFile(f"{stem}.ply", np.concatenate([head, *body])), *(one for one in images if one.name in placed))


def _layout(found: list[Vertices]) -> list[tuple[str, str]]:
    """Names and types of the vertices' properties: what every part has."""
    names = [*"xyz"]
    names += ["nx", "ny", "nz"] if all(one.normals is not None for one in found) else []
    for k in range(min(len(one.uvs) for one in found)):
        names += [f"s{k or ''}", f"t{k or ''}"]
    layout = [(name, "<f4") for name in names]
    if all(one.colours for one in found):
        # Bytes where they say it all, as most programs want colours.
        kind = "u1" if all(_are_bytes(one.colours[0]) for one in found) else "<f4"
        layout += [(name, kind) for name in ("red", "green", "blue", "alpha")]
    if all(one.tangents is not None for one in found):
        layout += [(name, "<f4") for name in ("tx", "ty", "tz", "side")]
    return layout


def _are_bytes(colours: Array) -> bool:
    codes = np.rint(colours * np.float32(255))
    return bool(((codes >= 0) & (codes <= 255) & (codes / np.float32(255) == colours)).all())


def _vertices(one: Vertices, layout: list[tuple[str, str]], v_down: bool) -> Array:
    """(vertices,) rows of the layout."""
    columns: dict[str, Array] = dict(zip("xyz", one.points.T, strict=True))
    if one.normals is not None:
        columns |= dict(zip(("nx", "ny", "nz"), one.normals.T, strict=True))
    for k, uv in enumerate(one.uvs):
        columns |= {f"s{k or ''}": uv[:, 0], f"t{k or ''}": 1 - uv[:, 1] if v_down else uv[:, 1]}
    if one.colours:
        opaque = np.ones((len(one.points), 4 - one.colours[0].shape[1]), np.float32)
        columns |= dict(zip(("red", "green", "blue", "alpha"), np.hstack([one.colours[0], opaque]).T, strict=True))
    if one.tangents is not None:
        columns |= dict(zip(("tx", "ty", "tz", "side"), one.tangents.T, strict=True))
    rows = np.empty(len(one.points), layout)
    for name, kind in layout:
        rows[name] = np.rint(columns[name] * 255) if kind == "u1" else columns[name]
    return rows


def _faces(triangles: Array, image: int | None) -> Array:
    kind = [("count", "u1"), ("corners", "<i4", 3), *([("image", "<i4")] if image is not None else [])]
    rows = np.zeros(len(triangles), kind)
    rows["count"], rows["corners"] = 3, triangles
    if image is not None:
        rows["image"] = image
    return rows
