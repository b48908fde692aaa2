"""Offset surfaces without gaps."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, box_part
from tangentry.nodes.maps.bake_aim import aim_at
from tangentry.nodes.maps.surface import surface_of


def box_aim(way):
    box = surface_of(asset(box_part()), [0], needs_frames=False)
    return box.positions, aim_at(box.positions, box.frames[..., :3], np.full((12, 3), 0.1, np.float32), way)


@pytest.mark.parametrize(("way", "points"), [("smoothed", 8), ("straight", 8), ("own", 24)])
def test_smoothed_aims_move_a_point_one_way_whatever_its_faces(way, points):
    """A cube has 8 points; moved along its own normals it falls into six squares."""
    positions, aim = box_aim(way)
    moved = positions + aim.outward * aim.reach[..., None]

    assert len(np.unique(moved.reshape(-1, 3).round(5), axis=0)) == points


def test_a_cubes_aims_run_along_its_diagonals():
    """By angle each corner's three faces count alike, however they are cut (Thuermer & Wuethrich 1998)."""
    positions, aim = box_aim("smoothed")

    assert_allclose(aim.outward, (positions * 2 - 1) / np.sqrt(3), atol=1e-6)


def test_a_cubes_bent_edges_are_its_twelve_and_not_the_diagonals():
    positions, aim = box_aim("straight")
    length = np.linalg.norm(np.roll(positions, -1, axis=1) - positions, axis=2)

    assert (aim.bent == (length < 1.2)).all()
