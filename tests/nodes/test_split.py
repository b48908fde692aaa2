"""Which corners may share a vertex."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from shapes import asset, box_part, grid_part, torus_part
from tangentry.nodes.model import Stream
from tangentry.nodes.split import split


def count(part, **how) -> int:
    return len(np.unique(split(asset(part), **how).parts[0].vertices))


def folded():
    """Two faces on one side of an edge with mirrored UVs that agree along it."""
    part = grid_part(2, 1)
    uv = part.uvs[0].values.copy()
    uv[:, 0] = np.minimum(uv[:, 0], 1 - uv[:, 0])
    return replace(part, uvs=(Stream(uv, part.uvs[0].index),))


def test_a_torus_is_split_along_its_two_seams():
    assert count(torus_part(10, 6)) == 11 * 7


def test_seams_may_be_left_together():
    assert count(torus_part(10, 6), seams=False) == 10 * 6


@pytest.mark.parametrize(("hard", "vertices"), [(True, 24), (False, 8)])
def test_hard_edges_split_a_box(hard, vertices):
    assert count(box_part(), hard_edges=hard, seams=False) == vertices


@pytest.mark.parametrize(("mirrored", "vertices"), [(True, 8), (False, 6)])
def test_mirrored_charts_are_split_where_they_meet(mirrored, vertices):
    assert count(folded(), mirrored=mirrored) == vertices


def test_values_count_and_not_their_rows():
    part = grid_part(2, 2)
    doubled = Stream(
        np.concatenate([part.uvs[0].values] * 2), part.uvs[0].index + np.where(np.arange(16) % 2, 9, 0).astype(np.int32)
    )

    assert count(replace(part, uvs=(doubled,))) == 9
