"""Decoded maps: unit vectors, y up, whatever the codes were."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from tangentry.nodes.decode import decode
from tangentry.nodes.model import Map, Sheet


def decoded(codes, **how) -> np.ndarray:
    (sheet,) = decode(Map((Sheet("", np.array([codes], np.uint8), "normal", "tangent", **how),))).sheets
    assert (sheet.encoding, sheet.green, sheet.texels.dtype) == ("float", "up", np.float32)
    return sheet.texels[0]


def test_directions_come_out_with_length_one():
    out = decoded([(255, 128, 128), (200, 40, 90), (0, 0, 0)], green="up")

    assert_allclose(np.linalg.norm(out, axis=1), 1, atol=1e-6)


def test_green_down_is_turned_over():
    codes = [(100, 60, 220), (10, 130, 200)]

    assert_allclose(decoded(codes, green="down"), decoded(codes, green="up") * [1, -1, 1], atol=1e-6)


def test_a_texel_without_direction_points_ahead():
    """127.5 would be nothing in every channel; snorm has such a code."""
    assert decoded([(128, 128, 128)], green="up", encoding="snorm").tolist() == [[0, 0, 1]]


@pytest.mark.parametrize("code", [(255, 255), (0, 0), (255, 0)])
def test_two_channels_beyond_the_rim_lie_on_it(code):
    out = decoded([code], green="up", encoding="xy")[0]

    assert out[2] == 0 and np.linalg.norm(out) == pytest.approx(1)


def test_what_holds_no_normals_is_passed_on():
    sheet = Sheet("", np.zeros((2, 2, 3), np.uint8), "colour")

    assert decode(Map((sheet,))).sheets[0] is sheet
