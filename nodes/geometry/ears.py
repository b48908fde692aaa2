"""Polygons cut into triangles by clipping ears, always the one with the shortest cut (Meisters 1975).

Only corners that turn inward can lie in the way of a cut, so each corner that is no ear remembers one such witness and
is looked at again when the witness is gone. Which of equally short cuts comes first is told by the values at the
corners, never by their order.
"""

from __future__ import annotations

from heapq import heappop, heappush

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array

STRAIGHT = 1e-5  # sine of the turn below which a corner counts as straight
TRIALS = 4096  # looks at corners in the way that a polygon is granted for each of its corners; then cuts go unlooked
STEPS = 4096.0  # steps of equal length of cut in each doubling: rounding seldom parts equals


@njit(cache=True, nogil=True)
def clip_ears(start: int, size: int, flat: Array, rank: Array, triangles: Array, done: int) -> None:
    """Write the size - 2 triangles of a polygon from row `done` on, in corner numbers counted from `start`.

    flat   (size or more, 2) float64: its corners in their plane, counter-clockwise
    rank   (corners,) int32: what orders corners whose cuts are equally short

    Where rounding or self-intersection leaves no ear, the shortest cut of all is made.
    """
    before = (np.arange(size) - 1) % size
    after = (np.arange(size) + 1) % size
    inward = np.empty(size, np.bool_)
    for k in range(size):
        inward[k] = not _convex(flat, before[k], k, after[k])
    order = np.argsort(flat[:size, 0])
    sorted_x = flat[:size, 0][order]
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
            witness = -1 if inward[k] else _witness(flat, a, k, c, inward, order, sorted_x, trials)
            if witness >= 0:
                held.append(k)
                earlier.append(latest[witness])
                latest[witness] = len(held) - 1
            cut = (flat[a, 0] - flat[c, 0]) ** 2 + (flat[a, 1] - flat[c, 1]) ** 2
            step = np.floor(np.log2(cut) * STEPS) if cut > 0 else -np.inf
            late = 1 if inward[k] or witness >= 0 else 0
            heappush(heap, (late, float(step), int(rank[start + k]), int(k), int(stamp[k])))
        _, _, _, tip, stamped = heappop(heap)
        while stamped != stamp[tip]:
            _, _, _, tip, stamped = heappop(heap)
        a, c = before[tip], after[tip]
        triangles[done, 0], triangles[done, 1], triangles[done, 2] = start + a, start + tip, start + c
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
def _turn(flat: Array, a: int, b: int, c: int) -> float:
    return (flat[b, 0] - flat[a, 0]) * (flat[c, 1] - flat[a, 1]) - (flat[b, 1] - flat[a, 1]) * (flat[c, 0] - flat[a, 0])


@njit(cache=True, nogil=True)
def _convex(flat: Array, a: int, b: int, c: int) -> bool:
    ab = np.hypot(flat[b, 0] - flat[a, 0], flat[b, 1] - flat[a, 1])
    bc = np.hypot(flat[c, 0] - flat[b, 0], flat[c, 1] - flat[b, 1])
    return _turn(flat, a, b, c) > STRAIGHT * ab * bc


@njit(cache=True, nogil=True)
def _witness(flat: Array, a: int, b: int, c: int, inward: Array, order: Array, sorted_x: Array, trials: Array) -> int:
    """A corner that turns inward and lies in the triangle a, b, c; -1 where there is none."""
    low = min(flat[a, 0], flat[b, 0], flat[c, 0])
    high = max(flat[a, 0], flat[b, 0], flat[c, 0])
    for row in range(np.searchsorted(sorted_x, low), len(order)):
        if sorted_x[row] > high or trials[0] == 0:
            break
        trials[0] -= 1
        p = order[row]
        if not inward[p] or p in (a, b, c) or _together(flat, p, a) or _together(flat, p, c):
            continue
        if _turn(flat, a, b, p) >= 0 and _turn(flat, b, c, p) >= 0 and _turn(flat, c, a, p) >= 0:
            return p
    return -1


@njit(cache=True, nogil=True)
def _together(flat: Array, p: int, q: int) -> bool:
    return flat[p, 0] == flat[q, 0] and flat[p, 1] == flat[q, 1]
