"""Heights and slopes, there and back, at their true scale."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, grid_part
from tangentry.nodes.model import Map, Sheet, Stream
from tangentry.nodes.relief import relief
from tangentry.pipeline.errors import InputError

SIZE = 64


def waves(size: int = SIZE) -> np.ndarray:
    """(size, size) float32, 0 to 1, tiling and band-limited."""
    x, y = np.meshgrid(*[2 * np.pi * (np.arange(size) + 0.5) / size] * 2)
    return (0.5 + 0.2 * np.sin(2 * x) * np.cos(3 * y) + 0.25 * np.cos(x - 2 * y)).astype(np.float32)


def heights(values: np.ndarray) -> Map:
    return Map((Sheet("", values.astype(np.float32)[..., None], "height", encoding="float", name="waves"),))


def normals(map: Map, **how) -> np.ndarray:
    return relief(map, **how).sheets[0].texels


def test_a_ramp_has_one_slope_everywhere():
    """1 unit of height over 64 texels of 1/64: 45 degrees, leaning against the rise; y up the image."""
    ramp = np.tile((np.arange(SIZE) + 0.5) / SIZE, (SIZE, 1))
    along_x = normals(heights(ramp), height=1.0, size=1.0, edge="clamp")
    along_y = normals(heights(ramp.T), height=1.0, size=1.0, edge="clamp")

    half = np.sqrt(0.5)
    assert_allclose(along_x, np.broadcast_to([-half, 0, half], along_x.shape), atol=1e-5)
    assert_allclose(along_y, np.broadcast_to([0, half, half], along_y.shape), atol=1e-5)


@pytest.mark.parametrize(("slope", "share"), [("central", 1 / 6), ("scharr", 1 / 6 + 3 / 16)])
def test_slopes_are_those_of_the_surface_in_closed_form(slope, share):
    """Normals of h(x, y) = sin x sin y / 4: (-dh/dx, -dh/dy, 1) / length. A difference over steps s is short by
    s^2 / 6 of a sine's slope, and weights 3 10 3 / 16 beside it by 3 s^2 / 16 more (Taylor)."""
    x, y = np.meshgrid(*[2 * np.pi * (np.arange(256) + 0.5) / 256] * 2)
    true = np.stack([-np.cos(x) * np.sin(y), np.sin(x) * np.cos(y), np.full_like(x, 4)], axis=2)
    true /= np.linalg.norm(true, axis=2, keepdims=True)

    found = normals(heights(np.sin(x) * np.sin(y)), height=0.25, size=2 * np.pi, slope=slope)

    assert np.linalg.norm(found - true, axis=2).max() < 1.05 * 0.25 * share * (2 * np.pi / 256) ** 2


def test_codes_and_floats_give_the_same():
    codes = np.rint(waves() * 65535).astype(np.uint16)[..., None]
    coded = relief(Map((Sheet("", codes, "height"),)), size=1.0, height=0.1).sheets[0].texels

    assert_allclose(coded, normals(heights(waves()), size=1.0, height=0.1), atol=2e-4)


def test_back_and_there_are_exact_on_a_surface_that_tiles():
    """Frankot & Chellappa (1988): the surface nearest to the slopes; these belong to one, so it comes back."""
    there = relief(heights(waves()), size=2.0, height=0.3)
    back = relief(there, size=2.0, height=0.3).sheets[0]

    assert back.holds == "height"
    assert_allclose(back.texels[..., 0], waves() - waves().mean(), atol=2e-6)


@pytest.mark.parametrize("stretch", [(1, 1), (3, 1), (1, 0.25)])
def test_slopes_come_out_right_on_a_chart_that_is_stretched(stretch):
    """One height map on a chart w by h metres: the slope along x is dh/du / w, that along y dh/dv / h."""
    part = grid_part()
    points = part.points.values * np.float32([*stretch, 1])
    mesh = asset(replace(part, points=Stream(points, part.points.index)))
    ramp = np.tile((np.arange(SIZE) + 0.5) / SIZE, (SIZE, 1))

    for values, axis, metres in ((ramp, 0, stretch[0]), (ramp.T, 1, stretch[1])):
        found = normals(heights(values), asset=mesh, height=0.1, edge="clamp")[SIZE // 2, SIZE // 2]
        assert abs(found[axis] / found[2]) == pytest.approx(0.1 / metres, rel=1e-4)


def two_charts():
    """The left half of the map on a square of 1 m, the right half on one 4 m wide."""
    plain = grid_part()
    parts = []
    for row, metres in enumerate((1, 4)):
        places = (plain.uvs[0].values * [0.5, 1] + [row / 2, 0]).astype(np.float32)
        points = plain.points.values * np.float32([metres, 1, 1])
        parts.append(
            replace(plain, points=Stream(points, plain.points.index), uvs=(Stream(places, plain.uvs[0].index),))
        )
    return asset(*parts)


def test_each_chart_has_the_slopes_of_its_own_stretch():
    """dh/dx = dh/du / |dP/du|: |dP/du| is 2 m on the left, 8 m on the right."""
    ramp = np.tile((np.arange(SIZE) + 0.5) / SIZE, (SIZE, 1))

    found = normals(heights(ramp), asset=two_charts(), height=0.8, edge="clamp")
    slopes = -found[..., 0] / found[..., 2]

    assert_allclose(slopes[:, : SIZE // 2 - 1], 0.4, rtol=1e-4)
    assert_allclose(slopes[:, SIZE // 2 + 1 :], 0.1, rtol=1e-4)


def test_back_and_there_are_exact_over_charts_of_any_stretch():
    there = relief(heights(waves()), two_charts(), height=0.3)
    back = relief(there, two_charts(), height=0.3).sheets[0]

    assert_allclose(back.texels[..., 0], waves() - waves().mean(), atol=4e-6)


def test_sizes_turn_smoothly_where_a_chart_is_stretched_more_and_more():
    """Columns 1, 2, 3 ... times as wide: sizes at vertices are means of two, between them a line, so without a step."""
    plain = grid_part(4, 4)
    points = plain.points.values.copy()
    points[:, 0] = (points[:, 0] * 4) ** 2
    mesh = asset(replace(plain, points=Stream(points, plain.points.index)))
    ramp = np.tile((np.arange(SIZE) + 0.5) / SIZE, (SIZE, 1))

    found = normals(heights(ramp), asset=mesh, edge="clamp")
    wide = -found[SIZE // 2, :, 2] / found[SIZE // 2, :, 0]

    assert np.abs(np.diff(wide)).max() < 3 * (wide.max() - wide.min()) / SIZE


def test_clamped_borders_are_one_sided_and_wrapped_ones_meet():
    ramp = np.tile(np.arange(SIZE) / SIZE, (SIZE, 1))

    clamped, wrapped = (normals(heights(ramp), size=1.0, height=1.0, edge=edge) for edge in ("clamp", "wrap"))

    assert_allclose(clamped[:, 0], clamped[:, 5], atol=1e-6)
    assert (wrapped[:, 0, 0] > 0.9).all()  # the ramp falls off a cliff where it meets itself


@pytest.mark.parametrize("shape", [(1, 1), (1, 7), (5, 1), (2, 3)])
def test_small_and_odd_maps_are_finite(shape):
    assert np.isfinite(normals(heights(np.random.default_rng(0).random(shape)), size=1.0)).all()


def test_the_scale_must_be_known():
    with pytest.raises(InputError, match="waves: how large a texel is on the surface is not known"):
        relief(heights(waves()))
