"""NPZ files hold plain arrays, one set for each part."""

from __future__ import annotations

import io
from dataclasses import replace

import numpy as np
from numpy.testing import assert_array_equal
from shapes import asset, box_part, grid_part
from tangentry.nodes.formats.npz import write_npz
from tangentry.nodes.formats.vertices import vertices_of
from tangentry.nodes.model import Stream


def test_every_uv_set_and_colour_is_there_without_pickles():
    part = grid_part(2, 2)
    colours = Stream(np.random.default_rng(0).random((9, 4)).astype(np.float32), part.points.index)
    two = replace(
        part, uvs=(part.uvs[0], Stream(part.uvs[0].values * np.float32(2), part.uvs[0].index)), colours=(colours,)
    )

    arrays = np.load(io.BytesIO(write_npz(asset(box_part(), two)).tobytes()), allow_pickle=False)

    found = vertices_of(two)
    for name, wanted in (("uv0", found.uvs[0]), ("uv1", found.uvs[1]), ("colour0", found.colours[0])):
        assert_array_equal(arrays[f"1/{name}"], wanted)
    assert "0/uv1" not in arrays and "0/tangents" not in arrays and arrays["names"].tolist() == ["box", "grid"]


def test_the_same_asset_makes_the_same_bytes():
    assert_array_equal(write_npz(asset(box_part())), write_npz(asset(box_part())))
