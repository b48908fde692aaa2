"""Tangent frames of a part by a named method, never undefined."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numba import njit
from tangentry.nodes.geometry import averaging, mikktspace
from tangentry.nodes.geometry.corners import distinct_corners, distinct_values, divided
from tangentry.nodes.geometry.directions import triangle_directions
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.geometry.vectors import axis_across, dot, reject, unit, unit_or_up
from tangentry.nodes.model import Frames, Part, Stream
from tangentry.pipeline.flow import Array

FLATTEST = 1e-6  # a tangent of which less than this is left across its normal points along it, and is no tangent


def solve_frames(part: Part, uv: Stream, uv_set: int, v_down: bool, method: str) -> Frames:
    """The frames of a part that has normals.

    uv      the UVs to follow, a map's transform already in them
    method  "face", "uniform", "area", "angle" (skew kept, see averaging.py) or "mikktspace"

    Corners of one `part.vertices` number are averaged together; without such numbers, those of one position, normal
    and UV. What no UVs define takes the tangent of its own faces, else that of another corner of its point, else an
    axis across its normal (Duff et al. 2017), and is marked.
    """
    assert part.normals is not None
    cut = triangulate(part)
    solve = _by_scheme if method == "mikktspace" else _by_sums
    frames = solve(part, part.normals, uv, uv_set, v_down, method, *cut)
    if (frames.sides != 0).all():
        return frames
    with np.errstate(all="ignore"):  # values that are not finite are no offers
        return _defined(part, part.normals, uv, v_down, _used(frames), *cut)


def _by_scheme(
    part: Part, normals: Stream, uv: Stream, uv_set: int, v_down: bool, method: str, triangles: Array, face: Array
) -> Frames:
    vertices = distinct_corners(part.points, normals, uv)
    if part.vertices is not None:
        vertices = divided(vertices, part.vertices)
    points, normal = (stream.values[rows] for stream, rows in zip((part.points, normals), vertices.rows, strict=False))
    found = triangle_directions(part, triangles, uv, v_down)
    solved = mikktspace.solve(triangles, face, part.face_count, vertices.label, points, normal, found)
    tangent, side, group = solved
    loose = np.flatnonzero(group < 0)
    if len(loose):  # corners of no triangle
        group[loose] = len(side) + np.arange(len(loose), dtype=np.int32)
        tangent = np.concatenate([tangent, np.zeros((len(loose), 3), np.float32)])
        side = np.concatenate([side, np.zeros(len(loose), np.int8)])
    return Frames(tangent, None, side, np.zeros(len(side), bool), group, uv_set, method)


def _by_sums(
    part: Part, normals: Stream, uv: Stream, uv_set: int, v_down: bool, method: str, triangles: Array, face: Array
) -> Frames:
    if method != "face" and part.vertices is None:
        vertices = distinct_corners(part.points, normals, uv)
        index, normal = vertices.label, normals.values[vertices.rows[1]]
    else:
        index = _owner(part) if part.vertices is None or method == "face" else part.vertices
        normal = _mean_normals(normals, index)
    tangent, bitangent, side = averaging.average(part, triangles, uv, v_down, index, normal, method)
    return Frames(tangent, bitangent, side, np.zeros(len(side), bool), index, uv_set, method)


def _owner(part: Part) -> Array:
    """(corners,) int32: the face of each corner."""
    return np.repeat(np.arange(part.face_count, dtype=np.int32), np.diff(part.starts))


def _mean_normals(normals: Stream, index: Array) -> Array:
    """(rows, 3) float32: the mean normal, unit, of the corners that have each row of an index."""
    total = np.zeros((int(index.max(initial=-1)) + 1, 3))
    _add_up(unit(normals.values), normals.index, index, total)
    return unit_or_up(total).astype(np.float32)


@njit(cache=True, nogil=True)
def _add_up(values: Array, at: Array, index: Array, total: Array) -> None:
    for c in range(len(index)):
        for axis in range(3):
            total[index[c], axis] += values[at[c], axis]


def _used(frames: Frames) -> Frames:
    """The frames that corners have."""
    used = np.zeros(len(frames.sides), bool)
    used[frames.index] = True
    if used.all():
        return frames
    return replace(
        frames,
        tangents=frames.tangents[used],
        bitangents=None if frames.bitangents is None else frames.bitangents[used],
        sides=frames.sides[used],
        fallback=frames.fallback[used],
        index=(np.cumsum(used, dtype=np.int32) - 1)[frames.index],
    )


def _defined(
    part: Part, normals: Stream, uv: Stream, v_down: bool, frames: Frames, triangles: Array, face: Array
) -> Frames:
    """Frames with every row defined."""
    lost = frames.sides == 0
    own = _mean_normals(normals, frames.index)[lost]
    tangent, side = frames.tangents.copy(), frames.sides.copy()
    filled, filled_side = axis_across(own), np.ones(len(own), np.int8)
    for offer, offered_side in (_lent(part, frames, lost), _face_tangents(part, uv, v_down, frames, triangles, face)):
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


def _face_tangents(
    part: Part, uv: Stream, v_down: bool, frames: Frames, triangles: Array, face: Array
) -> tuple[Array, Array]:
    """What the faces of each row say: (rows, 3) float64 unit tangents, by area, and (rows,) int8 sides."""
    found = triangle_directions(part, triangles, uv, v_down)
    columns = [*(found.tangent * np.where(found.side != 0, found.area, 0)[:, None]).T, found.side]
    owner = _owner(part)
    by_face = [np.bincount(face, column, part.face_count)[owner] for column in columns]
    total = np.stack([np.bincount(frames.index, column, len(frames.tangents)) for column in by_face], axis=1)
    return unit(total[:, :3].astype(np.float64)), np.sign(total[:, 3]).astype(np.int8)


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
