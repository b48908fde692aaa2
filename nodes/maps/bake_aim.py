"""Where the rays of a bake start and where they go.

Every corner of the target is moved out along an aim, a unit vector, by its reach: the moved triangles are the offset
surface. A texel's ray starts on the offset surface and goes through the texel's own place on the target.

    smoothed   the aim of a point is the mean of its faces' normals by angle (Thuermer & Wuethrich 1998), whatever edges
               are hard, so the offset surface has no gaps
    straight   as smoothed, but on flat faces the ray turns to the face's normal away from bent edges, so that what is
               projected is not skewed there
    own        the target's own normals: gaps open at hard edges
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.geometry.corners import distinct_rows, distinct_values
from tangentry.nodes.geometry.vectors import dot, unit
from tangentry.pipeline.flow import Array

BENT = np.cos(np.radians(0.5))  # faces that meet at less than half a degree are one flat face
FLAT = np.cos(np.radians(1.0))  # own normals within a degree of the face's: a flat face


class Aim(NamedTuple):
    """Of every target triangle."""

    outward: Array  # (triangles, 3, 3) float32, unit: the aim at each corner
    reach: Array  # (triangles, 3) float32: how far the offset surface is, in the asset's unit
    face: Array  # (triangles, 3) float32, unit: what flat faces' rays turn to; zero where they do not turn
    bent: Array  # (triangles, 3) bool: is the edge from corner k to k + 1 bent?


def aim_at(positions: Array, normals: Array, reach: Array, way: str) -> Aim:
    """The aim of target triangles, all of those that share points together.

    positions   (triangles, 3, 3) float32
    normals     (triangles, 3, 3) float32: the target's own
    reach       (triangles, 3) float32
    way         "smoothed", "straight" or "own"
    """
    straight = np.zeros((len(positions), 3), np.float32), np.zeros((len(positions), 3), bool)
    if way == "own":
        return Aim(normals, reach, *straight)
    corner = positions.astype(np.float64)
    across = np.cross(corner[:, 1] - corner[:, 0], corner[:, 2] - corner[:, 0])
    face = unit(across)
    point = distinct_values(np.ascontiguousarray(positions.reshape(-1, 3)))[0].reshape(-1, 3)
    total = np.zeros((int(point.max(initial=-1)) + 1, 3))
    for k in range(3):
        one = unit(corner[:, (k + 1) % 3] - corner[:, k])
        two = unit(corner[:, (k + 2) % 3] - corner[:, k])
        angle = np.arctan2(np.linalg.norm(np.cross(one, two), axis=1), dot(one, two))
        np.add.at(total, point[:, k], face * angle[:, None])
    outward = unit(total)[point].astype(np.float32)
    outward = np.where(outward.any(axis=2, keepdims=True), outward, normals)
    if way == "straight":
        flat = (np.einsum("tkx,tx->tk", normals, face) > FLAT).all(axis=1, keepdims=True)
        straight = np.where(flat, face, 0).astype(np.float32), _bent_edges(point, face)
    return Aim(outward, reach, *straight)


def _bent_edges(point: Array, face: Array) -> Array:
    """(triangles, 3) bool: edges whose faces do not lie in one plane."""
    ends = np.stack([point, np.roll(point, -1, axis=1)], axis=2).reshape(-1, 2)
    edge, _ = distinct_rows(ends.min(axis=1), ends.max(axis=1))
    total, count = np.zeros((int(edge.max(initial=-1)) + 1, 3)), np.bincount(edge)
    np.add.at(total, edge, np.repeat(face, 3, axis=0))
    bent: Array = (np.linalg.norm(total, axis=1) < BENT * count)[edge].reshape(-1, 3)
    return bent


@njit(cache=True, nogil=True, error_model="numpy")
def rays_of(
    chosen: Array,
    triangle: Array,
    weights: Array,
    positions: Array,
    outward: Array,
    reach: Array,
    face: Array,
    bent: Array,
    place: Array,
    direction: Array,
    length: Array,
) -> None:
    """The places of chosen texels on the target, the way outward from there, and how far the offset surface is.

    chosen              (n,) int64: flat indices of texels
    triangle, weights   of texels, flat: see Owners
    place               (n, 3) float64, direction (n, 3) float32 unit, length (n,) float32: filled in
    """
    corner, to = np.empty((3, 3)), np.empty(3)
    for i in range(len(chosen)):
        t = triangle[chosen[i]]
        w1, w2 = np.float64(weights[chosen[i], 0]), np.float64(weights[chosen[i], 1])
        w0 = 1 - w1 - w2
        for x in range(3):
            for k in range(3):
                corner[k, x] = positions[t, k, x]
            place[i, x] = w0 * corner[0, x] + w1 * corner[1, x] + w2 * corner[2, x]
            to[x] = (
                w0 * outward[t, 0, x] * reach[t, 0]
                + w1 * outward[t, 1, x] * reach[t, 1]
                + w2 * outward[t, 2, x] * reach[t, 2]
            )
        far = np.sqrt(to[0] ** 2 + to[1] ** 2 + to[2] ** 2)
        over = 1 / far if far > 0 else 0.0
        if face[t, 0] != 0 or face[t, 1] != 0 or face[t, 2] != 0:
            turned = _turned(place[i], corner, bent[t], far)
            to *= over * (1 - turned)
            for x in range(3):
                to[x] += turned * face[t, x]
            over = 1 / np.sqrt(to[0] ** 2 + to[1] ** 2 + to[2] ** 2)
        for x in range(3):
            direction[i, x] = to[x] * over
        length[i] = far


@njit(cache=True, nogil=True, error_model="numpy")
def _turned(place: Array, corner: Array, bent: Array, far: float) -> float:
    """How much a ray turns to the face's normal: 0 on bent edges, 1 from one reach away, smoothly between."""
    nearest = np.inf
    for k in range(3):
        if bent[k]:
            nearest = min(nearest, _from_line(place, corner[k], corner[(k + 1) % 3]))
    share = min(1.0, nearest / far) if far > 0 else 1.0
    return share * share * (3 - 2 * share)


@njit(cache=True, nogil=True, error_model="numpy")
def _from_line(place: Array, a: Array, b: Array) -> float:
    along, away = b - a, place - a
    share = (along * away).sum() / max((along * along).sum(), 1e-300)
    rest = away - share * along
    return np.sqrt((rest * rest).sum())
