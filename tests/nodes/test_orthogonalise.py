"""Squared frames are orthonormal and keep their side."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, grid_part, half_mirrored, sphere_part
from tangentry.nodes.frames import frames
from tangentry.nodes.geometry.vectors import angle_between
from tangentry.nodes.model import Stream
from tangentry.nodes.orthogonalise import orthogonalise


def sheared(part, amount: float):
    uv = part.uvs[0]
    return replace(part, uvs=(Stream(uv.values @ np.float32([[1, 0], [amount, 1]]), uv.index),))


def skewed(amount: float = 0.7):
    return frames(asset(sheared(half_mirrored(sphere_part(12, 8), 12, 8), amount)), method="angle")


@pytest.mark.parametrize("method", ["gram-schmidt", "polar"])
def test_frames_come_out_orthonormal_and_keep_their_side(method):
    before = skewed().parts[0]
    after = orthogonalise(skewed(), method=method).parts[0]

    normal, tangent = after.normals.values[after.normals.index], after.frames.tangents[after.frames.index]
    axes = np.stack([tangent, np.cross(normal, tangent), normal], axis=2).astype(np.float64)
    assert_allclose(axes.mT @ axes, np.broadcast_to(np.eye(3), axes.shape), atol=1e-6)
    assert after.frames.bitangents is None
    assert (after.frames.sides[after.frames.index] == before.frames.sides[before.frames.index]).all()


@pytest.mark.parametrize("degrees", [10.0, 45.0, 60.0])
def test_gram_schmidt_keeps_the_tangent_and_polar_gives_way_on_both_sides(degrees):
    """UVs (0,0), (1,0), (s,1) on a right triangle: T = (1, 0, 0), B = (-s, 1, 0), 90 + atan s apart.

    The nearest rotation halves the excess.
    """
    part = frames(asset(sheared(grid_part(1, 1), np.tan(np.radians(degrees)))), method="face")

    kept, shared = (orthogonalise(part, method=method).parts[0].frames.tangents for method in ("gram-schmidt", "polar"))

    assert_allclose(kept, np.broadcast_to([1, 0, 0], kept.shape), atol=1e-6)
    assert_allclose(angle_between(shared, kept), degrees / 2, atol=1e-4)


def test_polar_is_the_nearest_rotation():
    """Higham 1986: the orthogonal polar factor is nearest in the Frobenius norm; found here by singular values."""
    part = frames(asset(sheared(grid_part(1, 1), 0.6)), method="face").parts[0]
    matrix = np.stack([part.frames.tangents[0], part.frames.bitangents[0], [0, 0, 1]], axis=1).astype(np.float64)
    u, _, v = np.linalg.svd(matrix)

    after = orthogonalise(asset(part), method="polar").parts[0].frames

    assert_allclose(after.tangents[0], (u @ v)[:, 0], atol=1e-6)


def test_none_leaves_the_skew():
    part = skewed()

    assert orthogonalise(part, method="none") is part


def test_squaring_twice_changes_nothing_more():
    once = orthogonalise(skewed())

    after = orthogonalise(once).parts[0].frames

    assert_allclose(after.tangents[after.index], once.parts[0].frames.tangents[once.parts[0].frames.index], atol=1e-6)


def test_a_tangent_along_its_normal_is_replaced_and_marked():
    part = frames(asset(grid_part(1, 1))).parts[0]
    along = replace(part, frames=replace(part.frames, tangents=np.float32([[0, 0, 1]] * len(part.frames.tangents))))

    after = orthogonalise(asset(along)).parts[0].frames

    assert after.fallback.all() and np.abs(after.tangents[:, 2]).max() < 1e-6
