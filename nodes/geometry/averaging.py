"""Tangent frames as sums over the triangles around a vertex, by weights of one's choice, skew kept.

face      each face its own, its triangles by area
uniform   every triangle counts alike
area      by its area in space (Max 1999 discusses such weights for normals)
angle     by its angle at the corner (Thuermer & Wuethrich 1998)
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.geometry.angles import angle_between_edges
from tangentry.nodes.geometry.directions import edge, laid
from tangentry.nodes.model import Part, Stream
from tangentry.pipeline.flow import Array

CANCELLED = 1e-5  # share of its terms' lengths below which a sum is rounding
FLATTEST = 1e-6  # volume below which unit normal, tangent and bitangent lie in one plane and are no frame


class Averaged(NamedTuple):
    """Frames by vertex."""

    tangent: Array  # (vertices, 3) float32, unit; zero where nothing defines one
    bitangent: Array  # (vertices, 3) float32, unit; zero where nothing defines one
    side: Array  # (vertices,) int8: +1, -1, or 0 where nothing defines one


def average(
    part: Part, triangles: Array, uv: Stream, v_down: bool, vertex: Array, normals: Array, method: str
) -> Averaged:
    """Sums of the unit tangents and bitangents around each vertex; sums that cancel out define nothing.

    triangles  (n, 3) int32 corner numbers
    vertex     (corners,) int32: what is summed together
    normals    (vertices, 3) float32: decide the sides
    method     "face", "uniform", "area" or "angle"
    """
    count = len(normals)
    total = np.zeros((count, 7))
    up = -1.0 if v_down else 1.0
    weighing = {"uniform": 0, "area": 1, "face": 1, "angle": 2}[method]
    _add_up(triangles, part.points.values, part.points.index, uv.values, uv.index, up, vertex, weighing, total)
    made = Averaged(np.empty((count, 3), np.float32), np.empty((count, 3), np.float32), np.empty(count, np.int8))
    _finish(total, normals, *made)
    return made


@njit(cache=True, nogil=True)
def _add_up(
    triangles: Array,
    points: Array,
    at: Array,
    uvs: Array,
    uv_at: Array,
    up: float,
    vertex: Array,
    weighing: int,
    total: Array,
) -> None:
    """Add to each vertex the tangent, the bitangent and the weight."""
    w0 = w1 = w2 = 1.0
    for t in range(len(triangles)):
        c0, c1, c2 = triangles[t, 0], triangles[t, 1], triangles[t, 2]
        x1, y1, z1 = edge(points, at[c0], at[c1])
        x2, y2, z2 = edge(points, at[c0], at[c2])
        q0, q1, q2 = uv_at[c0], uv_at[c1], uv_at[c2]
        u1 = np.float64(uvs[q1, 0]) - np.float64(uvs[q0, 0])
        v1 = (np.float64(uvs[q1, 1]) - np.float64(uvs[q0, 1])) * up
        u2 = np.float64(uvs[q2, 0]) - np.float64(uvs[q0, 0])
        v2 = (np.float64(uvs[q2, 1]) - np.float64(uvs[q0, 1])) * up
        side, tx, ty, tz, bx, by, bz = laid(x1, y1, z1, x2, y2, z2, u1, v1, u2, v2)
        if side == 0:
            continue
        if weighing > 0:
            cx, cy, cz = y1 * z2 - z1 * y2, z1 * x2 - x1 * z2, x1 * y2 - y1 * x2
            w0 = w1 = w2 = np.sqrt(cx * cx + cy * cy + cz * cz)
        if weighing == 2:
            along = x1 * x2 + y1 * y2 + z1 * z2
            w0, w1 = angle_between_edges(w0, along), angle_between_edges(w0, x1 * x1 + y1 * y1 + z1 * z1 - along)
            w2 = max(np.pi - w0 - w1, 0.0)
        for c, w in ((c0, w0), (c1, w1), (c2, w2)):
            v = vertex[c]
            total[v, 0] += w * tx
            total[v, 1] += w * ty
            total[v, 2] += w * tz
            total[v, 3] += w * bx
            total[v, 4] += w * by
            total[v, 5] += w * bz
            total[v, 6] += w


@njit(cache=True, nogil=True)
def _finish(total: Array, normals: Array, tangent: Array, bitangent: Array, side: Array) -> None:
    for v in range(len(total)):
        tx, ty, tz, bx, by, bz = total[v, 0], total[v, 1], total[v, 2], total[v, 3], total[v, 4], total[v, 5]
        t_length, b_length = np.sqrt(tx * tx + ty * ty + tz * tz), np.sqrt(bx * bx + by * by + bz * bz)
        least = CANCELLED * total[v, 6]
        side[v] = 0
        for axis in range(3):
            tangent[v, axis] = bitangent[v, axis] = 0
        if not (least < t_length < np.inf and least < b_length < np.inf):
            continue
        tx, ty, tz, bx, by, bz = (
            tx / t_length,
            ty / t_length,
            tz / t_length,
            bx / b_length,
            by / b_length,
            bz / b_length,
        )
        nx, ny, nz = np.float64(normals[v, 0]), np.float64(normals[v, 1]), np.float64(normals[v, 2])
        turn = (ny * tz - nz * ty) * bx + (nz * tx - nx * tz) * by + (nx * ty - ny * tx) * bz
        if abs(turn) > FLATTEST:
            side[v] = 1 if turn > 0 else -1
            tangent[v, 0], tangent[v, 1], tangent[v, 2] = tx, ty, tz
            bitangent[v, 0], bitangent[v, 1], bitangent[v, 2] = bx, by, bz
