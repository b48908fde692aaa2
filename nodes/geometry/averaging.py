"""Tangent frames as sums over the triangles around a vertex, by weights of one's choice, skew kept.

face      each face its own frame
uniform   every triangle counts alike
area      by its area in space (Max 1999 discusses such weights for normals)
angle     by its angle at the corner (Thuermer & Wuethrich 1998)
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.geometry.directions import Directions
from tangentry.nodes.geometry.vectors import dot, unit
from tangentry.pipeline.flow import Array

CANCELLED = 1e-5  # share of its terms' lengths below which a sum is rounding


class Averaged(NamedTuple):
    """Frames by vertex."""

    tangent: Array  # (vertices, 3) float32, unit; zero where nothing defines one
    bitangent: Array  # (vertices, 3) float32, unit; zero where nothing defines one
    side: Array  # (vertices,) int8: +1, -1, or 0 where nothing defines one


def average(triangles: Array, vertex: Array, normal: Array, found: Directions, weights: str) -> Averaged:
    """Sums of the unit tangents and bitangents around each vertex; sums that cancel out define nothing.

    triangles  (n, 3) int32 corner numbers
    vertex     (corners,) int32: what is summed together
    normal     (vertices, 3) float32: decides the side
    weights    "uniform", "area" or "angle"
    """
    weight = {
        "uniform": np.ones((len(triangles), 3), np.float32),
        "area": np.broadcast_to(found.area[:, None], (len(triangles), 3)),
        "angle": found.angle,
    }[weights]
    count = len(normal)
    tangent, bitangent, total = np.zeros((count, 3)), np.zeros((count, 3)), np.zeros(count)
    _add_up(triangles, vertex, found.tangent, found.bitangent, np.ascontiguousarray(weight), tangent, bitangent, total)
    for sums in (tangent, bitangent):
        sums[dot(sums, sums) <= (CANCELLED * total) ** 2] = 0
    tangent, bitangent = unit(tangent), unit(bitangent)
    side = np.sign(dot(np.cross(normal, tangent), bitangent)).astype(np.int8)
    return Averaged(tangent.astype(np.float32), bitangent.astype(np.float32), side)


@njit(cache=True, nogil=True)
def _add_up(
    triangles: Array,
    vertex: Array,
    tangent: Array,
    bitangent: Array,
    weight: Array,
    t_sum: Array,
    b_sum: Array,
    total: Array,
) -> None:
    for t in range(len(triangles)):
        for k in range(3):
            v, w = vertex[triangles[t, k]], np.float64(weight[t, k])
            total[v] += w
            for axis in range(3):
                t_sum[v, axis] += w * tangent[t, axis]
                b_sum[v, axis] += w * bitangent[t, axis]
