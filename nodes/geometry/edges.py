"""Edges between faces: which faces meet at one, and what their corners have in common there."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.geometry.corners import distinct_rows
from tangentry.pipeline.flow import Array


class Edges(NamedTuple):
    """Every face corner starts one edge, which ends at the next corner of its face."""

    following: Array  # (corners,) int32: the next corner of the same face
    edge: Array  # (corners,) int32: the edge that starts there; -1 where it has no length or its face is left out
    faces: Array  # (edges,) int32: how many faces meet at it
    pairs: Array  # (n, 2) int32: the two corners at which an edge of two faces starts
    opposite: Array  # (n, 2) int32: for pair (c, d), the corners of d's face at c's point and at following[c]'s point


def edges_of(starts: Array, point: Array, solid: Array) -> Edges:
    """The edges of faces.

    starts   (faces + 1,) int32
    point    (corners,) int32: equal where corners lie at one point
    solid    (faces,) bool: False leaves a face out
    """
    sizes = np.diff(starts)
    following = np.arange(1, len(point) + 1, dtype=np.int32)
    following[starts[1:][sizes > 0] - 1] = starts[:-1][sizes > 0]
    far = point[following]
    real = (point != far) & np.repeat(solid, sizes)
    edge = np.full(len(point), -1, np.int32)
    edge[real] = distinct_rows(np.minimum(point, far)[real], np.maximum(point, far)[real])[0]
    count = np.bincount(edge[real]).astype(np.int32)
    pairs = np.empty((int((count == 2).sum()), 2), np.int32)
    _pair(edge, count, pairs)
    one, two = pairs[:, 0], pairs[:, 1]
    against = (point[one] == point[two])[:, None]
    ends = np.stack([two, following[two]], axis=1)
    return Edges(following, edge, count, pairs, np.where(against, ends, ends[:, ::-1]))


@njit(cache=True, nogil=True)
def _pair(edge: Array, count: Array, pairs: Array) -> None:
    waiting = np.full(len(count), -1, np.int32)
    done = 0
    for c in range(len(edge)):
        e = edge[c]
        if e < 0 or count[e] != 2:
            continue
        if waiting[e] < 0:
            waiting[e] = c
        else:
            pairs[done, 0], pairs[done, 1] = waiting[e], c
            done += 1


def same_across(edges: Edges, label: Array) -> Array:
    """(n,) bool: do both faces of a pair have the same labels at both ends of the edge?

    label   (corners,) int32
    """
    corner = edges.pairs[:, 0]
    both: Array = (label[corner] == label[edges.opposite[:, 0]]) & (
        label[edges.following[corner]] == label[edges.opposite[:, 1]]
    )
    return both


def turn_keys(starts: Array, point: Array) -> Array:
    """(faces, 2) int32: equal for faces that run through the same points in the same turn, wherever they begin.

    A sum over the edges of each face of a 64-bit hash of their two points: two faces that differ share one by a chance
    of 2^-64.
    """
    keys = np.zeros(len(starts) - 1, np.uint64)
    _turn_keys(starts, point, keys)
    return keys.view(np.int32).reshape(-1, 2)


@njit(cache=True, nogil=True)
def _turn_keys(starts: Array, point: Array, keys: Array) -> None:
    for f in range(len(keys)):
        for c in range(starts[f], starts[f + 1]):
            far = c + 1 if c + 1 < starts[f + 1] else starts[f]
            key = (np.uint64(point[c]) << np.uint64(32)) | np.uint64(point[far])
            for _ in range(2):
                key = (key ^ (key >> np.uint64(31))) * np.uint64(0x9E3779B97F4A7C15)
            keys[f] += key ^ (key >> np.uint64(29))
