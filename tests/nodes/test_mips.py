"""Mip chains: means of what they stand for, and the roughness that lost lengths become."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, box_part
from tangentry.nodes.mips import mips
from tangentry.nodes.model import Map, Sheet
from tangentry.nodes.pad import owned
from tangentry.pipeline.errors import InputError


def normal_map(normals) -> Map:
    return Map((Sheet("", np.asarray(normals, np.float32), "normal", "tangent", "up", "float"),))


def leaning(degrees: float, size: int = 8) -> Map:
    """Columns that lean right and left in turn."""
    turn = np.radians(degrees) * np.where(np.arange(size) % 2, -1, 1)
    row = np.stack([np.sin(turn), 0 * turn, np.cos(turn)], axis=1)
    return normal_map(np.broadcast_to(row, (size, size, 3)))


@pytest.mark.parametrize("shape", [(8, 8), (5, 3), (1, 7), (6, 1), (1, 1), (13, 40)])
def test_the_chain_ends_at_one_texel(shape):
    levels = mips(Map((Sheet("", np.zeros((*shape, 1), np.uint8), "data"),))).maps.sheets

    assert [sheet.texels.shape[:2] for sheet in levels] == [
        (max(1, shape[0] >> k), max(1, shape[1] >> k)) for k in range(len(levels))
    ]
    assert levels[-1].texels.shape[:2] == (1, 1) and [sheet.level for sheet in levels] == list(range(len(levels)))


@pytest.mark.parametrize("shape", [(8, 8), (5, 3), (9, 7), (1, 11)])
def test_each_level_keeps_the_mean(shape):
    texels = np.random.default_rng(0).random((*shape, 2)).astype(np.float32)

    for sheet in mips(Map((Sheet("", texels, "data"),))).maps.sheets:
        assert_allclose(sheet.texels.mean(axis=(0, 1)), texels.mean(axis=(0, 1)), atol=1e-6)


def test_normals_are_averaged_as_vectors_and_made_unit():
    for sheet in mips(leaning(40)).maps.sheets[1:]:
        assert_allclose(sheet.texels, np.broadcast_to([0, 0, 1], sheet.texels.shape), atol=1e-6)


@pytest.mark.parametrize("degrees", [0, 10, 40])
def test_the_length_that_is_lost_becomes_roughness(degrees):
    """Toksvig 2005: two unit vectors that lean a each way average to length cos a."""
    length, power = np.cos(np.radians(degrees)), 2 / 0.5**4 - 2
    less = length * power / (length + power * (1 - length))

    first, *further = mips(leaning(degrees), roughness=0.5).roughness.sheets

    assert_allclose(first.texels, 0.5, atol=1e-6)
    assert all(np.allclose(one.texels, (2 / (less + 2)) ** 0.25, atol=1e-5) for one in further)


def test_texels_outside_all_charts_count_for_nothing():
    mesh = asset(box_part())
    texels = np.full((64, 64, 1), 255, np.uint8)
    sheet = Sheet("", texels, "data")
    texels = np.where(owned(sheet, mesh)[..., None], 100, 255).astype(np.uint8)

    levels = mips(Map((Sheet("", texels, "data"),)), asset=mesh).maps.sheets

    assert all((level.texels == 100).all() for level in levels[1:])


def test_encodings_and_depth_stay():
    flat = np.broadcast_to(np.uint16([32768, 32768, 65535]), (4, 4, 3))

    levels = mips(Map((Sheet("stone", flat, "normal", "tangent", "down"),))).maps.sheets

    assert all(one.texels.dtype == np.uint16 and one.green == "down" and one.material == "stone" for one in levels)
    assert np.abs(levels[2].texels.astype(int) - [32768, 32768, 65535]).max() <= 1


def test_only_so_many_levels_are_made():
    assert len(mips(leaning(3), levels=1).maps.sheets) == 2


def test_undecided_green_is_refused():
    undecided = Map((Sheet("", np.zeros((2, 2, 3), np.uint8), "normal", "tangent", "undecided", name="bark"),))

    with pytest.raises(InputError, match="bark: it is not known"):
        mips(undecided)
