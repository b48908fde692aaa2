"""Pictures show what the decoder shades."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, grid_part, half_mirrored, sphere_part, torus
from tangentry.nodes.bake import bake
from tangentry.nodes.frames import frames
from tangentry.nodes.maps.picture import AMBIENT, DIFFUSE, GLOSS, LIGHT, SHARPNESS, camera
from tangentry.nodes.model import Map, Sheet, Stream
from tangentry.nodes.normals import normals
from tangentry.nodes.preview import preview
from tangentry.nodes.split import split
from tangentry.pipeline.errors import InputError


def flat(size: int = 8, texel=(0, 0, 1)) -> Map:
    return Map((Sheet("", np.tile(np.float32(texel), (size, size, 1)), "normal", "tangent", "up", "float"),))


def views(picture):
    """The view with the map, and the one without."""
    return np.split(picture.sheets[0].texels.astype(int), 2, axis=1)


def code(normal):
    """The grey of a surface with that normal seen from +z: Lambert and a highlight about the half vector, as sRGB."""
    light = LIGHT / np.linalg.norm(LIGHT)
    half = (light + (0, 0, 1)) / np.linalg.norm(light + (0, 0, 1))
    linear = AMBIENT + DIFFUSE * max(0, normal @ light) + GLOSS * max(0, normal @ half) ** SHARPNESS
    return 255 * (1.055 * min(1, linear) ** (1 / 2.4) - 0.055)


@pytest.mark.parametrize("texel", [(0, 0, 1), (0.6, 0, 0.8), (0, 0.6, 0.8), (-0.6, 0, 0.8), (0, -0.6, 0.8)])
def test_a_square_seen_from_the_front_is_as_bright_as_its_texels_lean(texel):
    """Tangent along x, bitangent along y, seen from +z: texel and normal are one."""
    on, off = views(preview(frames(asset(grid_part())), flat(texel=texel), size=32, turn=0, rise=0))

    assert_allclose(on[8:24, 8:24], code(np.array(texel)), atol=1)
    assert_allclose(off[8:24, 8:24], code(np.array([0, 0, 1])), atol=1)


def test_a_flat_map_changes_nothing():
    on, off = views(preview(frames(torus()), flat(), size=64))

    assert np.abs(on - off).max() <= 1


def ribbed(part):
    """The sphere with twelve ribs around its axis."""
    points = part.points.values * (1 + 0.01 * np.cos(24 * np.arcsin(part.points.values[:, 1:2])))
    return normals(asset(replace(part, points=Stream(points.astype(np.float32), part.points.index))), method="angle")


@pytest.mark.parametrize("turn", [45, 225])
def test_mirrored_charts_are_lit_as_the_others(turn):
    """Both halves of a sphere share one chart, mirrored: a map of ribs baked through the first must show on both."""
    target = frames(split(asset(half_mirrored(sphere_part(24, 12), 24, 12))))
    detail = ribbed(sphere_part(192, 192))
    map = bake(target, detail, size=256, distance=0.1, samples=4)
    truth = preview(detail, size=64, turn=turn, rise=0).sheets[0].texels.astype(int)
    on, off = views(preview(target, map, size=64, turn=turn, rise=0))

    inside = np.hypot(*(np.indices((64, 64)) - 31.5)) < 24
    assert np.abs(on - truth)[inside].mean() < np.abs(off - truth)[inside].mean() / 10


def test_without_a_map_there_is_one_view():
    assert preview(torus(), size=24).sheets[0].texels.shape == (24, 24, 3)


@pytest.mark.parametrize(("turn", "rise"), [(0, 0), (30, 20), (-100, 89)])
def test_a_camera_is_a_rotation_that_keeps_up_up(turn, rise):
    axes = camera(turn, rise)

    assert_allclose(axes @ axes.T, np.eye(3), atol=1e-12)
    assert np.linalg.det(axes) > 0 and axes[1, 1] >= 0 and axes[0, 1] == 0


@pytest.mark.parametrize(
    ("mesh", "map", "settings", "said"),
    [
        (torus, None, {"size": 0}, "0 pixels"),
        (asset, None, {}, "no parts"),
        (torus, Map((replace(flat().sheets[0], green="undecided"),)), {}, "green"),
    ],
)
def test_what_can_not_be_drawn_is_named(mesh, map, settings, said):
    with pytest.raises(InputError, match=said):
        preview(mesh(), map, **settings)
