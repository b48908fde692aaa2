"""How much the map from UV space onto the surface stretches (Sander et al., Texture Mapping Progressive Meshes, 2001).

    greatest, least     the singular values of the map's Jacobian, in units of space over units of UV (section 3)
    L2(T)               sqrt((greatest^2 + least^2) / 2)         L-infinity(T)  = greatest
    L2(faces)           sqrt(sum L2(T)^2 area(T) / sum area(T))  L-infinity(faces) = max L-infinity(T)

Scaled by sqrt(sum UV area / sum area), a map that keeps lengths up to one scale has 1 and 1.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.model import Stream
from tangentry.pipeline.flow import Array


def singular_values(triangles: Array, points: Stream, uv: Stream) -> tuple[Array, Array]:
    """(triangles,) float64 each: the greatest and the least; infinite and 0 where there is no UV area.

    triangles   (n, 3) int32 corner numbers
    """
    greatest, least = np.empty(len(triangles)), np.empty(len(triangles))
    _values(triangles, points.values, points.index, uv.values, uv.index, greatest, least)
    return greatest, least


@njit(cache=True, nogil=True)
def _values(
    triangles: Array, points: Array, at: Array, uvs: Array, uv_at: Array, greatest: Array, least: Array
) -> None:
    for t in range(len(triangles)):
        a, b, c = triangles[t, 0], triangles[t, 1], triangles[t, 2]
        u1 = np.float64(uvs[uv_at[b], 0]) - uvs[uv_at[a], 0]
        v1 = np.float64(uvs[uv_at[b], 1]) - uvs[uv_at[a], 1]
        u2 = np.float64(uvs[uv_at[c], 0]) - uvs[uv_at[a], 0]
        v2 = np.float64(uvs[uv_at[c], 1]) - uvs[uv_at[a], 1]
        det = u1 * v2 - u2 * v1
        if not abs(det) > 0:
            greatest[t], least[t] = np.inf, 0.0
            continue
        ss = st = tt = 0.0
        for k in range(3):
            d1 = np.float64(points[at[b], k]) - points[at[a], k]
            d2 = np.float64(points[at[c], k]) - points[at[a], k]
            s, q = (v2 * d1 - v1 * d2) / det, (u1 * d2 - u2 * d1) / det
            ss, st, tt = ss + s * s, st + s * q, tt + q * q
        root = np.sqrt((ss - tt) ** 2 + 4 * st * st)
        greatest[t] = np.sqrt((ss + tt + root) / 2)
        least[t] = np.sqrt(max(ss + tt - root, 0.0) / 2)


def stretch_of(greatest: Array, least: Array, area: Array, uv_area: Array, group: Array) -> tuple[Array, Array]:
    """(groups,) the L2 and the L-infinity stretch of groups of triangles, scaled so that an isometry has 1.

    group   (triangles,) int32: which group each belongs to; all of them have UV area
    """
    count = int(group.max(initial=-1)) + 1
    total = np.maximum(np.bincount(group, area, count), 1e-300)
    scale = np.sqrt(np.bincount(group, uv_area, count) / total)
    square = np.bincount(group, (greatest**2 + least**2) / 2 * area, count) / total
    largest = np.zeros(count)
    np.maximum.at(largest, group, greatest)
    return np.sqrt(square) * scale, largest * scale
