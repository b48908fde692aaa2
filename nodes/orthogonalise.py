"""Squaring tangent frames."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

import numpy as np
from tangentry.nodes.model import Asset, Frames, Morph, Part
from tangentry.pipeline.flow import Array


def orthogonalise(asset: Asset, *, method: Literal["gram-schmidt", "polar", "none"] = "gram-schmidt") -> Asset:
    """The asset with square tangent frames: unit tangents across the normals, bitangents implied by the side.

    method   gram-schmidt: the tangent keeps its direction as far as the normal allows; polar: tangent and bitangent
             give way alike, the square frame in the tangent plane nearest to both (Higham 1986); none: skew stays

    Normals never change. A frame row used with several normals is divided, one row for each.
    """
    if method == "none":
        return asset
    return replace(asset, parts=tuple(_squared(part, method) for part in asset.parts))


def _squared(part: Part, method: str) -> Part:
    if part.frames is None or part.normals is None:
        return part
    from tangentry.nodes.geometry.corners import distinct_rows
    from tangentry.nodes.geometry.vectors import axis_across, dot, reject, unit, unit_or_up

    index, first = distinct_rows(part.frames.index, part.normals.index)
    row = part.frames.index[first]
    normal = unit_or_up(part.normals.values[part.normals.index[first]])
    tangent, side = part.frames.tangents[row], part.frames.sides[row]
    if method == "polar":
        tangent = _middle(part.frames, row, normal, tangent, side)
    # Twice: one pass leaves rounding behind when the tangent leans on the normal.
    across = reject(unit(reject(tangent, normal)), normal)
    lost = ~(dot(across, across) > 0.5) | (side == 0)
    squared = np.where(lost[:, None], axis_across(normal), unit(across)).astype(np.float32)
    fallback = part.frames.fallback[row] | lost
    side = np.where(side == 0, np.int8(1), side)
    if len(first) == len(part.frames.tangents) and not lost.any() and np.array_equal(squared, part.frames.tangents):
        return part if part.frames.bitangents is None else replace(part, frames=replace(part.frames, bitangents=None))
    return replace(
        part,
        frames=Frames(squared, None, side, fallback, index, part.frames.uv, part.frames.method),
        morphs=_morphs(part, row),
    )


def _middle(frames: Frames, row: Array, normal: Array, tangent: Array, side: Array) -> Array:
    """The tangent of the nearest square frame: halfway between the tangent and the bitangent turned back a quarter."""
    from tangentry.nodes.geometry.vectors import reject, unit

    if frames.bitangents is None:
        return tangent
    turned = np.cross(unit(reject(frames.bitangents[row], normal)), normal) * side[:, None]
    halfway: Array = unit(reject(tangent, normal)) + turned
    return halfway


def _morphs(part: Part, row: Array) -> tuple[Morph, ...]:
    return tuple(one if one.tangents is None else replace(one, tangents=one.tangents[row]) for one in part.morphs)
