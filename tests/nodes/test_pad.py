"""Gutters: filled from the nearest chart, which never crosses into another's."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from shapes import asset, grid_part
from tangentry.nodes.model import Map, Sheet, Stream
from tangentry.nodes.pad import pad

SIZE = 64


def charts():
    """Two squares in UV space: texels 8 to 24 and 40 to 56 along x, rows 24 to 40."""
    corners = grid_part(1, 1).uvs[0]
    places = [((corners.values * 16 + [x, 24]) / SIZE).astype(np.float32) for x in (8, 40)]
    return asset(*(replace(grid_part(1, 1), uvs=(Stream(place, corners.index),)) for place in places))


def painted() -> Map:
    texels = np.zeros((SIZE, SIZE, 3), np.uint8)
    texels[24:40, 8:24] = (200, 10, 10)
    texels[24:40, 40:56] = (10, 10, 200)
    return Map((Sheet("", texels, "colour"),))


def test_every_texel_goes_to_the_nearer_chart():
    texels = pad(painted(), charts(), gutter=SIZE).sheets[0].texels

    assert (texels[:, :31, 0] == 200).all() and (texels[:, 33:, 2] == 200).all()


def test_charts_themselves_and_what_is_far_stay():
    before, after = painted().sheets[0].texels, pad(painted(), charts(), gutter=3).sheets[0].texels

    assert (after[24:40, 8:24] == before[24:40, 8:24]).all()
    assert (after[30, 5:8, 0] == 200).all() and (after[30, 4] == 0).all()
    assert (after[:20] == 0).all()


@pytest.mark.parametrize("gutter", [0, 1, 5])
def test_the_gutter_is_as_wide_as_was_asked(gutter):
    row = pad(painted(), charts(), gutter=gutter).sheets[0].texels[32, :, 0]

    assert (row == 200).sum() == 16 + 2 * gutter


def test_depth_and_channels_stay():
    sheet = Sheet("", np.ones((SIZE, SIZE, 1), np.uint16), "height")

    after = pad(Map((sheet,)), charts()).sheets[0]

    assert (after.texels == sheet.texels).all() and after.texels.dtype == np.uint16
