"""What rays missed, as figures."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from shapes import asset, grid_part
from tangentry.nodes.bake import bake
from tangentry.nodes.check_bake import check_bake
from tangentry.nodes.frames import frames
from tangentry.nodes.model import Map, Sheet, Stream
from tangentry.pipeline.errors import InputError


def hits(detail) -> Map:
    return bake(frames(asset(grid_part())), asset(detail), size=64, distance=0.05, gives="hits")


def shifted(by: float):
    points = grid_part().points
    return replace(grid_part(), points=Stream(points.values + np.float32([by, 0, 0]), points.index))


def turned_over():
    part = grid_part()
    order = np.arange(part.corner_count).reshape(-1, 4)[:, ::-1].ravel()
    streams = [Stream(one.values, one.index[order]) for one in (part.points, part.normals, part.uvs[0])]
    return replace(part, points=streams[0], normals=streams[1], uvs=(streams[2],))


def test_a_bake_that_met_everything_has_no_findings():
    found = check_bake(hits(grid_part()))

    assert found.items == () and found.facts["map: texels that met the detail"] == 64 * 64


def test_a_detail_that_covers_half_leaves_half_missed():
    (item,) = check_bake(hits(shifted(0.5))).items

    assert (item.id, item.severity, item.count) == ("bake-missed", "warning", 64 * 32)
    assert item.measured.tolist() == [0.5]


def test_a_detail_that_is_turned_over_is_met_from_behind():
    (item,) = check_bake(hits(turned_over())).items

    assert (item.id, item.count) == ("bake-behind", 64 * 64)


def test_what_is_within_the_limit_is_a_note():
    (item,) = check_bake(hits(shifted(0.5)), missed=0.6).items

    assert item.severity == "note" and item.limit == 0.6


@pytest.mark.parametrize("channels", [1, 3])
def test_other_maps_are_refused(channels):
    with pytest.raises(InputError, match="no picture of hits"):
        check_bake(Map((Sheet("", np.full((4, 4, channels), 7, np.uint8), "colour"),)))
