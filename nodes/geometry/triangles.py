"""Polygons cut into triangles, the same way at solve, check and export.

Triangles pass through. A quad is cut along its shorter diagonal in UV space, or in space where the UVs do not decide
(Mikkelsen 2008 leaves this to the file; the shorter UV diagonal is what the scheme's description does), or through its
corner of the least UV where space does not decide either. Larger polygons lose one ear after another, always the one
with the shortest cut. Nothing depends on which corner comes first.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.geometry.ears import cut_polygons
from tangentry.nodes.model import Part
from tangentry.pipeline.flow import Array

EVEN = 1e-3  # of squared diagonals in space: share by which they must differ to tell, more than a motion's rounding


def triangulate(part: Part) -> tuple[Array, Array]:
    """The triangles of a part: (triangles, face) with triangles (n, 3) int32, corner numbers, and face (n,) int32.

    A polygon of k corners gives k - 2 triangles, wound as it is; one of fewer than three gives none.
    """
    sizes = np.diff(part.starts)
    if len(sizes) and (sizes == 3).all():
        whole = np.arange(len(part.points.index), dtype=np.int32).reshape(-1, 3)
        return whole, np.arange(len(sizes), dtype=np.int32)
    counts = np.maximum(sizes - 2, 0)
    face = np.repeat(np.arange(len(sizes), dtype=np.int32), counts)
    triangles = np.empty((len(face), 3), np.int32)
    rows = np.cumsum(counts) - counts
    uv_values = part.uvs[0].values if part.uvs else np.zeros((1, 2), np.float32)
    uv_index = part.uvs[0].index if part.uvs else np.zeros(len(part.points.index), np.int32)
    _cut(part.starts, rows, part.points.values, part.points.index, uv_values, uv_index, triangles)
    large = np.flatnonzero(sizes > 4)
    if len(large):
        corners = np.flatnonzero(np.repeat(sizes > 4, sizes))
        keys = np.concatenate([uv_values[uv_index[corners]], part.points.values[part.points.index[corners]]], axis=1)
        cut_polygons(part.points, part.starts[large], sizes[large], keys, rows[large], triangles)
    return triangles, face


@njit(cache=True, nogil=True)
def _cut(starts: Array, rows: Array, points: Array, at: Array, uvs: Array, uv_at: Array, triangles: Array) -> None:
    """Write the triangles of triangles and quads, face f's from rows[f] on."""
    for f in range(len(starts) - 1):
        start, size, row = starts[f], starts[f + 1] - starts[f], rows[f]
        if size == 3:
            triangles[row, 0], triangles[row, 1], triangles[row, 2] = start, start + 1, start + 2
        elif size == 4:
            _cut_quad(start, points, at, uvs, uv_at, triangles, row)


@njit(cache=True, nogil=True)
def _square(values: Array, a: int, b: int) -> float:
    total = 0.0
    for k in range(values.shape[1]):
        d = np.float64(values[a, k]) - np.float64(values[b, k])
        total += d * d
    return total


@njit(cache=True, nogil=True)
def _cut_quad(start: int, points: Array, at: Array, uvs: Array, uv_at: Array, triangles: Array, done: int) -> None:
    across02 = _square(uvs, uv_at[start], uv_at[start + 2])
    across13 = _square(uvs, uv_at[start + 1], uv_at[start + 3])
    if across02 == across13:
        across02 = _square(points, at[start], at[start + 2])
        across13 = _square(points, at[start + 1], at[start + 3])
        if abs(across02 - across13) <= EVEN * max(across02, across13):
            across02, across13 = 0.0, 1.0 - 2.0 * (_least(start, points, at, uvs, uv_at) % 2)
    s = start if across02 <= across13 else start + 1
    a, b, c, d = s, start + (s - start + 1) % 4, start + (s - start + 2) % 4, start + (s - start + 3) % 4
    triangles[done, 0], triangles[done, 1], triangles[done, 2] = a, b, c
    triangles[done + 1, 0], triangles[done + 1, 1], triangles[done + 1, 2] = a, c, d


@njit(cache=True, nogil=True)
def _least(start: int, points: Array, at: Array, uvs: Array, uv_at: Array) -> int:
    """Which of a quad's corners comes first by its values alone: u, v, then x, y, z."""
    best = 0
    for k in range(1, 4):
        a, b = uv_at[start + k], uv_at[start + best]
        u, v = uvs[a, 0] - uvs[b, 0], uvs[a, 1] - uvs[b, 1]
        if u < 0 or (u == 0 and v < 0) or (u == 0 and v == 0 and _less(points, at[start + k], at[start + best])):
            best = k
    return best


@njit(cache=True, nogil=True)
def _less(rows: Array, a: int, b: int) -> bool:
    for k in range(rows.shape[1]):
        if rows[a, k] != rows[b, k]:
            return rows[a, k] < rows[b, k]
    return False
