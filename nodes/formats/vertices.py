"""A part as files want it: triangles over vertices, one vertex for each corner that differs from all others."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from tangentry.nodes.geometry.corners import distinct_rows, distinct_values
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.model import Frames, Part, Stream
from tangentry.pipeline.flow import Array


class Vertices(NamedTuple):
    """Triangles, and the vertices they index."""

    triangles: Array  # (n, 3) int32
    corner: Array  # (vertices,) int32: a corner that shows each vertex
    points: Array  # (vertices, 3) float32
    normals: Array | None  # (vertices, 3) float32
    uvs: tuple[Array, ...]  # (vertices, 2) float32 each
    colours: tuple[Array, ...]  # (vertices, 3 or 4) float32 each
    tangents: Array | None  # (vertices, 4) float32: the tangent, and its side


def vertices_of(part: Part) -> Vertices:
    """The vertices of a part, in order of first appearance in its triangles."""
    triangles, _ = triangulate(part)
    used = triangles.ravel()
    tangents = None if part.frames is None else tangent_rows(part.frames)
    streams = [part.points, *([part.normals] if part.normals else []), *part.uvs, *part.colours]
    labels = [label_of(stream)[used] for stream in streams]
    if part.frames is not None and tangents is not None:
        labels.append(label_of(Stream(tangents, part.frames.index))[used])
    label, first = distinct_rows(*labels)
    corner = used[first]

    def taken(stream: Stream) -> Array:
        return stream.values[stream.index[corner]]

    return Vertices(
        label.reshape(-1, 3),
        corner,
        taken(part.points),
        taken(part.normals) if part.normals else None,
        tuple(taken(uv) for uv in part.uvs),
        tuple(taken(colour) for colour in part.colours),
        None if part.frames is None or tangents is None else tangents[part.frames.index[corner]],
    )


def label_of(stream: Stream) -> Array:
    """(corners,) int32: equal where the stream's values are, whatever its index says."""
    label: Array = distinct_values(stream.values)[0][stream.index]
    return label


def tangent_rows(frames: Frames) -> Array:
    """(frames, 4) float32: unit tangents with their sides, as glTF's TANGENT."""
    length = np.sqrt(np.einsum("ij,ij->i", frames.tangents, frames.tangents, dtype=np.float64))[:, None]
    rows = np.concatenate([frames.tangents / np.where(length > 0, length, 1), frames.sides[:, None]], axis=1)
    return rows.astype(np.float32)
