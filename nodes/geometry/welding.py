"""Points that lie together, found in linear time by a grid of cells as wide as the distance."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.geometry.corners import distinct_values
from tangentry.nodes.geometry.unions import number, root, union
from tangentry.pipeline.flow import Array


def join_points(points: Array, within: float) -> tuple[Array, Array]:
    """Labels of points that are joined: (label (points,) int32, first (joined,) int32), as `distinct_rows` gives them.

    points   (n, 3) float32
    within   0: only exactly equal points; else chains of points, each within this distance of the next, are one
    """
    label, first = distinct_values(points)
    if within <= 0 or len(first) < 2:
        return label, first
    some = points[first].astype(np.float64)
    parent = np.arange(len(some), dtype=np.int32)
    _join(some, _cells(some, within), within * within, parent)
    joined = np.empty(len(some), np.int32)
    count = number(parent, joined)
    stands = np.empty(count, np.int32)
    stands[joined[::-1]] = first[::-1]
    return joined[label], stands


def _cells(points: Array, within: float) -> Array:
    """(n, 3) int64: the cell of each point; values that lie within the distance have the same number or the next.

    Where float64 can't tell one cell from the next, its bits are the number: those of neighbouring values differ by 1.
    """
    cells = np.floor(points / within) + 0.0  # + 0.0: -0.0 is 0.0
    far = np.abs(cells) >= 2.0**52
    return np.where(far, cells.view(np.int64), np.where(far, 0, cells).astype(np.int64))


@njit(cache=True, nogil=True)
def _slot(x: int, y: int, z: int, size: int) -> int:
    key = np.uint64(x) * np.uint64(0x9E3779B97F4A7C15) ^ np.uint64(y) * np.uint64(0xC2B2AE3D27D4EB4F)
    key ^= np.uint64(z) * np.uint64(0x165667B19E3779F9)
    key = (key ^ (key >> np.uint64(31))) * np.uint64(0x9E3779B97F4A7C15)
    return int((key >> np.uint64(20)) & np.uint64(size - 1))


@njit(cache=True, nogil=True)
def _join(points: Array, cells: Array, square: float, parent: Array) -> None:
    size = 16
    while size < 2 * len(points):
        size *= 2
    slots = np.full(size, -1, np.int32)
    chain = np.full(len(points), -1, np.int32)
    for p in range(len(points)):
        x, y, z = cells[p, 0], cells[p, 1], cells[p, 2]
        for near in range(27):
            cx, cy, cz = x + near % 3 - 1, y + near // 3 % 3 - 1, z + near // 9 - 1
            other = slots[_slot(cx, cy, cz, size)]
            while other >= 0:
                if (
                    cells[other, 0] == cx
                    and cells[other, 1] == cy
                    and cells[other, 2] == cz
                    and root(parent, other) != root(parent, p)
                ):
                    gap = 0.0
                    for k in range(3):
                        gap += (points[p, k] - points[other, k]) ** 2
                    if gap <= square:
                        union(parent, p, other)
                other = chain[other]
        slot = _slot(x, y, z, size)
        chain[p] = slots[slot]
        slots[slot] = p
