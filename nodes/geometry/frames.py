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
        averaged = _averaged(part, triangles, face, index, normal[first], found, method)
        tangent, bitangent, side = averaged.tangent, averaged.bitangent, averaged.side
    frames = Frames(tangent, bitangent, side, np.zeros(len(tangent), bool), index, uv_set, method)
    return _defined(part, frames, normal, face, found)


def identity(part: Part, *streams: Stream | None) -> Array:
    """(corners,) int32: equal where a corner's position and the values of every stream are, whatever the indices say."""
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


def _averaged(
    part: Part, triangles: Array, face: Array, index: Array, normal: Array, found: Directions, method: str
) -> averaging.Averaged:
    return averaging.average(triangles, index, normal, found, "area" if method == "face" else method)


def _face_tangents(part: Part, face: Array, found: Directions) -> Array:
    """(faces, 4) float64: the sum of each face's unit tangents by area, and of its sides."""
    total = np.zeros((part.face_count, 4))
    np.add.at(total[:, :3], face, found.tangent * found.area[:, None])
    np.add.at(total[:, 3], face, found.side)
    return total


def _defined(part: Part, frames: Frames, normal: Array, face: Array, found: Directions) -> Frames:
    """Frames with every row defined; a row that nothing defined is made for the first corner that has it."""
    index = frames.index
    corner = np.zeros(len(frames.tangents), np.int32)
    corner[index[::-1]] = np.arange(len(index) - 1, -1, -1, dtype=np.int32)
    across = reject(frames.tangents, normal[corner])
    lost = (frames.sides == 0) | ~(dot(across, across) > FLATTEST**2)
    if not lost.any():
        return frames
    tangent, side = frames.tangents.copy(), frames.sides.copy()
    rows, own = corner[lost], normal[corner[lost]]
    owner = np.repeat(np.arange(part.face_count), np.diff(part.starts))[rows]
    face_tangents = _face_tangents(part, face, found)
    lender = _lenders(part, index, lost)[rows]
    filled, filled_side = axis_across(own), np.ones(len(rows), np.int8)
    for offer, offered_side in (
        (np.where((lender >= 0)[:, None], tangent[lender], 0), side[lender]),
        (unit(face_tangents[owner, :3]), np.sign(face_tangents[owner, 3])),
    ):
        laid = reject(offer, own)
        usable = (dot(laid, laid) > FLATTEST**2) & (offered_side != 0)
        filled = np.where(usable[:, None], unit(laid), filled)
        filled_side = np.where(usable, offered_side, filled_side)
    tangent[lost], side[lost] = filled, filled_side
    bitangent = frames.bitangents
    if bitangent is not None:
        bitangent = bitangent.copy()
        bitangent[lost] = np.cross(own, tangent[lost]) * side[lost][:, None]
    return Frames(tangent, bitangent, side, lost, index, frames.uv, frames.method)


def _lenders(part: Part, index: Array, lost: Array) -> Array:
    """(corners,) int32: a frame that another corner of the same point has, -1 where there is none."""
    point = distinct_values(part.points.values)[0][part.points.index]
    sound = ~lost[index]
    lender = np.full(int(point.max(initial=-1)) + 1, -1, np.int32)
    lender[point[sound][::-1]] = index[sound][::-1]
    return lender[point]


def morph_tangents(part: Part, moved: Part, frames: Frames, uv: Stream, v_down: bool) -> Array:
    """(frames, 3) float32: how each frame's tangent moves when the part's points and normals do.

    Solved again on the moved part with the base's own grouping, so that rows correspond.
    """
    held = Part(moved.name, moved.material, moved.starts, moved.points, moved.normals, moved.uvs, vertices=frames.index)
    after = solve_frames(held, uv, frames.uv, v_down, frames.method if frames.method != "stored" else "mikktspace")
    total = np.zeros((len(frames.tangents), 3))
    total[frames.index] = after.tangents[after.index]
    return (total - frames.tangents).astype(np.float32)
