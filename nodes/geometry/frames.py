"""Tangent frames of a part by a named method, never undefined."""

from __future__ import annotations

import numpy as np
from tangentry.nodes.geometry import averaging, mikktspace
from tangentry.nodes.geometry.corners import distinct_rows, distinct_values
from tangentry.nodes.geometry.directions import Directions, triangle_directions
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.geometry.vectors import axis_across, dot, reject, unit
from tangentry.nodes.model import Frames, Part, Stream
from tangentry.pipeline.flow import Array

UP = np.array([0.0, 0.0, 1.0])
FLATTEST = 1e-6  # a tangent of which less than this is left across its normal points along it, and is no tangent


def solve_frames(part: Part, uv: Stream, uv_set: int, v_down: bool, method: str) -> Frames:
    """The frames of a part that has normals.

    uv      the UVs to follow, a map's transform already in them
    method  "face", "uniform", "area", "angle" (skew kept, see averaging.py) or "mikktspace"

    Corners of one `part.vertices` number are averaged together; without such numbers, those of one position, normal
    and UV. What no UVs define takes the tangent of its own face, else that of another corner of its point, else an
    axis across its normal (Duff et al. 2017), and is marked.
    """
    assert part.normals is not None
    triangles, face = triangulate(part)
    found = triangle_directions(part, triangles, uv, v_down)
    normal = np.ascontiguousarray(part.normals.values[part.normals.index])
    if method == "mikktspace":
        solved = mikktspace.solve(
            part.starts, triangles, face, _identity(part, uv), part.points.values, part.points.index, normal, found
        )
        index, tangent, bitangent, side = solved.index, solved.tangent, None, solved.side
    else:
        index, first = distinct_rows(_summed_together(part, uv, method))
        weights = "area" if method == "face" else method
        averaged = averaging.average(triangles, index, _row_normals(normal, index, len(first)), found, weights)
        tangent, bitangent, side = averaged.tangent, averaged.bitangent, averaged.side
    frames = Frames(tangent, bitangent, side, np.zeros(len(tangent), bool), index, uv_set, method)
    return _defined(part, frames, _row_normals(normal, index, len(tangent)), face, found)


def identity(part: Part, *streams: Stream | None) -> Array:
    """(corners,) int32: equal where positions and the values of every stream are, whatever the indices say."""
    labels = [
        distinct_values(stream.values)[0][stream.index] for stream in (part.points, *streams) if stream is not None
    ]
    return distinct_rows(*labels)[0]


def _identity(part: Part, uv: Stream) -> Array:
    same = identity(part, part.normals, uv)
    return same if part.vertices is None else distinct_rows(same, part.vertices)[0]


def _summed_together(part: Part, uv: Stream, method: str) -> Array:
    if method == "face":
        return np.repeat(np.arange(part.face_count, dtype=np.int32), np.diff(part.starts))
    return part.vertices if part.vertices is not None else identity(part, part.normals, uv)


def _row_normals(normal: Array, index: Array, count: int) -> Array:
    """(rows, 3) float32: the mean normal, unit, of the corners that have each row."""
    total = np.stack([np.bincount(index, normal[:, axis], count) for axis in range(3)], axis=1)
    total[~total.any(axis=1)] = UP
    return unit(total).astype(np.float32)


def _defined(part: Part, frames: Frames, normal: Array, face: Array, found: Directions) -> Frames:
    """Frames with every row defined; `normal` is that of each row."""
    across = reject(frames.tangents, normal)
    lost = (frames.sides == 0) | ~(dot(across, across) > FLATTEST**2)
    if not lost.any():
        return frames
    tangent, side, own = frames.tangents.copy(), frames.sides.copy(), normal[lost]
    filled, filled_side = axis_across(own), np.ones(len(own), np.int8)
    for offer, offered_side in (_lent(part, frames, lost), _face_tangents(part, frames, face, found)):
        laid = reject(offer[lost], own)
        usable = (dot(laid, laid) > FLATTEST**2) & (offered_side[lost] != 0)
        filled = np.where(usable[:, None], unit(laid), filled)
        filled_side = np.where(usable, offered_side[lost], filled_side)
    tangent[lost], side[lost] = filled, filled_side
    bitangent = frames.bitangents
    if bitangent is not None:
        bitangent = bitangent.copy()
        bitangent[lost] = np.cross(own, tangent[lost]) * side[lost][:, None]
    return Frames(tangent, bitangent, side, lost, frames.index, frames.uv, frames.method)


def _face_tangents(part: Part, frames: Frames, face: Array, found: Directions) -> tuple[Array, Array]:
    """What the faces of each row say: (rows, 3) float64 unit tangents, by area, and (rows,) int8 sides."""
    columns = [*(found.tangent * found.area[:, None]).T, found.side]
    owner = np.repeat(np.arange(part.face_count), np.diff(part.starts))
    by_face = [np.bincount(face, column, part.face_count)[owner] for column in columns]
    total = np.stack([np.bincount(frames.index, column, len(frames.tangents)) for column in by_face], axis=1)
    return unit(total[:, :3]), np.sign(total[:, 3]).astype(np.int8)


def _lent(part: Part, frames: Frames, lost: Array) -> tuple[Array, Array]:
    """A frame that other corners of a row's point have, of several the greatest: (rows, 3) tangents, (rows,) sides."""
    point = distinct_values(part.points.values)[0][part.points.index]
    sound = np.flatnonzero(~lost)
    rank = np.full(len(lost), -1)
    rank[sound[np.lexsort(frames.tangents[sound].T)]] = np.arange(len(sound))
    greatest = np.full(int(point.max(initial=-1)) + 1, -1)
    np.maximum.at(greatest, point, rank[frames.index])
    lent = np.full(len(lost), -1)
    np.maximum.at(lent, frames.index, greatest[point])
    row = np.argsort(rank)[len(lost) - len(sound) :][lent] if len(sound) else np.zeros(len(lost), int)
    has = lent >= 0
    return np.where(has[:, None], frames.tangents[row], 0), np.where(has, frames.sides[row], 0)


def morph_tangents(part: Part, moved: Part, frames: Frames, uv: Stream, v_down: bool) -> Array:
    """(frames, 3) float32: how each frame's tangent moves when the part's points and normals do.

    Solved again on the moved part with the base's own grouping, so that rows correspond.
    """
    held = Part(moved.name, moved.material, moved.starts, moved.points, moved.normals, moved.uvs, vertices=frames.index)
    after = solve_frames(held, uv, frames.uv, v_down, frames.method if frames.method != "stored" else "mikktspace")
    total = np.zeros((len(frames.tangents), 3))
    total[frames.index] = after.tangents[after.index]
    return (total - frames.tangents).astype(np.float32)
