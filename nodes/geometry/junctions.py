"""T-junctions: ends of open edges that lie on another open edge, found in linear time by a grid of cells."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.geometry.corners import distinct_values
from tangentry.pipeline.flow import Array

NEAR = 1e-5  # how far off an edge a point may lie, as a share of the edge's length
PATIENCE = 200  # points looked at for each edge on average, before what is left is passed over


def junctions_of(starts: Array, ends: Array) -> Array:
    """(edges,) bool: does the end of another of these edges lie on it, between its own ends?

    starts, ends   (edges, 3) float32; edges with values that are not finite hold nothing

    The cells are as wide as the edges are long on average, so all edges together cross a number of cells in proportion
    to their own. Input made to fill one cell is given up on after a while: then some junctions are not seen.
    """
    held = np.zeros(len(starts), bool)
    if len(starts) < 2:
        return held
    label, first = distinct_values(np.concatenate([starts, ends]))
    points = np.concatenate([starts, ends])[first].astype(np.float64)
    finite = np.isfinite(points).all(axis=1)
    if not finite.any():
        return held
    a, b = label[: len(starts)], label[len(starts) :]
    length = np.linalg.norm(points[a] - points[b], axis=1)
    size = float(length[np.isfinite(length)].mean()) if np.isfinite(length).any() else 0.0
    if not size > 0:
        return held
    origin = points[finite].min(axis=0) - size * np.array([0.377, 0.291, 0.453])  # off the planes that meshes like
    places = np.where(finite[:, None], np.minimum((points - origin) / size, 1e9), -1.0)
    _walk(places, a, b, held, NEAR, PATIENCE)
    return held


@njit(cache=True, nogil=True)
def _slot(x: int, y: int, z: int, mask: int) -> int:
    key = (
        np.uint64(x) * np.uint64(0x9E3779B97F4A7C15)
        ^ np.uint64(y) * np.uint64(0xC2B2AE3D27D4EB4F)
        ^ np.uint64(z) * np.uint64(0x165667B19E3779F9)
    )
    key = (key ^ (key >> np.uint64(31))) * np.uint64(0x9E3779B97F4A7C15)
    return int((key >> np.uint64(20)) & np.uint64(mask))


@njit(cache=True, nogil=True)
def _lies_on(places: Array, p: int, a: int, b: int, near: float) -> bool:
    along = square = gap = 0.0
    for k in range(3):
        d = places[b, k] - places[a, k]
        along += d * (places[p, k] - places[a, k])
        square += d * d
    if square == 0.0:  # both ends so far out that they were drawn to one place
        return False
    t = along / square
    if not (near < t < 1 - near):
        return False
    for k in range(3):
        gap += (places[a, k] + t * (places[b, k] - places[a, k]) - places[p, k]) ** 2
    return gap <= near * near * square


@njit(cache=True, nogil=True)
def _walk(places: Array, starts: Array, ends: Array, held: Array, near: float, patience: int) -> None:
    size = 16
    while size < 2 * len(places):
        size *= 2
    head, chain = np.full(size, -1, np.int32), np.full(len(places), -1, np.int32)
    for p in range(len(places)):
        if places[p, 0] >= 0:
            slot = _slot(int(places[p, 0]), int(places[p, 1]), int(places[p, 2]), size - 1)
            chain[p], head[slot] = head[slot], p
    left = patience * len(starts) + 1_000_000
    cell, step, reach = np.zeros(3, np.int64), np.zeros(3, np.int64), np.zeros(3)
    for e in range(len(starts)):
        a, b = starts[e], ends[e]
        if places[a, 0] < 0 or places[b, 0] < 0 or a == b:
            continue
        crossings = 0
        for k in range(3):
            cell[k] = int(places[a, k])
            step[k] = 1 if places[b, k] > places[a, k] else -1
            crossings += abs(int(places[b, k]) - cell[k])
        for crossing in range(crossings + 1):  # cell by cell along the edge (Amanatides & Woo 1987)
            p = head[_slot(cell[0], cell[1], cell[2], size - 1)]
            while p >= 0 and left > 0:
                left -= 1
                if p != a and p != b and _lies_on(places, p, a, b, near):
                    held[e] = True
                p = chain[p]
            left -= 1
            if held[e] or left <= 0 or crossing == crossings:
                break
            nearest = 0
            for k in range(3):
                d = places[b, k] - places[a, k]
                border = cell[k] + (1 if step[k] > 0 else 0)
                done = int(places[b, k]) == cell[k]
                reach[k] = np.inf if done else (border - places[a, k]) / d
                if reach[k] < reach[nearest]:
                    nearest = k
            cell[nearest] += step[nearest]
