"""Polygons cut into triangles: all of their area once, whichever corner comes first."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from shapes import grid_part
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.model import Part, Stream


def polygon(outline: np.ndarray) -> Part:
    """One face with this outline, (corners, 2), in the x-y plane."""
    points = np.concatenate([outline, np.zeros((len(outline), 1))], axis=1).astype(np.float32)
    size = len(outline)
    return Part("polygon", -1, np.array([0, size], np.int32), Stream(points, np.arange(size, dtype=np.int32)))


def areas(part: Part) -> np.ndarray:
    """Of the triangles, negative where they turn clockwise."""
    a, b, c = (part.points.values[triangulate(part)[0][:, k], :2].astype(np.float64) for k in range(3))
    first, second = b - a, c - a
    return (first[:, 0] * second[:, 1] - first[:, 1] * second[:, 0]) / 2


def shoelace(outline: np.ndarray) -> float:
    x, y = outline.T
    return float(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1)) / 2)


def around(radius: np.ndarray) -> np.ndarray:
    """The star-shaped outline of these distances from its middle."""
    angle = 2 * np.pi * np.arange(len(radius)) / len(radius)
    return radius[:, None] * np.stack([np.cos(angle), np.sin(angle)], axis=1)


def cut(part: Part) -> set[frozenset[tuple[float, ...]]]:
    """The triangles as sets of places."""
    places = part.points.values[part.points.index[triangulate(part)[0]]].round(5) + 0.0
    return {frozenset(map(tuple, corners)) for corners in places.tolist()}


@settings(max_examples=50, deadline=None)
@given(size=st.integers(3, 60), seed=st.integers(0, 2**32 - 1))
def test_the_triangles_of_a_polygon_cover_it_once(size, seed):
    outline = around(np.random.default_rng(seed).uniform(0.2, 1, size))

    found = areas(polygon(outline))

    assert len(found) == size - 2
    assert_allclose([found.sum(), np.abs(found).sum()], shoelace(outline), rtol=1e-5)


@settings(max_examples=50, deadline=None)
@given(size=st.integers(4, 20), turn=st.integers(1, 19), even=st.booleans(), seed=st.integers(0, 2**32 - 1))
def test_the_cut_does_not_depend_on_the_first_corner(size, turn, even, seed):
    """Regular polygons are the hard case: every cut is as short as its neighbour's."""
    outline = around(np.ones(size) if even else np.random.default_rng(seed).uniform(0.2, 1, size))

    assert cut(polygon(np.roll(outline, turn, axis=0))) == cut(polygon(outline))


@pytest.mark.parametrize("hostile", ["star", "junk", "one place"])
def test_a_huge_polygon_is_cut_without_delay(hostile):
    """A hundred thousand corners: looking at all corners for every cut would take hours."""
    size = 100_000
    outline = {
        "star": around(np.where(np.arange(size) % 2, 0.3, 1.0)),
        "junk": np.random.default_rng(0).normal(size=(size, 2)),
        "one place": np.zeros((size, 2)),
    }[hostile]

    found = areas(polygon(outline))

    assert len(found) == size - 2
    if hostile == "star":
        assert_allclose(np.abs(found).sum(), shoelace(outline), rtol=1e-6)


def test_triangles_and_quads_and_polygons_stand_in_the_order_of_their_faces():
    starts = np.array([0, 3, 7, 9, 14], np.int32)
    outline = np.concatenate([around(np.ones(size)) + 3 * size for size in (3, 4, 2, 5)])
    part = polygon(outline)

    triangles, face = triangulate(Part("mixed", -1, starts, part.points))

    assert face.tolist() == [0, 1, 1, 3, 3, 3]
    assert (np.searchsorted(starts, triangles, "right") - 1 == face[:, None]).all()


def test_a_quad_is_cut_along_its_shorter_diagonal_in_uv_space():
    grid = grid_part(1, 1)
    sheared = grid.uvs[0].values @ np.float32([[1, 0], [0.5, 1]])

    triangles, _ = triangulate(Part("quad", -1, grid.starts, grid.points, None, (Stream(sheared, grid.uvs[0].index),)))

    corners = {tuple(place) for place in sheared[grid.uvs[0].index[np.intersect1d(*triangles)]].tolist()}
    assert corners == {(1.0, 0.0), (0.5, 1.0)}
