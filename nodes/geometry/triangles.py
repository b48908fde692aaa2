"""Polygons cut into triangles, the same way at solve, check and export.

Triangles pass through. A quad is cut along its shorter diagonal in UV space, or in space where the UVs do not decide
(Mikkelsen 2008 leaves this to the file; the shorter UV diagonal is what the scheme's description does), or through its
corner of the least UV where space does not decide either. Larger polygons lose one ear after another, always the one
with the shortest cut. Nothing depends on which corner comes first.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.geometry.ears import clip_ears
from tangentry.nodes.model import Part
from tangentry.pipeline.flow import Array

EVEN = 1e-3  # of squared diagonals in space: share by which they must differ to tell, more than a motion's rounding


def triangulate(part: Part) -> tuple[Array, Array]:
    """The triangles of a part: (triangles, face) with triangles (n, 3) int32, corner numbers, and face (n,) int32.

    A polygon of k corners gives k - 2 triangles, wound as it is; one of fewer than three gives none.
    """
    sizes = np.diff(part.starts)
    if len(sizes) and (sizes == 3).all():
        corners = np.arange(len(part.points.index), dtype=np.int32).reshape(-1, 3)
        return corners, np.arange(len(sizes), dtype=np.int32)
    count = int(np.maximum(sizes - 2, 0).sum())
    triangles = np.empty((count, 3), np.int32)
    face = np.empty(count, np.int32)
    uv = part.uvs[0] if part.uvs else None
    uv_values = uv.values if uv is not None else np.zeros((1, 2), np.float32)
    uv_index = uv.index if uv is not None else np.zeros(len(part.points.index), np.int32)
    _cut_all(
        part.starts,
        part.points.values,
        part.points.index,
        uv_values,
        uv_index,
        int(sizes.max(initial=3)),
        _ranks(part, sizes, uv_values, uv_index),
        triangles,
        face,
    )
    return triangles, face


def _ranks(part: Part, sizes: Array, uvs: Array, uv_at: Array) -> Array:
    """(corners,) int32: the place of each corner of a large polygon in the order of u, v, then x, y, z."""
    rank = np.zeros(len(uv_at), np.int32)
    corners = np.flatnonzero(np.repeat(sizes > 4, sizes))
    values = np.concatenate([uvs[uv_at[corners]], part.points.values[part.points.index[corners]]], axis=1)
    rank[corners[np.lexsort(values.T[::-1])]] = np.arange(len(corners), dtype=np.int32)
    return rank


@njit(cache=True, nogil=True)
def _cut_all(
    starts: Array,
    points: Array,
    at: Array,
    uvs: Array,
    uv_at: Array,
    most: int,
    rank: Array,
    triangles: Array,
    face: Array,
) -> None:
    done = 0
    flat = np.empty((most, 2))
    for f in range(len(starts) - 1):
        start, size = starts[f], starts[f + 1] - starts[f]
        if size < 3:
            continue
        if size == 3:
            triangles[done, 0], triangles[done, 1], triangles[done, 2] = start, start + 1, start + 2
        elif size == 4:
            _cut_quad(start, points, at, uvs, uv_at, triangles, done)
        else:
            _flatten(start, size, points, at, flat)
            clip_ears(start, size, flat, rank, triangles, done)
        for k in range(size - 2):
            face[done + k] = f
        done += size - 2


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
def _key(corner: int, points: Array, at: Array, uvs: Array, uv_at: Array, key: Array) -> None:
    """What orders corners by their values alone: u, v, then x, y, z."""
    key[:2] = uvs[uv_at[corner]]
    key[2:] = points[at[corner]]


@njit(cache=True, nogil=True)
def _least(start: int, points: Array, at: Array, uvs: Array, uv_at: Array) -> int:
    """Which of a quad's corners has the least key."""
    best, least, key = 0, np.empty(5), np.empty(5)
    _key(start, points, at, uvs, uv_at, least)
    for k in range(1, 4):
        _key(start + k, points, at, uvs, uv_at, key)
        for place in range(5):
            if key[place] != least[place]:
                if key[place] < least[place]:
                    best, least, key = k, key, least
                break
    return best


@njit(cache=True, nogil=True)
def _flatten(start: int, size: int, points: Array, at: Array, flat: Array) -> None:
    """The polygon's corners on the plane of its area vector (Newell's method), counter-clockwise."""
    nx = ny = nz = 0.0
    for k in range(size):
        a, b = at[start + k], at[start + (k + 1) % size]
        ax, ay, az = np.float64(points[a, 0]), np.float64(points[a, 1]), np.float64(points[a, 2])
        bx, by, bz = np.float64(points[b, 0]), np.float64(points[b, 1]), np.float64(points[b, 2])
        nx += (ay - by) * (az + bz)
        ny += (az - bz) * (ax + bx)
        nz += (ax - bx) * (ay + by)
    length = np.sqrt(nx * nx + ny * ny + nz * nz)
    if length > 0:
        nx, ny, nz = nx / length, ny / length, nz / length
    else:
        nx, ny, nz = 0.0, 0.0, 1.0
    sign = 1.0 if nz >= 0 else -1.0  # an axis of the plane (Duff et al. 2017)
    a = -1.0 / (sign + nz)
    b = nx * ny * a
    ux, uy, uz = 1.0 + sign * nx * nx * a, sign * b, -sign * nx
    vx, vy, vz = b, sign + ny * ny * a, -ny
    for k in range(size):
        p = at[start + k]
        x, y, z = np.float64(points[p, 0]), np.float64(points[p, 1]), np.float64(points[p, 2])
        flat[k, 0] = ux * x + uy * y + uz * z
        flat[k, 1] = vx * x + vy * y + vz * z
