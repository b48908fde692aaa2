"""The surface that a sheet of texels lies on: what an asset has at the corners of the triangles under it."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from tangentry.nodes.geometry.texels import image_places
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.model import Asset, Frames, MapUse, Part
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array


class Surface(NamedTuple):
    """Triangles of one or more parts, by corner."""

    places: Array  # (triangles, 3, 2) float64: in the image, see geometry/texels.py
    positions: Array  # (triangles, 3, 3) float32
    frames: Array  # (triangles, 3, 10) float32: normal, tangent, bitangent (3 each; unit), side
    part: Array  # (triangles,) int32: row of Asset.parts


def parts_by_material(asset: Asset) -> dict[str, list[int]]:
    """Rows of Asset.parts by the name of their material ("" where they have none), in the order of materials."""
    rows: dict[str, list[int]] = {material.name: [] for material in asset.materials}
    for row, part in enumerate(asset.parts):
        rows.setdefault(_material(asset, part), []).append(row)
    return {name: found for name, found in rows.items() if found}


def parts_under(asset: Asset, material: str) -> list[int]:
    """Rows of the parts that a sheet of that material lies on; for "", which serves all, every part that can have it.

    Raises InputError where there are none.
    """
    if material == "":
        able = [row for row, part in enumerate(asset.parts) if part.uvs and part.frames is not None]
        return able or list(range(len(asset.parts)))
    rows = parts_by_material(asset).get(material)
    if rows is None:
        found = "no part has it, but the map has a sheet for it"
        raise InputError(asset.name, f'material "{material}"', found, "is the map another asset's?")
    return rows


def surface_of(asset: Asset, rows: list[int], *, needs_frames: bool = True) -> Surface:
    """The surface of some parts.

    needs_frames   False: frames that are not there are zero

    The UVs are those that the frames follow, else those of the material's tangent-space map, that map's transform in
    them. Raises InputError where a part lacks UVs, normals, or frames that are needed, or where there is none.
    """
    if not rows:
        raise InputError(asset.name, "", "it has no faces", "export it again")
    pieces = [_piece(asset, asset.parts[row], row, needs_frames) for row in rows]
    return Surface(*(np.concatenate(columns) for columns in zip(*pieces, strict=True)))


def _material(asset: Asset, part: Part) -> str:
    return asset.materials[part.material].name if part.material >= 0 else ""


def _piece(asset: Asset, part: Part, row: int, needs_frames: bool) -> Surface:
    use = asset.materials[part.material].tangent_space_map if part.material >= 0 else None
    chosen = part.frames.uv if part.frames is not None and part.frames.uv >= 0 else use.uv if use else 0
    for there, what, advice in (
        (chosen < len(part.uvs), f"no UV set {chosen}", "unwrap it"),
        (part.normals is not None, "no normals", "put `normals` or `frames` before this"),
        (part.frames is not None or not needs_frames, "no tangent frames", "put `frames` before this"),
    ):
        if not there:
            raise InputError(asset.name, f'part "{part.name}"', what, advice)
    triangles, _ = triangulate(part)
    uv = part.uvs[chosen].values[part.uvs[chosen].index[triangles]].astype(np.float64)
    if use is not None and use.uv == chosen:
        uv = _transformed(uv, use)
    return Surface(
        image_places(uv, asset.v_down),
        part.points.values[part.points.index[triangles]],
        _corner_frames(part, triangles),
        np.full(len(triangles), row, np.int32),
    )


def _transformed(uv: Array, use: MapUse) -> Array:
    """UVs as the map's image is sampled: scaled, then turned, then moved (KHR_texture_transform, glTF extension)."""
    offset_u, offset_v, turn, scale_u, scale_v = use.transform
    cosine, sine = np.cos(turn), np.sin(turn)
    out: Array = uv * (scale_u, scale_v) @ np.array([[cosine, sine], [-sine, cosine]]).T + (offset_u, offset_v)
    return out


def _corner_frames(part: Part, triangles: Array) -> Array:
    assert part.normals is not None
    rows = np.zeros((*triangles.shape, 10), np.float32)
    rows[..., :3] = part.normals.values[part.normals.index[triangles]]
    if part.frames is not None:
        index = part.frames.index[triangles]
        rows[..., 3:6], rows[..., 9] = part.frames.tangents[index], part.frames.sides[index]
        rows[..., 6:9] = _bitangents(part.frames, index, rows)
    return rows


def _bitangents(frames: Frames, index: Array, rows: Array) -> Array:
    if frames.bitangents is not None:
        stored: Array = frames.bitangents[index]
        return stored
    across = np.cross(rows[..., :3], rows[..., 3:6]) * rows[..., 9:]
    length = np.sqrt(np.einsum("...i,...i->...", across, across))[..., None]
    out: Array = across / np.where(length > 0, length, 1)
    return out
