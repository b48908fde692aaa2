"""Per-corner tangent frames by the scheme that glTF 2.0 names as its default (Mikkelsen 2008, chapter 3).

    vertex    corners with one position, one normal and one UV
    group     corners of a vertex that are joined, edge by edge, through faces seen from the same side
    tangent   normalised sum, over a group, of corner angle x the face's tangent laid into the plane of the normal

Corner angles are taken between edges laid into that plane, too. A face without UV area joins the groups around it and
adds nothing; a face without area takes its frames from others at its vertices. All triangles of a polygon are seen from
one side, that of the largest in UV space. Nothing depends on the order of faces, corners or vertices.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.geometry.angles import angle_between_edges
from tangentry.nodes.geometry.cores import core_count, in_threads
from tangentry.nodes.geometry.directions import Directions, edge
from tangentry.nodes.geometry.rings import NEXT, PREVIOUS, join_ring, rings
from tangentry.nodes.geometry.sides import sides_of_faces
from tangentry.nodes.geometry.unions import root
from tangentry.pipeline.flow import Array

FEW = 50_000  # corners below which a thread of their own is not worth its start
CANCELLED = 1e-5  # share of its terms below which a sum is rounding
FLAT = np.int8(2)  # kind of a triangle whose face has no area in space; others have their face's side for a kind


class Solved(NamedTuple):
    """Frames by group."""

    tangent: Array  # (groups, 3) float32, unit; zero where nothing defines one
    side: Array  # (groups,) int8, +1 or -1; 0 where nothing defines one
    group: Array  # (corners,) int32; -1 for corners of no triangle


def solve(
    triangles: Array, face: Array, faces: int, vertex: Array, points: Array, normals: Array, found: Directions
) -> Solved:
    """Solve a part.

    triangles  (n, 3) int32 corner numbers, and their face (n,) int32, of so many `faces`
    vertex     (corners,) int32: corners of one number are one vertex
    points     (vertices, 3) float32
    normals    (vertices, 3) float32
    """
    at = vertex[triangles]
    sides = sides_of_faces(at, face, faces, found)
    kind = np.where(sides.solid, sides.side, FLAT)[face]
    starts, ring = rings(at, len(points))
    tangent, side = np.empty((len(ring), 3), np.float32), np.empty(len(ring), np.int8)
    group = np.full(len(vertex), -1, np.int32)
    cores = core_count() if len(ring) > FEW else 1
    bounds = np.searchsorted(starts, len(ring) * np.arange(cores) // cores).astype(np.int32)
    arrays = (triangles, at, kind, found.tangent, starts, ring, points, normals, tangent, side, group)
    counts = in_threads(
        lambda k: _solve(bounds[k], bounds[k + 1] if k + 1 < cores else np.int32(len(points)), *arrays),
        cores,
    )
    return _closed_up(tangent, side, group, starts[bounds], counts)


def _closed_up(tangent: Array, side: Array, group: Array, begins: Array, counts: list[int]) -> Solved:
    """Runs of groups, so many from each begin, moved together."""
    ends = begins + counts
    for begin, gap in zip(begins[:0:-1], (begins[1:] - ends[:-1])[::-1], strict=True):
        np.subtract(group, gap, out=group, where=group >= begin)
    rows = [slice(begin, end) for begin, end in zip(begins, ends, strict=True)]
    return Solved(np.concatenate([tangent[row] for row in rows]), np.concatenate([side[row] for row in rows]), group)


@njit(cache=True, nogil=True)
def _solve(
    from_vertex: int,
    to_vertex: int,
    triangles: Array,
    at: Array,
    kind: Array,
    tri_tangent: Array,
    starts: Array,
    ring: Array,
    points: Array,
    normals: Array,
    tangent: Array,
    side: Array,
    group: Array,
) -> int:
    """Write the groups of one vertex after another, from the row where its ring starts; gives how many there are."""
    widest = 0
    for v in range(from_vertex, to_vertex):
        widest = max(widest, starts[v + 1] - starts[v])
    seen = np.full(len(points), -1, np.int32)
    before, after = np.empty(widest, np.int32), np.empty(widest, np.int32)
    chain, parent, name = np.empty(widest, np.int32), np.empty(widest, np.int32), np.empty(widest, np.int32)
    total = np.empty((widest, 4))
    groups = starts[from_vertex]
    for v in range(from_vertex, to_vertex):
        begin, size = starts[v], starts[v + 1] - starts[v]
        nx, ny, nz = np.float64(normals[v, 0]), np.float64(normals[v, 1]), np.float64(normals[v, 2])
        scale = 1 / max(np.sqrt(nx * nx + ny * ny + nz * nz), 1e-30)
        nx, ny, nz = nx * scale, ny * scale, nz * scale
        _sort_ring(kind, ring, begin, size)
        for i in range(size):
            t, k = ring[begin + i] >> 2, ring[begin + i] & 3
            before[i], after[i] = at[t, PREVIOUS[k]], at[t, NEXT[k]]
        first, start = groups, 0
        while start < size and kind[ring[begin + start] >> 2] != FLAT:
            this, end = kind[ring[begin + start] >> 2], start + 1
            while end < size and kind[ring[begin + end] >> 2] == this:
                end += 1
            join_ring(before, after, start, end, seen, chain, parent)
            for i in range(start, end):
                t, k = ring[begin + i] >> 2, ring[begin + i] & 3
                top = root(parent, i)
                if top == i:
                    name[i], side[groups] = groups, this
                    total[groups - first, 0] = total[groups - first, 1] = 0
                    total[groups - first, 2] = total[groups - first, 3] = 0
                    groups += 1
                g = name[top]
                group[triangles[t, k]] = g
                tx, ty, tz = np.float64(tri_tangent[t, 0]), np.float64(tri_tangent[t, 1]), np.float64(tri_tangent[t, 2])
                lean = tx * nx + ty * ny + tz * nz
                tx, ty, tz = tx - nx * lean, ty - ny * lean, tz - nz * lean
                length = np.sqrt(tx * tx + ty * ty + tz * tz)
                if length > 0:
                    angle = _angle_in_plane(points, v, before[i], after[i], nx, ny, nz)
                    weight = angle / length
                    total[g - first, 0] += tx * weight
                    total[g - first, 1] += ty * weight
                    total[g - first, 2] += tz * weight
                    total[g - first, 3] += angle
            start = end
        for g in range(first, groups):
            x, y, z = total[g - first, 0], total[g - first, 1], total[g - first, 2]
            length = np.sqrt(x * x + y * y + z * z)
            scale = 1 / length if length > CANCELLED * total[g - first, 3] else 0.0
            tangent[g, 0], tangent[g, 1], tangent[g, 2] = x * scale, y * scale, z * scale
            if scale == 0:
                side[g] = 0
        if start < size:
            groups = _borrow(triangles, ring, begin + start, begin + size, first, groups, tangent, side, group)
    return groups - starts[from_vertex]


@njit(cache=True, nogil=True)
def _sort_ring(kind: Array, ring: Array, begin: int, size: int) -> None:
    """Bring the triangles of each kind together, those without area last."""
    alike = True
    for i in range(1, size):
        alike = alike and kind[ring[begin + i] >> 2] == kind[ring[begin] >> 2]
    if alike:
        return
    place = begin
    for wanted in range(-1, FLAT):
        for i in range(place, begin + size):
            if kind[ring[i] >> 2] == wanted:
                ring[i], ring[place] = ring[place], ring[i]
                place += 1


@njit(cache=True, nogil=True, inline="always")
def _angle_in_plane(points: Array, p: int, before: int, after: int, nx: float, ny: float, nz: float) -> float:
    """The angle at p between two edges laid into the plane of a normal, radians."""
    ax, ay, az = edge(points, p, before)
    bx, by, bz = edge(points, p, after)
    a_lean, b_lean = ax * nx + ay * ny + az * nz, bx * nx + by * ny + bz * nz
    across = nx * (ay * bz - az * by) + ny * (az * bx - ax * bz) + nz * (ax * by - ay * bx)
    return angle_between_edges(abs(across), ax * bx + ay * by + az * bz - a_lean * b_lean)


@njit(cache=True, nogil=True)
def _borrow(
    triangles: Array,
    ring: Array,
    start: int,
    end: int,
    first: int,
    groups: int,
    tangent: Array,
    side: Array,
    group: Array,
) -> int:
    """Corners of faces without area join a group at their vertex, that of the greatest tangent, or one of their own."""
    lender = -1
    for g in range(first, groups):
        if side[g] != 0 and (lender < 0 or _greater(tangent, g, lender)):
            lender = g
    if lender < 0:
        lender = groups
        tangent[lender], side[lender] = 0, 0
        groups += 1
    for i in range(start, end):
        group[triangles[ring[i] >> 2, ring[i] & 3]] = lender
    return groups


@njit(cache=True, nogil=True)
def _greater(rows: Array, one: int, other: int) -> bool:
    for axis in range(3):
        if rows[one, axis] != rows[other, axis]:
            return rows[one, axis] > rows[other, axis]
    return False
