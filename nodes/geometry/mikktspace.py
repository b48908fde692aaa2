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
from tangentry.nodes.geometry.directions import Directions
from tangentry.nodes.geometry.unions import number, union
from tangentry.pipeline.flow import Array


class Solved(NamedTuple):
    """Frames by group."""

    tangent: Array  # (groups, 3) float32, unit; zero where nothing defines one
    side: Array  # (groups,) int8, +1 or -1; 0 where nothing defines one
    index: Array  # (corners,) int32: the group of each corner


def solve(
    starts: Array,
    triangles: Array,
    face: Array,
    vertex: Array,
    points: Array,
    at: Array,
    normal: Array,
    found: Directions,
) -> Solved:
    """Solve a part.

    starts     (faces + 1,) int32
    triangles  (n, 3) int32 corner numbers, and their face (n,) int32
    vertex     (corners,) int32: corners of one number are one vertex
    points     (points, 3) float32, and `at` (corners,) int32: the point of each corner
    normal     (corners, 3) float32, unit
    """
    corners = len(vertex)
    side, solid, edges = sides_of_faces(starts, face, vertex, found)
    parent = np.arange(corners, dtype=np.int32)
    _join(starts, vertex, solid, side, *edges, parent)
    index = np.empty(corners, np.int32)
    groups = number(parent, index)
    total = np.zeros((groups, 3))
    group_side = np.zeros(groups, np.int8)
    _add_up(triangles, face, points, at, normal, found.tangent, found.side, side, index, total, group_side)
    tangent = np.zeros((groups, 3), np.float32)
    _normalise(total, tangent)
    _borrow(starts, vertex, solid, index, tangent, group_side)
    return Solved(tangent, group_side, index)


def sides_of_faces(
    starts: Array, face: Array, vertex: Array, found: Directions
) -> tuple[Array, Array, tuple[Array, Array, Array]]:
    """The side each face is seen from, whether it has area, and its edges: (side, solid, edge table).

    side (faces,) int8: +1 as wound, -1 mirrored; a face without UV area takes the side of its neighbours, 0 where they
    have none.
    """
    side = np.zeros(len(starts) - 1, np.int8)
    solid = np.zeros(len(starts) - 1, np.bool_)
    _face_sides(face, found.side, found.uv_area, found.area, side, solid)
    edges = _edge_table(starts, vertex, solid)
    _adopt_sides(starts, vertex, solid, side, *edges)
    return side, solid, edges


@njit(cache=True, nogil=True)
def _face_sides(face: Array, tri_side: Array, uv_area: Array, area: Array, side: Array, solid: Array) -> None:
    """A polygon is seen from the side of its largest triangle in UV space; it is solid where a triangle has area."""
    largest = np.zeros(len(side), np.float32)
    for t in range(len(face)):
        f = face[t]
        if area[t] > 0:
            solid[f] = True
        if tri_side[t] != 0 and (uv_area[t] > largest[f] or (uv_area[t] == largest[f] and tri_side[t] > side[f])):
            largest[f], side[f] = uv_area[t], tri_side[t]


@njit(cache=True, nogil=True)
def _edge_table(starts: Array, vertex: Array, solid: Array) -> tuple[Array, Array, Array]:
    """Directed edges by hash of their ends: (slots, next, owner), chains of corners, and the face of each corner."""
    corners = len(vertex)
    size = 16
    while size < 2 * corners:
        size *= 2
    slots = np.full(size, -1, np.int32)
    chain = np.full(corners, -1, np.int32)
    owner = np.empty(corners, np.int32)
    for f in range(len(starts) - 1):
        for c in range(starts[f], starts[f + 1]):
            owner[c] = f
            after = c + 1 if c + 1 < starts[f + 1] else starts[f]
            if solid[f] and vertex[c] != vertex[after]:
                slot = _edge_slot(vertex[c], vertex[after], size)
                chain[c] = slots[slot]
                slots[slot] = c
    return slots, chain, owner


@njit(cache=True, nogil=True)
def _edge_slot(a: int, b: int, size: int) -> int:
    key = (np.uint64(a) * np.uint64(0x9E3779B97F4A7C15)) ^ (np.uint64(b) * np.uint64(0xC2B2AE3D27D4EB4F))
    key ^= key >> np.uint64(31)
    key *= np.uint64(0x9E3779B97F4A7C15)
    return np.int64((key >> np.uint64(20)) & np.uint64(size - 1))


@njit(cache=True, nogil=True)
def _adopt_sides(
    starts: Array, vertex: Array, solid: Array, side: Array, slots: Array, chain: Array, owner: Array
) -> None:
    """Faces without UV area take the side that most of their neighbours have, wave after wave."""
    faces = len(starts) - 1
    front = np.empty(faces, np.int32)
    open_count = 0
    for f in range(faces):
        if solid[f] and side[f] == 0:
            front[open_count] = f
            open_count += 1
    given = np.empty(faces, np.int8)
    while open_count:
        kept = 0
        changed = False
        for k in range(open_count):
            f = front[k]
            votes = 0
            heard = False
            for c in range(starts[f], starts[f + 1]):
                after = c + 1 if c + 1 < starts[f + 1] else starts[f]
                other = slots[_edge_slot(vertex[after], vertex[c], len(slots))]
                while other >= 0:
                    g = owner[other]
                    end = other + 1 if other + 1 < starts[g + 1] else starts[g]
                    if vertex[other] == vertex[after] and vertex[end] == vertex[c] and side[g] != 0:
                        votes += side[g]
                        heard = True
                    other = chain[other]
            given[k] = (1 if votes >= 0 else -1) if heard else 0
        for k in range(open_count):
            if given[k] != 0:
                side[front[k]] = given[k]
                changed = True
            else:
                front[kept] = front[k]
                kept += 1
        open_count = kept
        if not changed:
            break


