"""The corners of triangles around each vertex, and which of them an edge joins."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.geometry.unions import union
from tangentry.pipeline.flow import Array

NEXT, PREVIOUS = (1, 2, 0), (2, 0, 1)  # corner of the triangle


@njit(cache=True, nogil=True)
def rings(vertex: Array, count: int) -> tuple[Array, Array]:
    """(starts, ring): vertex v has the corners ring[starts[v] : starts[v + 1]], written 4 t + k.

    vertex   (triangles, 3) int32, below `count`
    """
    starts = np.zeros(count + 1, np.int32)
    for t in range(len(vertex)):
        for k in range(3):
            starts[vertex[t, k] + 1] += 1
    for v in range(count):
        starts[v + 1] += starts[v]
    ring = np.empty(3 * len(vertex), np.int32)
    for t in range(len(vertex)):
        for k in range(3):
            v = vertex[t, k]
            ring[starts[v]] = 4 * t + k
            starts[v] += 1
    for v in range(count, 0, -1):
        starts[v] = starts[v - 1]
    starts[0] = 0
    return starts, ring


@njit(cache=True, nogil=True)
def join_ring(before: Array, after: Array, start: int, end: int, seen: Array, chain: Array, parent: Array) -> None:
    """Join the places in a ring, from start to end, where the edge that goes out from one comes in to another.

    before, after   (size,) int32: the vertices before and after the one in the middle, by place in the ring
    seen            (vertices,) int32, -1 before and after
    chain           (size,) int32, for use inside
    parent          (size,) int32, see `unions`
    """
    for i in range(start, end):
        chain[i] = seen[before[i]]
        seen[before[i]] = i
        parent[i] = i
    for i in range(start, end):
        other = seen[after[i]]
        if other >= 0:
            union(parent, i, other)
            while chain[other] >= 0:  # an edge of several faces; joined once for all
                union(parent, other, chain[other])
                chain[other] = chain[chain[other]]
    for i in range(start, end):
        seen[before[i]] = -1
