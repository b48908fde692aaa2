"""What is told of two ways of shading is the angle between them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, grid_part, torus
from tangentry.nodes.compare import compare
from tangentry.nodes.encode import encode
from tangentry.nodes.frames import frames
from tangentry.nodes.model import Map, Material, Sheet
from tangentry.nodes.orthogonalise import orthogonalise
from tangentry.nodes.reencode import reencode
from tangentry.pipeline.errors import InputError


def leaning(degrees: float, size: int = 16) -> Map:
    """A map whose texels all lean that far along the tangent."""
    texel = np.float32([np.sin(np.radians(degrees)), 0, np.cos(np.radians(degrees))])
    return Map((Sheet("", np.tile(texel, (size, size, 1)), "normal", "tangent", "up", "float"),))


def turned(mesh, degrees: float):
    """The mesh with its tangents turned about their normals."""
    part = mesh.parts[0]
    t = part.frames.tangents
    corner = np.zeros(len(t), int)
    corner[part.frames.index] = np.arange(len(part.frames.index))
    n = part.normals.values[part.normals.index[corner]]
    after = t * np.cos(np.radians(degrees)) + np.cross(n, t) * np.sin(np.radians(degrees))
    return replace(mesh, parts=(replace(part, frames=replace(part.frames, tangents=after.astype(np.float32))),))


def floor():
    return frames(asset(grid_part()))


@pytest.mark.parametrize("degrees", [0.0, 0.01, 12.0, 85.0])
def test_two_maps_differ_by_the_angle_between_their_texels(degrees):
    found = compare(floor(), map=leaning(0), other_map=leaning(degrees))

    assert_allclose(found.facts["mean difference, degrees"], degrees, atol=1e-4)
    assert found.facts["compared texels"] == 256


@pytest.mark.parametrize("degrees", [5.0, 90.0, 180.0])
def test_turned_frames_differ_by_the_chord_of_the_turn(degrees):
    """A texel that leans 45 degrees runs along a cone: turned by a, it moves by the angle 2 asin(sin 45 sin(a / 2))."""
    found = compare(floor(), turned(floor(), degrees), size=8)

    moved = 2 * np.degrees(np.arcsin(np.sin(np.pi / 4) * np.sin(np.radians(degrees) / 2)))
    assert_allclose(found.facts["largest difference, degrees"], moved, atol=1e-3)


def test_what_is_the_same_does_not_differ():
    found = compare(frames(torus()), frames(torus()), limit=1e-4, size=64)

    assert found.facts["largest difference, degrees"] == 0 and not found.faulty


def test_a_limit_that_is_passed_is_a_fault_that_lists_its_texels():
    other = leaning(0).sheets[0].texels.copy()
    other[3, 5] = leaning(30).sheets[0].texels[0, 0]
    found = compare(floor(), map=leaning(0), other_map=Map((replace(leaning(0).sheets[0], texels=other),)), limit=1.0)

    assert found.faulty and found.items[0].elements.tolist() == [3 * 16 + 5]
    assert_allclose(found.items[0].measured, [30], atol=1e-3)


def test_a_map_re_encoded_for_other_frames_agrees_where_the_old_one_did_not():
    before, after = frames(torus()), orthogonalise(turned(frames(torus()), 20))
    map = encode(leaning(30, 64), bits=16)

    assert compare(before, after, map, limit=0.01).faulty
    assert not compare(before, after, map, reencode(map, before, after), limit=0.01).faulty


def test_object_space_agrees_with_tangent_space():
    mesh = frames(torus())
    map = encode(leaning(30, 64), bits=16)
    found = compare(mesh, map=map, other_map=reencode(map, mesh, mesh, wanted_for="object"), limit=0.01)

    assert not found.faulty


@pytest.mark.parametrize(
    ("inputs", "settings", "said"),
    [
        ({}, {}, "nothing to compare"),
        ({"map": leaning(0, 8), "other_map": leaning(0, 9)}, {}, "8 x 8 and 9 x 9"),
        ({"map": leaning(0), "other": asset(grid_part())}, {}, "no tangent frames"),
        (
            {"other": replace(floor(), materials=(Material("tin"),), parts=(replace(floor().parts[0], material=0),))},
            {},
            "tin",
        ),
    ],
)
def test_what_can_not_be_compared_is_named(inputs, settings, said):
    with pytest.raises(InputError, match=said):
        compare(floor(), **inputs, **settings)
