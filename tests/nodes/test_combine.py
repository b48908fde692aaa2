"""Detail over base: what the formulas promise."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from tangentry.nodes.combine import combine
from tangentry.nodes.model import Map, Sheet
from tangentry.pipeline.errors import InputError

METHODS = ["reoriented", "derivatives", "whiteout", "udn", "linear", "overlay"]


def of_slopes(p, q, size: int = 8) -> Map:
    """A map of normals (-p, -q, 1) / length."""
    slopes = np.stack(np.broadcast_arrays(-np.asarray(p, float), -np.asarray(q, float), 1.0), axis=-1)
    normals = np.broadcast_to(slopes, (size, size, 3))
    normals = normals / np.linalg.norm(normals, axis=2, keepdims=True)
    return Map((Sheet("", normals.astype(np.float32), "normal", "tangent", "up", "float"),))


def out(base, detail, mask=None, **how) -> np.ndarray:
    return combine(base, detail, mask, **how).sheets[0].texels


FLAT, TILTED = of_slopes(0, 0), of_slopes(0.5, -0.3)


@pytest.mark.parametrize("method", ["reoriented", "derivatives", "whiteout"])
def test_flat_changes_nothing_on_either_side(method):
    assert_allclose(out(FLAT, TILTED, method=method), TILTED.sheets[0].texels, atol=1e-6)
    assert_allclose(out(TILTED, FLAT, method=method), TILTED.sheets[0].texels, atol=1e-6)


@pytest.mark.parametrize("method", METHODS)
def test_normals_come_out_with_length_one(method):
    assert_allclose(np.linalg.norm(out(TILTED, of_slopes(-0.2, 0.7), method=method), axis=2), 1, atol=1e-6)


def test_derivatives_add_the_heights():
    """Slopes of a sum are sums of slopes."""
    assert_allclose(
        out(TILTED, of_slopes(0.2, 0.4), method="derivatives"), of_slopes(0.7, 0.1).sheets[0].texels, atol=1e-6
    )


def test_reoriented_turns_the_detail_by_the_turn_of_the_base():
    """Barré-Brisebois & Hill 2012: the shortest turn from (0, 0, 1) to the base (Rodrigues, as a matrix)."""
    base, detail = (
        TILTED.sheets[0].texels[0, 0].astype(float),
        of_slopes(-0.2, 0.7).sheets[0].texels[0, 0].astype(float),
    )
    axis = np.cross([0, 0, 1], base)
    k = np.array([[0, -axis[2], axis[1]], [axis[2], 0, -axis[0]], [-axis[1], axis[0], 0]])
    turn = np.eye(3) + k + k @ k / (1 + base[2])

    assert_allclose(out(TILTED, of_slopes(-0.2, 0.7))[0, 0], turn @ detail, atol=1e-6)


@pytest.mark.parametrize(
    ("method", "by_hand"),
    [
        ("whiteout", lambda b, d: (b[0] + d[0], b[1] + d[1], b[2] * d[2])),
        ("udn", lambda b, d: (b[0] + d[0], b[1] + d[1], b[2])),
        ("linear", lambda b, d: (b[0] + d[0], b[1] + d[1], b[2] + d[2])),
        ("overlay", lambda b, d: [2 * _over((p + 1) / 2, (q + 1) / 2) - 1 for p, q in zip(b, d, strict=True)]),
    ],
)
def test_the_cheaper_formulas_are_as_published(method, by_hand):
    """Barré-Brisebois & Hill 2012."""
    b, d = (map.sheets[0].texels[0, 0].astype(float) for map in (TILTED, of_slopes(0.2, 0.4)))
    expected = np.array(by_hand(b, d))

    found = out(TILTED, of_slopes(0.2, 0.4), method=method)[0, 0]

    assert_allclose(found, expected / np.linalg.norm(expected), atol=1e-6)


def _over(p: float, q: float) -> float:
    return 2 * p * q if p < 0.5 else 1 - 2 * (1 - p) * (1 - q)


def test_strength_scales_the_slopes_and_a_mask_scales_the_strength():
    shares = np.zeros((8, 8, 1), np.uint8)
    shares[:, 4:] = 255
    mask = Map((Sheet("", shares, "data"),))

    found = out(FLAT, TILTED, mask, method="derivatives", strength=2.0)

    assert_allclose(found[:, :3], np.broadcast_to([0, 0, 1], (8, 3, 3)), atol=1e-6)
    assert_allclose(found[:, 5:], of_slopes(1.0, -0.6).sheets[0].texels[:, 5:], atol=1e-6)


def test_detail_repeats():
    stripes = of_slopes(np.where(np.arange(8) < 4, 0.5, -0.5)[None, :].repeat(8, 0), 0)

    found = out(of_slopes(0, 0, 32), stripes, tiling=4.0, method="derivatives")[0, :, 0]

    assert_allclose(found, np.tile(stripes.sheets[0].texels[0, :, 0], 4), atol=1e-6)


def test_where_one_is_missing_the_other_is_passed_on():
    assert combine(TILTED, None) is TILTED and combine(None, TILTED) is TILTED and combine(None, None) is None


def test_each_material_takes_its_own_detail():
    base = Map(
        tuple(Sheet(name, FLAT.sheets[0].texels, "normal", "tangent", "up", "float") for name in ("oak", "iron"))
    )
    detail = Map((Sheet("oak", TILTED.sheets[0].texels, "normal", "tangent", "up", "float"),))

    oak, iron = combine(base, detail).sheets

    assert_allclose(oak.texels, TILTED.sheets[0].texels, atol=1e-6)
    assert iron is base.sheets[1]


def test_what_is_no_normal_map_is_refused():
    heights = Map((Sheet("", np.zeros((8, 8, 1), np.uint8), "height", name="bark"),))

    with pytest.raises(InputError, match="bark: height, not tangent-space normals"):
        combine(FLAT, heights)
