"""Normals: kept, and built by each rule."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import trimesh
from numpy.testing import assert_allclose
from shapes import asset, box_part, grid_part, sphere_part, torus_part, triangulated
from tangentry.nodes.geometry.vectors import angle_between
from tangentry.nodes.model import Part, Stream
from tangentry.nodes.normals import normals


def at_corners(part: Part) -> np.ndarray:
    assert part.normals is not None
    return part.normals.values[part.normals.index]


def bare(part: Part) -> Part:
    return replace(part, normals=None)


def bevel(inset: float) -> Part:
    """The top of a unit cube and the bevel of 45 degrees that takes `inset` off it, extruded along y."""
    profile = np.array([[inset - 1, 0], [0, 0], [inset, -inset]])
    points = np.array([[x, y, z] for x, z in profile for y in (0.0, 1.0)], np.float32)
    index = np.array([0, 2, 3, 1, 2, 4, 5, 3], np.int32)
    return Part("bevel", -1, np.array([0, 4, 8], np.int32), Stream(points, index))


def test_authored_normals_are_kept():
    part = torus_part(8, 6)

    assert normals(asset(part)).parts[0] is part


def test_parts_without_normals_get_flat_ones():
    """glTF 2.0, 3.7.2.1: when normals are not specified, client implementations MUST calculate flat normals."""
    after = normals(asset(bare(box_part()))).parts[0]

    assert_allclose(at_corners(after), at_corners(box_part()), atol=1e-7)


@pytest.mark.parametrize(("method", "degrees"), [("angle", 22.5), ("area", np.degrees(np.arctan(0.1)))])
def test_a_bevelled_edge(method, degrees):
    """Closed form: alike angles halve the 45 degrees; areas 0.9 and 0.1 sqrt 2 add up to 1 upward and 0.1 sideways."""
    after = normals(asset(bevel(0.1)), method=method).parts[0]

    at_the_edge = at_corners(after)[[1, 2, 4, 7]].astype(np.float64)
    assert_allclose(np.degrees(np.arctan2(at_the_edge[:, 0], at_the_edge[:, 2])), degrees, atol=1e-4)


@pytest.mark.parametrize("method", ["angle", "area"])
def test_smooth_normals_of_a_torus_are_nearly_its_own(method):
    """The error is of second order in the size of a cell: cells of half the size have a quarter of it."""
    worst = []
    for fine in (1, 2):
        part = torus_part(64 * fine, 32 * fine)
        after = normals(asset(bare(part)), method=method).parts[0]
        worst.append(angle_between(at_corners(after), at_corners(part)).max())

    assert worst[0] < 1 and worst[0] / worst[1] == pytest.approx(4, rel=0.1)


def test_angle_weights_agree_with_an_independent_library():
    """trimesh's vertex normals, which are weighted by angle."""
    part = triangulated(bare(sphere_part(17, 9)))
    mesh = trimesh.Trimesh(part.points.values.astype(float), part.points.index.reshape(-1, 3), process=False)
    expected = trimesh.geometry.weighted_vertex_normals(
        len(mesh.vertices), mesh.faces, mesh.face_normals, mesh.face_angles
    )

    after = normals(asset(part), method="angle").parts[0]

    used = np.unique(part.points.index[: 3 * 60])
    got = np.zeros_like(expected)
    got[part.points.index] = at_corners(after)
    inner = used[np.abs(part.points.values[used][:, 1]) < 0.9]
    assert_allclose(got[inner], expected[inner], atol=1e-5)


@pytest.mark.parametrize(("crease", "smooth"), [(89.0, False), (91.0, True)])
def test_edges_beyond_the_crease_angle_are_hard(crease, smooth):
    after = normals(asset(bare(box_part())), method="crease", crease=crease).parts[0]

    assert (len(np.unique(at_corners(after).round(5), axis=0)) == 8) == smooth


def test_smoothing_groups_are_honoured():
    flat = bare(grid_part(2, 1))
    bent = flat.points.values.copy()
    bent[bent[:, 0] > 0.75, 2] = 0.5
    part = replace(flat, points=Stream(bent, flat.points.index), smoothing=np.array([1, 1], np.int32))

    together = at_corners(normals(asset(part)).parts[0])
    apart = at_corners(normals(asset(replace(part, smoothing=np.array([1, 2], np.int32)))).parts[0])

    assert len(np.unique(together.round(5), axis=0)) == 3 and len(np.unique(apart.round(5), axis=0)) == 2
