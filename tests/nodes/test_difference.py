"""Differences are drawn where they are."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from shapes import asset, grid_part
from tangentry.nodes.difference import RAMP, difference
from tangentry.nodes.frames import frames
from tangentry.nodes.model import Map, Sheet, Stream
from tangentry.pipeline.errors import InputError


def test_a_texel_that_differs_by_the_scale_is_drawn_red_the_others_blue():
    one = np.tile(np.float32([0, 0, 1]), (8, 8, 1))
    two = one.copy()
    two[2, 6] = [np.sin(np.radians(5)), 0, np.cos(np.radians(5))]
    maps = [Map((Sheet("", texels, "normal", "tangent", "up", "float"),)) for texels in (one, two)]
    drawn = difference(frames(asset(grid_part())), None, *maps, scale=4.9).sheets[0].texels

    expected = np.tile(RAMP[0].astype(np.uint8), (8, 8, 1))
    expected[2, 6] = RAMP[-1]
    assert (drawn == expected).all()


def test_outside_the_charts_it_is_black():
    part = grid_part()
    small = replace(part, uvs=(Stream(part.uvs[0].values * np.float32(0.5), part.uvs[0].index),))
    drawn = difference(frames(asset(small)), other_decoder="pixel-unit", size=8).sheets[0].texels

    assert (drawn.any(axis=2).sum(axis=1) == [0, 0, 0, 0, 4, 4, 4, 4]).all()


def test_a_scale_of_nothing_is_refused():
    with pytest.raises(InputError, match="scale"):
        difference(frames(asset(grid_part())), other_decoder="pixel-unit", scale=0)