@njit(cache=True, nogil=True)
def _join(
    starts: Array, vertex: Array, solid: Array, side: Array, slots: Array, chain: Array, owner: Array, parent: Array
) -> None:
    """Join the corners at both ends of every edge between faces seen from one side."""
    for f in range(len(starts) - 1):
        if not solid[f]:
            continue
        for c in range(starts[f], starts[f + 1]):
            after = c + 1 if c + 1 < starts[f + 1] else starts[f]
            if vertex[c] == vertex[after]:
                union(parent, c, after)
                continue
            other = slots[_edge_slot(vertex[after], vertex[c], len(slots))]
            while other >= 0:
                g = owner[other]
                end = other + 1 if other + 1 < starts[g + 1] else starts[g]
                if vertex[other] == vertex[after] and vertex[end] == vertex[c] and side[f] == side[g]:
                    union(parent, c, end)
                    union(parent, after, other)
                other = chain[other]


@njit(cache=True, nogil=True)
def _add_up(
    triangles: Array,
    face: Array,
    points: Array,
    at: Array,
    normal: Array,
    tangent: Array,
    tri_side: Array,
    side: Array,
    index: Array,
    total: Array,
    group_side: Array,
) -> None:
    for t in range(len(triangles)):
        for k in range(3):
            c = triangles[t, k]
            g = index[c]
            group_side[g] = side[face[t]]
            if tri_side[t] == 0:
                continue
            nx, ny, nz = np.float64(normal[c, 0]), np.float64(normal[c, 1]), np.float64(normal[c, 2])
            tx, ty, tz = np.float64(tangent[t, 0]), np.float64(tangent[t, 1]), np.float64(tangent[t, 2])
            lean = tx * nx + ty * ny + tz * nz
            tx, ty, tz = tx - nx * lean, ty - ny * lean, tz - nz * lean
            length = np.sqrt(tx * tx + ty * ty + tz * tz)
            if not length > 0:
                continue
            p, before, after = at[c], at[triangles[t, (k + 2) % 3]], at[triangles[t, (k + 1) % 3]]
            weight = _angle_in_plane(points, p, before, after, nx, ny, nz) / length
            total[g, 0] += tx * weight
            total[g, 1] += ty * weight
            total[g, 2] += tz * weight


@njit(cache=True, nogil=True)
def _angle_in_plane(points: Array, p: int, before: int, after: int, nx: float, ny: float, nz: float) -> float:
    """The angle at p between two edges laid into the plane of a normal, radians."""
    ax = np.float64(points[before, 0]) - points[p, 0]
    ay = np.float64(points[before, 1]) - points[p, 1]
    az = np.float64(points[before, 2]) - points[p, 2]
    bx = np.float64(points[after, 0]) - points[p, 0]
    by = np.float64(points[after, 1]) - points[p, 1]
    bz = np.float64(points[after, 2]) - points[p, 2]
    a_lean, b_lean = ax * nx + ay * ny + az * nz, bx * nx + by * ny + bz * nz
    ax, ay, az = ax - nx * a_lean, ay - ny * a_lean, az - nz * a_lean
    bx, by, bz = bx - nx * b_lean, by - ny * b_lean, bz - nz * b_lean
    cx, cy, cz = ay * bz - az * by, az * bx - ax * bz, ax * by - ay * bx
    return np.arctan2(np.sqrt(cx * cx + cy * cy + cz * cz), ax * bx + ay * by + az * bz)


@njit(cache=True, nogil=True)
def _normalise(total: Array, tangent: Array) -> None:
    for g in range(len(total)):
        length = np.sqrt(total[g, 0] ** 2 + total[g, 1] ** 2 + total[g, 2] ** 2)
        if length > 0:
            for k in range(3):
                tangent[g, k] = total[g, k] / length


@njit(cache=True, nogil=True)
def _borrow(starts: Array, vertex: Array, solid: Array, index: Array, tangent: Array, side: Array) -> None:
    """Corners of faces without area move to a group at their vertex, of several to that of the greatest tangent."""
    lender = np.full(vertex.max() + 1 if len(vertex) else 0, -1, np.int32)
    for f in range(len(starts) - 1):
        if solid[f]:
            for c in range(starts[f], starts[f + 1]):
                g, v = index[c], vertex[c]
                if side[g] != 0 and (lender[v] < 0 or _greater(tangent, g, lender[v])):
                    lender[v] = g
    for f in range(len(starts) - 1):
        if not solid[f]:
            for c in range(starts[f], starts[f + 1]):
                if lender[vertex[c]] >= 0:
                    index[c] = lender[vertex[c]]


@njit(cache=True, nogil=True)
def _greater(rows: Array, a: int, b: int) -> bool:
    for k in range(rows.shape[1]):
        if rows[a, k] != rows[b, k]:
            return rows[a, k] > rows[b, k]
    return False
