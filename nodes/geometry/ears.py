"""Polygons cut into triangles by clipping ears, always the one with the shortest cut (Meisters 1975).

Only corners that turn inward can lie in the way of a cut, so each corner that is no ear remembers one such witness and
is looked at again when the witness is gone. Which of equally short cuts comes first is told by the values at the
corners, never by their order.
"""

from __future__ import annotations

from heapq import heappop, heappush

import numpy as np
from numba import njit
from tangentry.nodes.model import Stream
from tangentry.pipeline.flow import Array

STRAIGHT = 1e-5  # sine of the turn below which a corner counts as straight
TRIALS = 4096  # looks at corners in the way that a polygon is granted for each of its corners; then cuts go unlooked
STEPS = 4096.0  # steps of equal length of cut in each doubling: rounding seldom parts equals


def cut_polygons(points: Stream, starts: Array, sizes: Array, keys: Array, rows: Array, triangles: Array) -> None:
    """Write the triangles of polygons, size - 2 each from its row on.

    starts, sizes, rows   (polygons,) integers: first corner, number of corners, first row of triangles
    keys                  (corners of these polygons, some) float32: what orders corners whose cuts are equally short

    Where rounding or self-intersection leaves no ear, the shortest cut of all is made.
    """
    begins = np.cumsum(sizes) - sizes
    flat = np.empty((len(keys), 2))
    _flatten(points.values, points.index, starts, sizes, begins, flat)
    rank = np.empty(len(keys), np.int64)
    rank[np.lexsort(keys.T[::-1])] = np.arange(len(keys))
    polygon = np.repeat(np.arange(len(sizes)), sizes)
    by_x = np.lexsort((flat[:, 0], polygon)) - begins[polygon]
    _clip_all(starts, sizes, begins, rows, flat, by_x, rank, triangles)


@njit(cache=True, nogil=True)
def _clip_all(
    starts: Array, sizes: Array, begins: Array, rows: Array, flat: Array, by_x: Array, rank: Array, triangles: Array
) -> None:
    for p in range(len(starts)):
        own = slice(begins[p], begins[p] + sizes[p])
        _clip(flat[own], by_x[own], rank[own], triangles[rows[p] : rows[p] + sizes[p] - 2])
        for row in range(rows[p], rows[p] + sizes[p] - 2):
            for k in range(3):
                triangles[row, k] += starts[p]


@njit(cache=True, nogil=True)
def _clip(flat: Array, by_x: Array, rank: Array, triangles: Array) -> None:
    """Cut one polygon; `flat` (size, 2): its corners in their plane, counter-clockwise."""
    size, done = len(flat), 0
    before = (np.arange(size) - 1) % size
    after = (np.arange(size) + 1) % size
    inward = np.empty(size, np.bool_)
    for k in range(size):
        inward[k] = not _convex(flat, before[k], k, after[k])
    stamp = np.zeros(size, np.int64)
    latest = np.full(size, -1, np.int64)  # of a witness: its latest note of a corner that it keeps from being an ear
    held = [0]
    earlier = [-1]
    trials = np.array([TRIALS * size])
    heap: list[tuple[int, float, int, int, int]] = [(0, 0.0, 0, 0, 0)]
    heap.pop()
    waiting = [k for k in range(size)]
    left = size
    while True:
        for k in waiting:
            stamp[k] += 1
            if stamp[k] < 0:
                continue
            a, c = before[k], after[k]
            witness = -1 if inward[k] else _witness(flat, a, k, c, inward, by_x, trials)
            if witness >= 0:
                held.append(k)
                earlier.append(latest[witness])
                latest[witness] = len(held) - 1
            cut = (flat[a, 0] - flat[c, 0]) ** 2 + (flat[a, 1] - flat[c, 1]) ** 2
            step = np.floor(np.log2(cut) * STEPS) if cut > 0 else -np.inf
            late = 1 if inward[k] or witness >= 0 else 0
            heappush(heap, (late, float(step), int(rank[k]), int(k), int(stamp[k])))
        _, _, _, tip, stamped = heappop(heap)
        while stamped != stamp[tip]:
            _, _, _, tip, stamped = heappop(heap)
        a, c = before[tip], after[tip]
        triangles[done, 0], triangles[done, 1], triangles[done, 2] = a, tip, c
        done += 1
        left -= 1
        if left == 2:
            return
        stamp[tip] = np.iinfo(np.int64).min  # never again
        after[a], before[c] = c, a
        waiting = [a, c]
        for k in (tip, a, c):
            was = inward[k]
            inward[k] = k != tip and not _convex(flat, before[k], k, after[k])
            if was and not inward[k]:
                note = latest[k]
                while note >= 0:
                    waiting.append(held[note])
                    note = earlier[note]
                latest[k] = -1


@njit(cache=True, nogil=True)
def _flatten(points: Array, at: Array, starts: Array, sizes: Array, begins: Array, flat: Array) -> None:
    """Each polygon's corners on the plane of its area vector (Newell's method), counter-clockwise."""
    for p in range(len(starts)):
        _flatten_one(points, at, starts[p], sizes[p], flat[begins[p] :])


@njit(cache=True, nogil=True)
def _flatten_one(points: Array, at: Array, start: int, size: int, flat: Array) -> None:
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
def _convex(flat: Array, a: int, b: int, c: int) -> bool:
    ab = np.hypot(flat[b, 0] - flat[a, 0], flat[b, 1] - flat[a, 1])
    bc = np.hypot(flat[c, 0] - flat[b, 0], flat[c, 1] - flat[b, 1])
    return _turn(flat, a, b, c) > STRAIGHT * ab * bc


@njit(cache=True, nogil=True)
def _witness(flat: Array, a: int, b: int, c: int, inward: Array, by_x: Array, trials: Array) -> int:
    """A corner that turns inward and lies in the triangle a, b, c; -1 where there is none."""
    left = min(flat[a, 0], flat[b, 0], flat[c, 0])
    right = max(flat[a, 0], flat[b, 0], flat[c, 0])
    low, high = 0, len(by_x)
    while low < high:
        middle = (low + high) // 2
        if flat[by_x[middle], 0] < left:
            low = middle + 1
        else:
            high = middle
    for row in range(low, len(by_x)):
        p = by_x[row]
        if flat[p, 0] > right or trials[0] == 0:
            break
        trials[0] -= 1
        if not inward[p] or p in (a, b, c) or _together(flat, p, a) or _together(flat, p, c):
            continue
        if _turn(flat, a, b, p) >= 0 and _turn(flat, b, c, p) >= 0 and _turn(flat, c, a, p) >= 0:
            return p
    return -1


@njit(cache=True, nogil=True)
def _together(flat: Array, p: int, q: int) -> bool:
    return flat[p, 0] == flat[q, 0] and flat[p, 1] == flat[q, 1]
