"""Welding joins points and leaves corners alone."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from shapes import asset, torus_part
from tangentry.nodes.model import Stream
from tangentry.nodes.weld import weld


def unwelded(part, jitter=0.0):
    """The part with a point of its own at every corner."""
    rng = np.random.default_rng(0)
    points = part.points.values[part.points.index]
    points = points + rng.uniform(-jitter, jitter, points.shape).astype(np.float32)
    return replace(part, points=Stream(points.astype(np.float32), np.arange(len(points), dtype=np.int32)))


@pytest.mark.parametrize(("jitter", "within"), [(0.0, 0.0), (1e-5, 1e-4)])
def test_points_within_the_distance_become_one(jitter, within):
    part = torus_part(12, 8)

    after = weld(asset(unwelded(part, jitter)), within=within).parts[0]

    assert len(after.points.values) == len(part.points.values)
    assert np.abs(after.points.values[after.points.index] - part.points.values[part.points.index]).max() <= jitter


def test_corner_attributes_are_passed_on_as_they_are():
    part = unwelded(torus_part(6, 4))

    after = weld(asset(part)).parts[0]

    assert after.uvs is part.uvs and after.normals is part.normals and after.starts is part.starts


def test_a_part_without_coincident_points_is_passed_on_itself():
    part = torus_part(6, 4)

    assert weld(asset(part)).parts[0] is part


def test_points_further_apart_stay_apart():
    part = unwelded(torus_part(6, 4), 1e-3)

    assert len(weld(asset(part), within=1e-7).parts[0].points.values) == len(part.points.values)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_the_order_of_points_does_not_matter(seed):
    part = unwelded(torus_part(5, 4), 1e-5)
    order = np.random.default_rng(seed).permutation(len(part.points.values))
    place = np.argsort(order).astype(np.int32)
    shuffled = replace(part, points=Stream(part.points.values[order], place[part.points.index]))

    one, two = (weld(asset(p), within=1e-4).parts[0].points.index for p in (part, shuffled))

    assert len(np.unique(np.stack([one, two]), axis=1).T) == len(np.unique(one)) == len(np.unique(two))
