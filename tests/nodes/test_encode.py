"""Encodings of maps: there and back, green turned over, steps spread."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from tangentry.nodes.decode import decode
from tangentry.nodes.encode import encode
from tangentry.nodes.model import Map, Sheet
from tangentry.pipeline.errors import InputError


def bumps(size: int = 64) -> Map:
    """Unit normals of sin x sin y."""
    x, y = np.meshgrid(np.linspace(0, 6, size), np.linspace(0, 6, size))
    normals = np.stack([-np.cos(x) * np.sin(y), -np.sin(x) * np.cos(y), np.ones_like(x)], axis=2)
    normals /= np.linalg.norm(normals, axis=2, keepdims=True)
    return Map((Sheet("stone", normals.astype(np.float32), "normal", "tangent", "up", "float", "bumps"),))


@pytest.mark.parametrize("green", ["up", "down"])
@pytest.mark.parametrize("bits", [8, 16])
@pytest.mark.parametrize(
    ("encoding", "channels"), [("unorm", 3), ("snorm", 3), ("xy", 2), ("octahedral", 2), ("hemi-octahedral", 2)]
)
def test_there_and_back_returns(encoding, channels, bits, green):
    coded = encode(bumps(), encoding=encoding, bits=bits, green=green)
    sheet = coded.sheets[0]

    assert (sheet.texels.shape[2], sheet.texels.dtype.itemsize) == (channels, bits // 8)
    assert (sheet.encoding, sheet.green) == (encoding, green)
    assert_allclose(decode(coded).sheets[0].texels, bumps().sheets[0].texels, atol=4 / 2**bits)


def test_turning_green_over_twice_changes_no_code():
    up = encode(bumps(), bits=8)
    down = encode(up, bits=8, green="down")

    assert (down.sheets[0].texels[..., 1] == 255 - up.sheets[0].texels[..., 1]).all()
    assert (encode(down, bits=8).sheets[0].texels == up.sheets[0].texels).all()


def test_codes_that_are_right_already_are_passed_on():
    coded = encode(bumps())

    assert encode(coded).sheets[0].texels is coded.sheets[0].texels


def test_diffusing_keeps_the_mean_of_a_slope_between_two_codes():
    """A lean of a quarter of a step: rounded it is lost, diffused every fourth texel holds it."""
    lean = 0.25 * 2 / 255 + 1 / 255
    normals = np.broadcast_to(np.float32([lean, 1 / 255, 1]), (64, 64, 3)).copy()
    flat = Map((Sheet("", normals, "normal", "tangent", "up", "float"),))

    plain, spread = (encode(flat, dither=how).sheets[0].texels[..., 0] for how in ("none", "diffused"))

    assert len(np.unique(plain)) == 1 and set(np.unique(spread)) == {128, 129}
    assert spread.mean() == pytest.approx((lean + 1) * 127.5, abs=0.01)


def test_what_holds_no_normals_is_passed_on():
    heights = Map((Sheet("", np.zeros((2, 2, 1), np.uint8), "height"),))

    assert encode(heights).sheets[0] is heights.sheets[0]


def test_undecided_green_is_refused():
    undecided = Map((replace(bumps().sheets[0], green="undecided"),))

    with pytest.raises(InputError, match="bumps: it is not known whether its green"):
        encode(undecided)


def test_octahedral_codes_are_not_dithered():
    with pytest.raises(InputError, match="setting dither: octahedral"):
        encode(bumps(), encoding="octahedral", dither="diffused")
