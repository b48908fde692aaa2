"""The side from which each face is seen in UV space."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.geometry.directions import Directions
from tangentry.nodes.geometry.rings import NEXT, PREVIOUS, rings
from tangentry.pipeline.flow import Array

MANY = 16  # faces on one edge beyond which they are no neighbours to learn from


class Sides(NamedTuple):
    """Of every face."""

    side: Array  # (faces,) int8: +1 as wound, -1 mirrored; without UV area that of its neighbours, 0 if they have none
    solid: Array  # (faces,) bool: it has area in space


def sides_of_faces(vertex: Array, face: Array, faces: int, found: Directions) -> Sides:
    """The sides of polygons.

    vertex   (triangles, 3) int32: corners of one number are one vertex
    face     (triangles,) int32: the polygon of each triangle, of so many `faces`

    All triangles of a polygon are seen from one side, that of the largest in UV space.
    """
    side, solid = np.zeros(faces, np.int8), np.zeros(faces, np.bool_)
    _own_sides(face, found.side, found.uv_area, found.area, side, solid)
    if (solid & (side == 0)).any():
        _adopt(face, side, _neighbours(vertex, face, side, solid, *rings(vertex, int(vertex.max()) + 1)))
    return Sides(side, solid)


@njit(cache=True, nogil=True)
def _own_sides(face: Array, tri_side: Array, uv_area: Array, area: Array, side: Array, solid: Array) -> None:
    largest = np.zeros(len(side), np.float32)
    for t in range(len(face)):
        f = face[t]
        if area[t] > 0:
            solid[f] = True
        if tri_side[t] != 0 and (uv_area[t] > largest[f] or (uv_area[t] == largest[f] and tri_side[t] > side[f])):
            largest[f], side[f] = uv_area[t], tri_side[t]


@njit(cache=True, nogil=True)
def _neighbours(vertex: Array, face: Array, side: Array, solid: Array, starts: Array, ring: Array) -> Array:
    """(pairs, 2) int32: an open face, solid but without a side, and a solid face over one of its edges, both ways."""
    pairs = [(np.int32(0), np.int32(0)) for _ in range(0)]
    seen, count = np.full(len(starts) - 1, -1, np.int32), np.zeros(len(starts) - 1, np.int32)
    chain = np.empty(len(ring), np.int32)
    for v in range(len(starts) - 1):
        for i in range(starts[v], starts[v + 1]):
            t, k = ring[i] >> 2, ring[i] & 3
            if solid[face[t]]:
                before = vertex[t, PREVIOUS[k]]
                chain[i] = seen[before]
                seen[before] = i
                count[before] += 1
        for i in range(starts[v], starts[v + 1]):
            t, k = ring[i] >> 2, ring[i] & 3
            after, f = vertex[t, NEXT[k]], face[t]
            other = seen[after] if solid[f] and count[after] <= MANY else -1
            while other >= 0:
                g = face[ring[other] >> 2]
                if f != g and (side[f] == 0 or side[g] == 0):
                    pairs.append((np.int32(f), np.int32(g)))
                    pairs.append((np.int32(g), np.int32(f)))
                other = chain[other]
        for i in range(starts[v], starts[v + 1]):
            t, k = ring[i] >> 2, ring[i] & 3
            seen[vertex[t, PREVIOUS[k]]], count[vertex[t, PREVIOUS[k]]] = -1, 0
    out = np.empty((len(pairs), 2), np.int32)
    for row in range(len(pairs)):
        out[row, 0], out[row, 1] = pairs[row]
    return out


def _adopt(face: Array, side: Array, pairs: Array) -> None:
    """Faces without UV area take the side that most of their neighbours have, wave after wave."""
    pairs = pairs[np.argsort(pairs[:, 0], kind="stable")]
    begins = np.searchsorted(pairs[:, 0], np.arange(len(side) + 1)).astype(np.int32)
    _spread(side, begins, np.ascontiguousarray(pairs[:, 1]))


@njit(cache=True, nogil=True)
def _spread(side: Array, begins: Array, other: Array) -> None:
    """Neighbours of face f are other[begins[f] : begins[f + 1]]."""
    given = np.zeros(len(side), np.int8)
    front = [np.int32(f) for f in range(len(side)) if side[f] != 0 and begins[f] < begins[f + 1]]
    while len(front):
        reached = [np.int32(0) for _ in range(0)]
        for g in front:
            for row in range(begins[g], begins[g + 1]):
                f = other[row]
                if side[f] != 0 or given[f] != 0:
                    continue
                votes = 0
                for vote in range(begins[f], begins[f + 1]):
                    votes += side[other[vote]]
                given[f] = 1 if votes >= 0 else -1
                reached.append(f)
        for f in reached:
            side[f] = given[f]
        front = reached
