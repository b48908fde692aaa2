"""Polygons cut into triangles, the same way at solve, check and export.

Triangles pass through. A quad is cut along its shorter diagonal in UV space, or in space where the UVs do not decide
(Mikkelsen 2008 leaves this to the file; the shorter UV diagonal is what the scheme's description does). Larger polygons
lose one ear after another, always the one with the shortest cut. Nothing depends on which corner comes first.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.model import Part
from tangentry.pipeline.flow import Array


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
        triangles,
        face,
    )
    return triangles, face


@njit(cache=True, nogil=True)
def _cut_all(
    starts: Array, points: Array, at: Array, uvs: Array, uv_at: Array, most: int, triangles: Array, face: Array
) -> None:
    done = 0
    ring = np.empty(most, np.int32)
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
            _clip_ears(start, size, flat, ring, triangles, done)
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
    s = start if across02 <= across13 else start + 1
    a, b, c, d = s, start + (s - start + 1) % 4, start + (s - start + 2) % 4, start + (s - start + 3) % 4
    triangles[done, 0], triangles[done, 1], triangles[done, 2] = a, b, c
    triangles[done + 1, 0], triangles[done + 1, 1], triangles[done + 1, 2] = a, c, d


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


@njit(cache=True, nogil=True)
def _turn(flat: Array, a: int, b: int, c: int) -> float:
    return (flat[b, 0] - flat[a, 0]) * (flat[c, 1] - flat[a, 1]) - (flat[b, 1] - flat[a, 1]) * (flat[c, 0] - flat[a, 0])


@njit(cache=True, nogil=True)
def _is_ear(flat: Array, ring: Array, size: int, k: int) -> bool:
    a, b, c = ring[(k - 1) % size], ring[k], ring[(k + 1) % size]
    if _turn(flat, a, b, c) <= 0:
        return False
    for j in range(size):
        p = ring[j]
        if p == a or p == b or p == c:
            continue
        if _turn(flat, a, b, p) >= 0 and _turn(flat, b, c, p) >= 0 and _turn(flat, c, a, p) >= 0:
            same = (flat[p, 0] == flat[a, 0] and flat[p, 1] == flat[a, 1]) or (
                flat[p, 0] == flat[c, 0] and flat[p, 1] == flat[c, 1]
            )
            if not same:
                return False
    return True


@njit(cache=True, nogil=True)
def _clip_ears(start: int, size: int, flat: Array, ring: Array, triangles: Array, done: int) -> None:
    """Cut off the ear with the shortest cut until a triangle is left; where rounding leaves no ear, the shortest cut of all."""
    for k in range(size):
        ring[k] = k
    while size > 3:
        best, shortest, sure = 0, np.inf, False
        for k in range(size):
            a, c = ring[(k - 1) % size], ring[(k + 1) % size]
            length = (flat[a, 0] - flat[c, 0]) ** 2 + (flat[a, 1] - flat[c, 1]) ** 2
            ear = _is_ear(flat, ring, size, k)
            if (ear and not sure) or (ear == sure and length < shortest):
                best, shortest, sure = k, length, ear
        a, b, c = ring[(best - 1) % size], ring[best], ring[(best + 1) % size]
        triangles[done, 0], triangles[done, 1], triangles[done, 2] = start + a, start + b, start + c
        done += 1
        for k in range(best, size - 1):
            ring[k] = ring[k + 1]
        size -= 1
    triangles[done, 0], triangles[done, 1], triangles[done, 2] = start + ring[0], start + ring[1], start + ring[2]
