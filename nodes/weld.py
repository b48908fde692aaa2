"""Joining points that lie together."""

from __future__ import annotations

from dataclasses import replace

from tangentry.nodes.model import Asset, Stream


def weld(asset: Asset, *, within: float = 0.0) -> Asset:
    """The asset with coincident points of each part joined; the corners keep their attributes apart.

    within   distance in the file's unit; 0 joins only points that are exactly equal

    Chains of points, each within the distance of the next, become one, which lies where the first of them lay. Faces
    that collapse are kept, so that `check` can name them. Where nothing is joined the part is passed on as it is.
    """
    from tangentry.nodes.geometry.welding import join_points

    parts = []
    for part in asset.parts:
        label, first = join_points(part.points.values, within)
        if len(first) == len(part.points.values):
            parts.append(part)
        else:
            parts.append(replace(part, points=Stream(part.points.values[first], label[part.points.index])))
    return replace(asset, parts=tuple(parts))
