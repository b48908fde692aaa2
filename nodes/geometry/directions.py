"""How a triangle's UVs lie on it: the directions in which u and v grow, the side it is seen from, its areas.

From the edges d1, d2 and the UV differences (u1, v1), (u2, v2) along them (Lengyel 2001):

    tangent   = (v2 d1 - v1 d2) / (u1 v2 - u2 v1)        side = sign(u1 v2 - u2 v1)
    bitangent = (u1 d2 - u2 d1) / (u1 v2 - u2 v1)
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.model import Part, Stream
from tangentry.pipeline.flow import Array


class Directions(NamedTuple):
    """Of every triangle."""

    tangent: Array  # (triangles, 3) float32, unit; zero where the UVs define none
    bitangent: Array  # (triangles, 3) float32, unit; zero where the UVs define none
    side: Array  # (triangles,) int8: +1 as wound in space, -1 mirrored, 0 without UV area
    uv_area: Array  # (triangles,) float32, not negative
    area: Array  # (triangles,) float32, in squared units of the file
    angle: Array  # (triangles, 3) float32: the angle at each corner, radians


def triangle_directions(part: Part, triangles: Array, uv: Stream, v_down: bool) -> Directions:
    """The directions of triangles given as (n, 3) corner numbers, v counted upward whatever the file does."""
    count = len(triangles)
    out = Directions(
        np.zeros((count, 3), np.float32),
        np.zeros((count, 3), np.float32),
        np.zeros(count, np.int8),
        np.zeros(count, np.float32),
        np.zeros(count, np.float32),
        np.zeros((count, 3), np.float32),
    )
    _directions(triangles, part.points.values, part.points.index, uv.values, uv.index, -1.0 if v_down else 1.0, *out)
    return out


@njit(cache=True, nogil=True)
def _directions(
    triangles: Array,
    points: Array,
    at: Array,
    uvs: Array,
    uv_at: Array,
    up: float,
    tangent: Array,
    bitangent: Array,
    side: Array,
    uv_area: Array,
    area: Array,
    angle: Array,
) -> None:
    for t in range(len(triangles)):
        c0, c1, c2 = triangles[t, 0], triangles[t, 1], triangles[t, 2]
        p0, p1, p2 = at[c0], at[c1], at[c2]
        x1 = np.float64(points[p1, 0]) - points[p0, 0]
        y1 = np.float64(points[p1, 1]) - points[p0, 1]
        z1 = np.float64(points[p1, 2]) - points[p0, 2]
        x2 = np.float64(points[p2, 0]) - points[p0, 0]
        y2 = np.float64(points[p2, 1]) - points[p0, 1]
        z2 = np.float64(points[p2, 2]) - points[p0, 2]
        cx, cy, cz = y1 * z2 - z1 * y2, z1 * x2 - x1 * z2, x1 * y2 - y1 * x2
        twice = np.sqrt(cx * cx + cy * cy + cz * cz)
        area[t] = twice / 2
        dot0 = x1 * x2 + y1 * y2 + z1 * z2
        dot1 = x1 * x1 + y1 * y1 + z1 * z1 - dot0
        dot2 = x2 * x2 + y2 * y2 + z2 * z2 - dot0
        angle[t, 0] = np.arctan2(twice, dot0)
        angle[t, 1] = np.arctan2(twice, dot1)
        angle[t, 2] = np.arctan2(twice, dot2)
        q0, q1, q2 = uv_at[c0], uv_at[c1], uv_at[c2]
        u1 = np.float64(uvs[q1, 0]) - uvs[q0, 0]
        v1 = (np.float64(uvs[q1, 1]) - uvs[q0, 1]) * up
        u2 = np.float64(uvs[q2, 0]) - uvs[q0, 0]
        v2 = (np.float64(uvs[q2, 1]) - uvs[q0, 1]) * up
        det = u1 * v2 - u2 * v1
        uv_area[t] = abs(det) / 2
        if not abs(det) > np.finfo(np.float32).tiny:
            continue
        way = 1.0 if det > 0 else -1.0
        tx, ty, tz = (v2 * x1 - v1 * x2) * way, (v2 * y1 - v1 * y2) * way, (v2 * z1 - v1 * z2) * way
        bx, by, bz = (u1 * x2 - u2 * x1) * way, (u1 * y2 - u2 * y1) * way, (u1 * z2 - u2 * z1) * way
        t_length, b_length = np.sqrt(tx * tx + ty * ty + tz * tz), np.sqrt(bx * bx + by * by + bz * bz)
        if not (t_length > 0 and b_length > 0):
            continue
        side[t] = 1 if det > 0 else -1
        tangent[t, 0], tangent[t, 1], tangent[t, 2] = tx / t_length, ty / t_length, tz / t_length
        bitangent[t, 0], bitangent[t, 1], bitangent[t, 2] = bx / b_length, by / b_length, bz / b_length
