"""Frames held against differential geometry, Lengyel's equations, and what practitioners say."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, cylinder_part, cylinder_truth, grid_part, quads, torus_part, torus_truth, triangulated
from tangentry.nodes.frames import frames
from tangentry.nodes.geometry.corners import distinct_corners
from tangentry.nodes.geometry.directions import triangle_directions
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.geometry.vectors import angle_between, unit
from tangentry.nodes.model import Frames, Part, Stream
from tangentry.nodes.normals import normals
from tangentry.nodes.orthogonalise import orthogonalise


def solved(part: Part, method: str) -> Frames:
    made = frames(asset(part), method=method).parts[0].frames
    assert made is not None
    return made


def triangle(points: list[list[float]], uvs: list[list[float]]) -> Part:
    at = np.array([[0, 1, 2]])
    one = quads(np.array(points), np.array(uvs), np.array([[0.0, 0, 1]]), at, at, 0 * at)
    return replace(one, starts=np.array([0, 3], np.int32))


def test_a_triangle_s_tangents_solve_lengyel_s_equations():
    """Lengyel, "Computing Tangent Space Basis Vectors for an Arbitrary Mesh", 2001: Q1 = s1 T + t1 B, Q2 = s2 T + t2 B,
    with Q the edges and (s, t) the UV differences; solved here by a general linear solver in float64."""
    points, uvs = [[1, 2, 0], [4, 3, 1], [2, 6, -1]], [[0.1, 0.2], [0.7, 0.3], [0.2, 0.9]]
    edges, differences = np.diff(points, axis=0), np.diff(uvs, axis=0)
    tangent, bitangent = np.linalg.solve(differences, edges.astype(float))

    part = triangle(points, uvs)
    found = triangle_directions(part, triangulate(part)[0], part.uvs[0], False)

    assert_allclose(found.tangent[0], tangent / np.linalg.norm(tangent), atol=1e-7)
    assert_allclose(found.bitangent[0], bitangent / np.linalg.norm(bitangent), atol=1e-7)


@pytest.mark.parametrize(
    ("s", "apart", "error"),
    [(0.1, 95.7106, 2.4940), (0.5, 116.5651, 12.0230), (1, 135.0, 21.1222), (2, 153.4349, 30.8657)],
)
def test_a_sheared_triangle_is_skewed_as_the_table_says(s, apart, error):
    """A right triangle with UVs (0,0), (1,0), (s,1): T = (1,0,0), B = (-s,1,0), 90 + atan s apart. The last column is
    what squaring the frame costs the direction (.5, .5, sqrt .5); figures of an independent program in float64."""
    part = normals(asset(triangle([[0, 0, 0], [1, 0, 0], [0, 1, 0]], [[0, 0], [1, 0], [s, 1]]))).parts[0]
    skewed = frames(asset(part), method="face")
    made, square = skewed.parts[0].frames, orthogonalise(skewed).parts[0].frames

    assert_allclose(angle_between(made.tangents, made.bitangents), apart, atol=1e-4)
    normal, weights = np.array([0, 0, np.sqrt(0.5)]), np.array([[0.5]])
    kept = unit(weights * (made.tangents[:1] + made.bitangents[:1]) + normal)
    turned = unit(weights * (square.tangents[:1] + np.cross([[0, 0, 1]], square.tangents[:1])) + normal)
    assert_allclose(angle_between(kept, turned), error, atol=1e-3)


def sheared(part: Part, shear: float) -> Part:
    """The part with u + shear v for u."""
    uv = part.uvs[0]
    return replace(part, uvs=(Stream(uv.values @ np.float32([[1, 0], [shear, 1]]), uv.index),))


@pytest.mark.parametrize(
    ("make", "truth", "v", "along_u", "along_v"),
    [
        (torus_part, torus_truth, 0.25, 2 * np.pi * 2.0, 2 * np.pi * 0.5),
        (cylinder_part, cylinder_truth, 0.5, 2 * np.pi * 1.0, 3.0),
    ],
)
@pytest.mark.parametrize("method", ["uniform", "area", "angle"])
def test_a_sheared_parametrisation_s_bitangent_is_its_partial_derivative(make, truth, v, along_u, along_v, method):
    """do Carmo, Differential Geometry of Curves and Surfaces, 1976, 2-2: with u' = u + s v, the derivative along v at
    fixed u' is P_v - s P_u. |P_u| and |P_v| where v is a quarter around the torus's tube, halfway up the cylinder."""
    part, shear = make(128, 64), 0.1
    uv, exact = part.uvs[0].values[part.uvs[0].index], truth(part)
    chosen = (uv[:, 0] > 0) & (uv[:, 0] < 1) & (uv[:, 1] == np.float32(v))
    derivative = unit(along_v * exact.bitangent - shear * along_u * exact.tangent)

    made = solved(sheared(part, shear), method)

    assert chosen.sum() == 127 * 4
    assert angle_between(made.bitangents[made.index][chosen], derivative[chosen]).max() < 0.3


def test_a_million_triangles_of_a_torus_have_as_many_frames_as_topology_says():
    """A grid of nu x nv with one u seam and half its charts mirrored: (nu + 1) nv corners that differ in position,
    normal or UV; (nu + 1)(nv + 2) frames, one more along each of the two lines where mirrored charts meet."""
    nu, nv = 1000, 500
    part = torus_part(nu, nv)
    uv = part.uvs[0].values.copy()
    uv[:, 1] = np.minimum(uv[:, 1], 1 - uv[:, 1]).round(6)
    part = replace(part, uvs=(Stream(uv, part.uvs[0].index),))

    assert distinct_corners(part.points, part.normals, part.uvs[0]).label.max() + 1 == (nu + 1) * nv == 500_500
    assert len(solved(part, "mikktspace").tangents) == (nu + 1) * (nv + 2) == 502_502


# Common practice, no source


def test_the_inverse_of_a_squared_frame_is_its_transpose():
    part = orthogonalise(frames(asset(torus_part(20, 10)), method="angle")).parts[0]
    made = part.frames
    tangent, normal = made.tangents[made.index], part.normals.values[part.normals.index]
    matrix = np.stack([tangent, np.cross(normal, tangent) * made.sides[made.index][:, None], normal], axis=2)

    assert_allclose(np.linalg.inv(matrix.astype(np.float64)), np.swapaxes(matrix, 1, 2), atol=1e-5)


def test_larger_red_leans_right_and_larger_green_leans_up():
    made = solved(grid_part(), "mikktspace")
    tangent, bitangent = made.tangents[0], np.cross([0, 0, 1], made.tangents[0]) * made.sides[0]

    assert_allclose(0.6 * tangent + 0.8 * bitangent, [0.6, 0.8, 0], atol=1e-7)


def test_directions_transform_by_the_model_matrix_and_normals_by_its_inverse_transpose():
    matrix = np.array([[2.0, 0.3, 0], [0, 0.5, 0.1], [0.2, 0, 1.5]])
    part = triangulated(torus_part(24, 12))
    moved = replace(part, points=Stream((part.points.values @ matrix.T).astype(np.float32), part.points.index))

    one, two = (normals(asset(each), method="face").parts[0] for each in (part, moved))
    before, after = solved(one, "face"), solved(two, "face")

    assert angle_between(after.tangents, unit(before.tangents @ matrix.T)).max() < 1e-3
    assert angle_between(after.bitangents, unit(before.bitangents @ matrix.T)).max() < 1e-3
    assert angle_between(two.normals.values, unit(one.normals.values @ np.linalg.inv(matrix))).max() < 1e-3
