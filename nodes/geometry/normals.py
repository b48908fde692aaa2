"""Vertex normals as sums over the faces around a point.

face        each face its own
area        all faces of a point, by the area of the whole face (Max 1999)
angle       all faces of a point, by the angle at the corner (Thuermer & Wuethrich 1998)
crease      by angle, but never across an edge whose faces stand at more than a given angle
smoothing   by angle, but only between faces of one smoothing group (group 0: none)
"""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.geometry.corners import distinct_rows, distinct_values
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.geometry.unions import number, union
from tangentry.nodes.geometry.vectors import dot, unit, unit_or_up
from tangentry.nodes.model import Part, Stream
from tangentry.pipeline.flow import Array


@np.errstate(all="ignore")  # positions that are not finite give no normal
def build_normals(part: Part, method: str, crease: float = 30.0) -> Stream:
    """A part's normals; `crease` in degrees. A corner whose faces have no area gets (0, 0, 1)."""
    triangles, face = triangulate(part)
    edge1, edge2 = (_points_of(part, triangles[:, k]) - _points_of(part, triangles[:, 0]) for k in (1, 2))
    across = np.cross(edge1, edge2)
    if method == "face":
        index = np.repeat(np.arange(part.face_count, dtype=np.int32), np.diff(part.starts))
        return Stream(_finish(_sums(across, face, part.face_count)), index)
    point = distinct_values(part.points.values)[0][part.points.index]
    if method == "area":
        index = distinct_rows(point)[0]
        owner = np.repeat(np.arange(part.face_count), np.diff(part.starts))
        return Stream(_finish(_sums(_sums(across, face, part.face_count)[owner], index)), index)
    if method == "angle":
        index = distinct_rows(point)[0]
    else:
        index = _joined(part, point, unit(_sums(across, face, part.face_count)), method, crease)
    total = np.zeros((int(index.max(initial=-1)) + 1, 3))
    _add_up(triangles, index, unit(across), _angles(edge1, edge2), total)
    return Stream(_finish(total), index)


def _sums(rows: Array, index: Array, count: int = 0) -> Array:
    """(n, 3) the sums of rows that have one index."""
    total = np.stack([np.bincount(index, rows[:, axis], count) for axis in range(3)], axis=1)
    return total.astype(np.float64)


def _points_of(part: Part, corners: Array) -> Array:
    return part.points.values[part.points.index[corners]].astype(np.float64)


def _finish(total: Array) -> Array:
    normals: Array = unit_or_up(total).astype(np.float32)
    return normals


def _angles(edge1: Array, edge2: Array) -> Array:
    """(n, 3) the angles of triangles, radians."""
    twice = np.sqrt(dot(np.cross(edge1, edge2), np.cross(edge1, edge2)))
    dot0 = dot(edge1, edge2)
    dot1, dot2 = dot(edge1, edge1) - dot0, dot(edge2, edge2) - dot0
    return np.stack([np.arctan2(twice, one) for one in (dot0, dot1, dot2)], axis=1)


@njit(cache=True, nogil=True)
def _add_up(triangles: Array, index: Array, normal: Array, weight: Array, total: Array) -> None:
    for t in range(len(triangles)):
        for k in range(3):
            g = index[triangles[t, k]]
            for axis in range(3):
                total[g, axis] += weight[t, k] * normal[t, axis]


def _joined(part: Part, point: Array, face_normal: Array, method: str, crease: float) -> Array:
    """(corners,) int32: groups of corners joined over the edges that are smooth."""
    group = (
        part.smoothing if method == "smoothing" and part.smoothing is not None else np.zeros(part.face_count, np.int32)
    )
    limit = np.cos(np.radians(crease)) if method == "crease" else 2.0
    parent = np.arange(part.corner_count, dtype=np.int32)
    _join_smooth(part.starts, point.astype(np.int32), face_normal, np.ascontiguousarray(group, np.int32), limit, parent)
    index = np.empty(part.corner_count, np.int32)
    number(parent, index)
    return index


@njit(cache=True, nogil=True)
def _join_smooth(starts: Array, point: Array, face_normal: Array, group: Array, limit: float, parent: Array) -> None:
    """Join corners at both ends of an edge where its faces are of one smoothing group, or flatter than the limit."""
    corners = len(point)
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
            low, high = min(point[c], point[after]), max(point[c], point[after])
            key = (np.uint64(low) * np.uint64(0x9E3779B97F4A7C15)) ^ (np.uint64(high) * np.uint64(0xC2B2AE3D27D4EB4F))
            key = (key ^ (key >> np.uint64(31))) * np.uint64(0x9E3779B97F4A7C15)
            slot = np.int64((key >> np.uint64(20)) & np.uint64(size - 1))
            other = slots[slot]
            while other >= 0:
                g = owner[other]
                end = other + 1 if other + 1 < starts[g + 1] else starts[g]
                cosine = 0.0
                for axis in range(3):
                    cosine += face_normal[f, axis] * face_normal[g, axis]
                if (group[f] != 0 and group[f] == group[g]) or cosine >= limit:
                    if point[other] == point[c] and point[end] == point[after]:
                        union(parent, c, other)
                        union(parent, after, end)
                    elif point[other] == point[after] and point[end] == point[c]:
                        union(parent, c, end)
                        union(parent, after, other)
                other = chain[other]
            chain[c] = slots[slot]
            slots[slot] = c
