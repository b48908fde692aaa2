"""Deciding which corners may share a vertex."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from tangentry.nodes.model import Asset, Part, Stream
from tangentry.pipeline.flow import Array


def split(asset: Asset, *, seams: bool = True, hard_edges: bool = True, mirrored: bool = True) -> Asset:
    """The asset with a vertex number at every corner: corners of one number may share a vertex, others never do.

    seams        split where any UV set or colour differs
    hard_edges   split where normals differ
    mirrored     split where faces seen from opposite sides in UV space meet, so that no frame serves both

    Frames that the file brought stay. A later `frames` averages only among corners of one number.
    """
    return replace(
        asset, parts=tuple(_numbered(part, asset.v_down, seams, hard_edges, mirrored) for part in asset.parts)
    )


def _numbered(part: Part, v_down: bool, seams: bool, hard_edges: bool, mirrored: bool) -> Part:
    from tangentry.nodes.geometry.corners import distinct_rows

    columns = [_label(part.points)]
    if hard_edges and part.normals is not None:
        columns.append(_label(part.normals))
    if seams:
        columns += [_label(stream) for stream in (*part.uvs, *part.colours)]
    if mirrored and part.uvs:
        columns.append(_sides(part, columns[0], v_down))
    return replace(part, vertices=distinct_rows(*columns)[0])


def _label(stream: Stream) -> Array:
    """(corners,) int32: equal where the values are."""
    from tangentry.nodes.geometry.corners import distinct_values

    label: Array = distinct_values(stream.values)[0][stream.index]
    return label


def _sides(part: Part, point: Array, v_down: bool) -> Array:
    """(corners,) int32: the side from which the corner's face is seen in UV space."""
    from tangentry.nodes.geometry.directions import triangle_directions
    from tangentry.nodes.geometry.sides import sides_of_faces
    from tangentry.nodes.geometry.triangles import triangulate

    triangles, face = triangulate(part)
    found = triangle_directions(part, triangles, part.uvs[0], v_down)
    side = sides_of_faces(point[triangles], face, part.face_count, found).side
    each: Array = np.repeat(np.where(side < 0, -1, 1).astype(np.int32), np.diff(part.starts))
    return each
