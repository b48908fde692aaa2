"""Rows and corners are told apart by their values, in one pass."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from numpy.testing import assert_array_equal
from shapes import half_mirrored, torus_part
from tangentry.nodes.geometry.corners import distinct_corners, distinct_rows, distinct_values, divided
from tangentry.nodes.model import Stream

FEW = arrays(np.float32, st.tuples(st.integers(0, 600), st.just(2)), elements=st.sampled_from([0.0, -0.0, 1.5, -2.0]))


@settings(deadline=None)
@given(FEW)
def test_labels_are_those_of_a_sort(values):
    """numpy.unique tells rows apart by sorting them."""
    _, first, label = np.unique(values, axis=0, return_index=True, return_inverse=True)

    made, where = distinct_values(values)

    assert_array_equal(where, np.sort(first))
    assert_array_equal(where[made], first[label.ravel()])


@settings(deadline=None)
@given(FEW)
def test_arrays_side_by_side_are_as_one(values):
    one, other = (distinct_values(*given)[0] for given in ((values,), (values[:, :1], values[:, 1:])))

    assert_array_equal(one, other)


def test_labels_count_up_as_rows_appear():
    label, first = distinct_rows(np.int32([7, 5, 7, -1]), np.int32([0, 0, 0, 0]))

    assert label.tolist() == [0, 1, 0, 2] and first.tolist() == [0, 1, 3]


def test_corners_are_one_where_values_are_whatever_the_indices_say():
    """A torus has (nu + 1)(nv + 1) distinct corners, also when every corner has rows of its own."""
    part = torus_part(6, 5)
    streams = (part.points, part.normals, part.uvs[0])
    corner = np.arange(part.corner_count, dtype=np.int32)
    alone = [Stream(stream.values[stream.index], corner) for stream in streams]

    one, other = distinct_corners(*streams), distinct_corners(*alone)

    assert len(one.rows[0]) == len(other.rows[0]) == 7 * 6
    assert_array_equal(one.label, other.label)
    for vertices, given_streams in ((one, streams), (other, alone)):
        for stream, rows in zip(given_streams, vertices.rows, strict=True):
            assert_array_equal(stream.values[rows][vertices.label], stream.values[stream.index])


def test_vertices_are_divided_only_where_another_label_differs():
    part = half_mirrored(torus_part(6, 5), 6, 5)
    vertices = distinct_corners(part.points, part.normals, part.uvs[0])
    half = (np.arange(part.corner_count) % 2).astype(np.int32)

    assert divided(vertices, vertices.label // 2) is vertices
    pairs = np.stack([vertices.label, half], axis=1)
    assert len(divided(vertices, half).rows[0]) == len(np.unique(pairs, axis=0))
