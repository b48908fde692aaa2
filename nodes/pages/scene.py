"""An asset as a page's viewer draws it: packed vertices, triangles by map, and the triangles of each finding."""

from __future__ import annotations

from base64 import b64encode
from typing import Any

import numpy as np
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.formats.vertices import Vertices, vertices_of
from tangentry.nodes.geometry.texels import image_places
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.maps.encodings import encoded
from tangentry.nodes.model import Asset, Map, Part, Sheet
from tangentry.nodes.normals import normals
from tangentry.pipeline.flow import Array, Finding

WIDEST = 1024  # texels along a map's longer side: what a viewer of a few hundred pixels can show
VERTEX = np.dtype([("point", "<u2", 4), ("normal", "<i2", 4), ("tangent", "<i2", 4), ("place", "<f4", 2)])


def triangle_count(asset: Asset) -> int:
    """How many triangles an asset is drawn with."""
    return sum(int(np.maximum(np.diff(part.starts) - 2, 0).sum()) for part in asset.parts)


def scene_of(asset: Asset, map: Map | None, items: tuple[Finding, ...]) -> dict[str, Any]:
    """An asset in JSON's types, arrays in base64.

    box        lowest corner and sides of the box that points are packed in
    vertices   32 bytes each: point (uint16 x 4), normal and tangent with its side (int16 x 4), place in the image
               (float32 x 2)
    triangles  (n, 3) uint32
    groups     runs of triangles of one part: first, count, map (-1: none), strength
    maps       PNG, 8 bits, green up
    marks      by the finding's number: the triangles it lies on
    """
    ready = normals(asset)
    sheets = [sheet for sheet in (map.sheets if map else ()) if sheet.holds == "normal" and sheet.space == "tangent"]
    low, sides = _box(ready)
    rows, triangles, groups, first, base = [], [], [], 0, 0
    for part in ready.parts:
        vertices = vertices_of(part)
        rows.append(_packed(part, vertices, asset, low, sides))
        triangles.append(vertices.triangles.astype("<u4") + np.uint32(base))
        number, strength = _map_of(asset, part, sheets)
        groups.append({"first": first, "count": len(vertices.triangles), "map": number, "strength": strength})
        first, base = first + len(vertices.triangles), base + len(vertices.points)
    return {
        "box": [*low.tolist(), *sides.tolist()],
        "vertices": _base64(np.concatenate(rows)),
        "triangles": _base64(np.concatenate(triangles)),
        "groups": groups,
        "maps": [_picture(sheet) for sheet in sheets],
        "marks": {str(k): _base64(found) for k, item in enumerate(items) if len(found := _marked(ready, item))},
    }


def _box(asset: Asset) -> tuple[Array, Array]:
    points = np.concatenate([part.points.values[part.points.index] for part in asset.parts]).astype(np.float64)
    points = points[np.isfinite(points).all(axis=1)]
    if not len(points):
        return np.zeros(3), np.ones(3)
    return points.min(axis=0), np.maximum(points.max(axis=0) - points.min(axis=0), 1e-30)


def _packed(part: Part, vertices: Vertices, asset: Asset, low: Array, sides: Array) -> Array:
    rows = np.zeros(len(vertices.points), VERTEX)
    within = np.nan_to_num((vertices.points - low) / sides)
    rows["point"][:, :3] = np.rint(np.clip(within, 0, 1) * 65535)
    assert vertices.normals is not None
    rows["normal"][:, :3] = _shorts(vertices.normals)
    if vertices.tangents is not None:
        rows["tangent"] = _shorts(vertices.tangents)
    chosen = part.frames.uv if part.frames is not None and part.frames.uv >= 0 else 0
    if chosen < len(vertices.uvs):
        rows["place"] = np.nan_to_num(image_places(vertices.uvs[chosen], asset.v_down))
    return rows


def _shorts(values: Array) -> Array:
    codes: Array = np.rint(np.clip(np.nan_to_num(values), -1, 1) * 32767)
    return codes


def _map_of(asset: Asset, part: Part, sheets: list[Sheet]) -> tuple[int, float]:
    """The number of a part's map, -1 where it has none or no frames to decode it by; and the map's strength."""
    material = asset.materials[part.material] if part.material >= 0 else None
    name = material.name if material is not None else ""
    number = next((k for k, sheet in enumerate(sheets) if sheet.material in ("", name)), -1)
    if part.frames is None or not part.uvs:
        return -1, 1.0
    use = material.tangent_space_map if material is not None else None
    return number, use.strength if use is not None else 1.0


def _picture(sheet: Sheet) -> str:
    texels = encoded(sheet, "unorm", 8, "up").texels[..., :3]
    step = -(-max(texels.shape[:2]) // WIDEST)
    return _base64(write_png(np.ascontiguousarray(texels[::step, ::step])))


def _marked(asset: Asset, item: Finding) -> Array:
    """(n,) uint32: the triangles that a finding lies on, counted over all parts."""
    if item.element not in ("face", "corner") or not len(item.elements):
        return np.zeros(0, "<u4")
    found, first = [np.zeros(0, np.int64)], 0
    for part in asset.parts:
        _, face = triangulate(part)
        name = asset.materials[part.material].name if part.material >= 0 else ""
        most = part.face_count if item.element == "face" else part.corner_count
        if (part.name, name) == (item.part, item.material) and int(item.elements.max()) < most:
            guilty = np.zeros(part.face_count, bool)
            owner = np.repeat(np.arange(part.face_count), np.diff(part.starts))
            guilty[item.elements if item.element == "face" else owner[item.elements]] = True
            found.append(first + np.flatnonzero(guilty[face]))
        first += len(face)
    return np.concatenate(found).astype("<u4")


def _base64(array: Array) -> str:
    return b64encode(np.ascontiguousarray(array).tobytes()).decode()
