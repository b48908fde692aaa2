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

TINY = float(np.finfo(np.float32).tiny)


class Directions(NamedTuple):
    """Of every triangle."""

    tangent: Array  # (triangles, 3) float32, unit; zero where the UVs define none
    bitangent: Array  # (triangles, 3) float32, unit; zero where the UVs define none
    side: Array  # (triangles,) int8: +1 as wound in space, -1 mirrored, 0 without UV area
    uv_area: Array  # (triangles,) float32, not negative
    area: Array  # (triangles,) float32, in squared units of the file


def triangle_directions(part: Part, triangles: Array, uv: Stream, v_down: bool) -> Directions:
    """The directions of triangles given as (n, 3) corner numbers, v counted upward whatever the file does."""
    count = len(triangles)
    out = Directions(
        np.empty((count, 3), np.float32),
        np.empty((count, 3), np.float32),
        np.empty(count, np.int8),
        np.empty(count, np.float32),
        np.empty(count, np.float32),
    )
    _directions(triangles, part.points.values, part.points.index, uv.values, uv.index, -1.0 if v_down else 1.0, *out)
    return out


@njit(cache=True, nogil=True)
def edge(points: Array, a: int, b: int) -> tuple[float, float, float]:
    """From one row of points to another."""
    return (
        np.float64(points[b, 0]) - np.float64(points[a, 0]),
        np.float64(points[b, 1]) - np.float64(points[a, 1]),
        np.float64(points[b, 2]) - np.float64(points[a, 2]),
    )


@njit(cache=True, nogil=True)
def laid(
    x1: float, y1: float, z1: float, x2: float, y2: float, z2: float, u1: float, v1: float, u2: float, v2: float
) -> tuple[int, float, float, float, float, float, float]:
    """(side, tangent, bitangent) of a triangle from two of its edges, unit; side 0 and zeros where there are none."""
    det = u1 * v2 - u2 * v1
    if not abs(det) > TINY:
        return 0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
    tx, ty, tz = v2 * x1 - v1 * x2, v2 * y1 - v1 * y2, v2 * z1 - v1 * z2
    bx, by, bz = u1 * x2 - u2 * x1, u1 * y2 - u2 * y1, u1 * z2 - u2 * z1
    t_length, b_length = np.sqrt(tx * tx + ty * ty + tz * tz), np.sqrt(bx * bx + by * by + bz * bz)
    if not (0 < t_length < np.inf and 0 < b_length < np.inf):
        return 0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
    side = 1 if det > 0 else -1
    t_scale, b_scale = side / t_length, side / b_length
    return side, tx * t_scale, ty * t_scale, tz * t_scale, bx * b_scale, by * b_scale, bz * b_scale


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
) -> None:
    for t in range(len(triangles)):
        c0, c1, c2 = triangles[t, 0], triangles[t, 1], triangles[t, 2]
        x1, y1, z1 = edge(points, at[c0], at[c1])
        x2, y2, z2 = edge(points, at[c0], at[c2])
        cx, cy, cz = y1 * z2 - z1 * y2, z1 * x2 - x1 * z2, x1 * y2 - y1 * x2
        area[t] = np.sqrt(cx * cx + cy * cy + cz * cz) / 2
        q0, q1, q2 = uv_at[c0], uv_at[c1], uv_at[c2]
        u1 = np.float64(uvs[q1, 0]) - np.float64(uvs[q0, 0])
        v1 = (np.float64(uvs[q1, 1]) - np.float64(uvs[q0, 1])) * up
        u2 = np.float64(uvs[q2, 0]) - np.float64(uvs[q0, 0])
        v2 = (np.float64(uvs[q2, 1]) - np.float64(uvs[q0, 1])) * up
        uv_area[t] = abs(u1 * v2 - u2 * v1) / 2
        side[t], tx, ty, tz, bx, by, bz = laid(x1, y1, z1, x2, y2, z2, u1, v1, u2, v2)
        tangent[t, 0], tangent[t, 1], tangent[t, 2] = tx, ty, tz
        bitangent[t, 0], bitangent[t, 1], bitangent[t, 2] = bx, by, bz
