"""Rays meet what they should, seen from the side they come from."""

from __future__ import annotations

import numpy as np
from numpy.testing import assert_allclose
from tangentry.nodes.geometry.rays import RayScene

FLOOR = np.float32([[[0, 0, 0], [1, 0, 0], [0, 1, 0]]])  # seen from +z
DOWN, UP = np.float32([[0, 0, -1]]), np.float32([[0, 0, 1]])


def scattered(count: int = 300):
    """Small triangles scattered in the unit cube."""
    rng = np.random.default_rng(5)
    return (rng.random((count, 1, 3)) + rng.normal(0, 0.06, (count, 3, 3))).astype(np.float32)


def first_by_definition(corners, origin, direction):
    """The nearest triangle and distance: o + t d = p0 + u e1 + v e2 solved (Moeller & Trumbore 1997, equation 4)."""
    p, e1, e2 = (corners[:, 0].astype(float), corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    matrix = np.stack([np.broadcast_to(-direction, e1.shape), e1, e2], axis=2).astype(float)
    t, u, v = np.linalg.solve(matrix, (origin - p)[..., None])[..., 0].T
    t = np.where((u >= 0) & (v >= 0) & (u + v <= 1) & (t >= 0), t, np.inf)
    return (-1, np.inf) if np.isinf(t.min()) else (int(t.argmin()), t.min())


def test_hits_are_those_of_the_definition():
    corners, rng = scattered(), np.random.default_rng(6)
    origins, directions = rng.random((200, 3)), rng.normal(size=(200, 3))
    directions /= np.linalg.norm(directions, axis=1, keepdims=True)

    met = RayScene(corners).nearest(origins, directions, np.full(200, 9, np.float32))
    truth = [first_by_definition(corners, o, d) for o, d in zip(origins, directions, strict=True)]
    assert met.triangle.tolist() == [triangle for triangle, _ in truth]
    hit = met.triangle >= 0
    assert_allclose(met.distance[hit], np.array([far for _, far in truth])[hit], atol=1e-5)


def test_weights_lead_to_the_place_that_was_hit():
    corners, rng = scattered(), np.random.default_rng(7)
    origins, directions = rng.random((500, 3)), np.repeat(DOWN, 500, axis=0)
    met = RayScene(corners).nearest(origins, directions, np.full(500, 9, np.float32))
    hit = met.triangle >= 0

    weights = np.concatenate([1 - met.weights.sum(axis=1, keepdims=True), met.weights], axis=1)
    reached = np.einsum("rk,rkx->rx", weights[hit], corners[met.triangle[hit]])
    assert_allclose(reached, (origins + directions * met.distance[:, None])[hit], atol=1e-5)


def test_a_back_is_seen_from_behind():
    scene, below = RayScene(FLOOR), np.array([[0.2, 0.2, -1.0]])

    assert scene.nearest(below, UP, np.ones(1) * 2).behind[0]
    assert not scene.nearest(-below * (-1, -1, 1), DOWN, np.ones(1) * 2).behind[0]


def test_nothing_is_met_beyond_the_reach():
    scene, above = RayScene(FLOOR), np.array([[0.2, 0.2, 1.0]])

    assert scene.nearest(above, DOWN, np.float32([0.9])).triangle[0] == -1
    assert scene.blocked(above, DOWN, np.float32([1.1]))[0] and not scene.blocked(above, DOWN, np.float32([0.9]))[0]


def test_far_from_the_origin_precision_stays():
    """Half a million units out, float32 steps are 1/32: corners on them stay exact, and so do distances."""
    away = np.array([5e5, -5e5, 5e5])
    met = RayScene((FLOOR + away).astype(np.float32)).nearest(away + [[0.2, 0.2, 0.125]], DOWN, np.float32([1]))

    assert_allclose(met.distance, [0.125], atol=1e-6)


def test_broken_triangles_and_empty_scenes_meet_nothing():
    broken = np.concatenate([FLOOR * np.float32(np.nan), FLOOR])
    above = np.array([[0.2, 0.2, 1.0]])

    assert RayScene(broken).nearest(above, DOWN, np.float32([2])).triangle.tolist() == [1]
    assert RayScene(FLOOR[:0]).nearest(above, DOWN, np.float32([2])).triangle.tolist() == [-1]
    assert not RayScene(FLOOR[:0]).blocked(above, DOWN, np.float32([2]))[0]
