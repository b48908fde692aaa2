"""Points far away are joined by the same rule as others, and in no more time."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_array_equal
from tangentry.nodes.geometry.welding import join_points


@pytest.mark.parametrize("x", [0.0, 1.0, -1.0, 1e9, -1e12, 1e20, -3e38])
def test_points_are_joined_by_their_distance_however_far_they_are(x):
    after = np.nextafter(np.float32(x), np.float32(np.inf)) if abs(x) > 1e6 else x + 1
    points = np.array([(x, 0, 0), (x, 4e-7, 0), (x, 1.2e-6, 0), (x, 9, 0), (after, 0, 0)], np.float32)

    label, first = join_points(points, 1e-6)

    assert_array_equal(label, [0, 0, 0, 1, 2])
    assert_array_equal(first, [0, 3, 4])


@pytest.mark.parametrize("far", [1e20, -1e20])
def test_one_point_far_away_leaves_the_others_in_their_cells(far):
    points = np.random.default_rng(0).uniform(0, 1, (100_000, 3)).astype(np.float32)
    alone, _ = join_points(points, 1e-4)

    label, _ = join_points(np.concatenate([points, np.full((1, 3), far, np.float32)]), 1e-4)

    assert_array_equal(label, [*alone, alone.max() + 1])
