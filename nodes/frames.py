"""Solving tangent frames."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

import numpy as np
from tangentry.nodes.model import Asset, MapUse, Morph, Part, Stream
from tangentry.nodes.normals import normals
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array


def frames(
    asset: Asset,
    *,
    method: Literal["face", "uniform", "area", "angle", "mikktspace"] = "mikktspace",
    stored: Literal["keep", "replace"] = "keep",
    where: Literal["needed", "all"] = "needed",
    uv: int | None = None,
) -> Asset:
    """The asset with a tangent frame at every corner that needs one.

    method   mikktspace: the scheme glTF 2.0 names as its default (Mikkelsen 2008), for maps that others bake or decode;
             face: each face its own (Lengyel 2001), for faceted shading and for looking at the UVs themselves;
             angle: averages over a vertex by corner angle (Thuermer & Wuethrich 1998), however faces are cut; area: by
             area (Max 1999), where small faces at bevels should not turn large ones; uniform: each triangle alike, as
             plain loops do. All but mikktspace keep skew, for `orthogonalise` to deal with
    stored   tangents that the file brought: keep them, or replace them
    where    needed: parts whose material samples a tangent-space map, if the file names maps at all, else every part;
             all: every part that has UVs
    uv       the UV set to follow, from 0; by default the one that the material's tangent-space map names

    Parts without normals get them first, as `normals` with `keep` gives them. A map's UV transform is followed. Where
    UVs define nothing, the frame comes from another corner of the point or is chosen, and is marked as a fallback.
    Raises InputError where a part needs frames and has no UVs.
    """
    says = any(material.maps for material in asset.materials)
    parts = [_framed(asset, part, method, stored, where, uv, says) for part in asset.parts]
    return replace(asset, parts=tuple(parts))


def _framed(asset: Asset, part: Part, method: str, stored: str, where: str, uv: int | None, says: bool) -> Part:
    if part.frames is not None and stored == "keep":
        return part
    use = _map_use(asset, part)
    if where == "needed" and says and use is None:
        return part
    chosen = uv if uv is not None else use.uv if use is not None else 0
    if not part.uvs and where == "all":
        return part
    if chosen >= len(part.uvs):
        found = f"no UV set {chosen}" if part.uvs else "no UVs"
        raise InputError(
            asset.name,
            f'part "{part.name}"',
            f"{found}, which its tangent frames would follow",
            "unwrap it and export it again, or leave it out",
        )
    return _solved(part, part.uvs[chosen], chosen, use, asset.v_down, method)


def _map_use(asset: Asset, part: Part) -> MapUse | None:
    """The tangent-space map that a part's material samples."""
    if part.material < 0:
        return None
    return asset.materials[part.material].tangent_space_map


def _solved(part: Part, stream: Stream, chosen: int, use: MapUse | None, v_down: bool, method: str) -> Part:
    from tangentry.nodes.geometry.frames import morph_tangents, solve_frames

    if part.normals is None:
        part = normals(Asset("", (part,))).parts[0]
    if use is not None and use.uv == chosen:
        stream = Stream(_transformed(stream.values, use.transform), stream.index)
    made = solve_frames(part, stream, chosen, v_down, method)
    part = replace(part, frames=made)
    if not part.morphs or part.source is None:
        return part
    morphs = tuple(replace(one, tangents=_moved(part, one, stream, v_down, morph_tangents)) for one in part.morphs)
    return replace(part, morphs=morphs)


def _transformed(values: Array, transform: tuple[float, ...]) -> Array:
    """UVs under a map's transform, as far as it turns or mirrors them (KHR_texture_transform, glTF extension)."""
    _, _, turn, scale_u, scale_v = transform
    if turn == 0 and scale_u > 0 and scale_v > 0:
        return values
    cosine, sine = np.cos(turn), np.sin(turn)
    matrix = np.array([[cosine, sine], [-sine, cosine]]) @ np.diag([scale_u, scale_v])
    out: Array = (values @ matrix.T).astype(np.float32)
    return out


def _moved(part: Part, morph: Morph, stream: Stream, v_down: bool, tangents_of: object) -> Array | None:
    """How the tangents of a part move with a morph target; None where the target moves nothing."""
    assert part.source is not None and part.normals is not None and part.frames is not None and callable(tangents_of)
    if morph.points is None and morph.normals is None:
        return None
    corner = np.arange(part.corner_count, dtype=np.int32)
    points = part.points.values[part.points.index]
    normal = part.normals.values[part.normals.index].astype(np.float64)  # displacements may be of any size
    if morph.points is not None:
        points = points + morph.points[part.source]
    if morph.normals is not None:
        normal = normal + morph.normals[part.source]
        normal = normal / np.maximum(np.linalg.norm(normal, axis=1, keepdims=True), 1e-12)
    moved = replace(
        part, points=Stream(points.astype(np.float32), corner), normals=Stream(normal.astype(np.float32), corner)
    )
    delta: Array = tangents_of(part, moved, part.frames, stream, v_down)
    return delta
