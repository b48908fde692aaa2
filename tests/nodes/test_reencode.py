"""A map moved into other frames shades as it did, and comes back as it was."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, grid_part, torus
from tangentry.nodes.encode import encode
from tangentry.nodes.frames import frames
from tangentry.nodes.geometry.texels import texel_owners
from tangentry.nodes.geometry.vectors import unit
from tangentry.nodes.maps.decoders import WAYS, shade
from tangentry.nodes.maps.encodings import decoded
from tangentry.nodes.maps.surface import surface_of
from tangentry.nodes.model import Map, Sheet, Stream
from tangentry.nodes.orthogonalise import orthogonalise
from tangentry.nodes.reencode import reencode
from tangentry.pipeline.errors import InputError

SIZE = 64


def wavy(bits: int = 16, green: str = "up") -> Map:
    """Normals that lean up to 45 degrees, every way."""
    rng = np.random.default_rng(3)
    flat = rng.uniform(-0.7, 0.7, (SIZE, SIZE, 2))
    rows = np.concatenate([flat, np.ones((SIZE, SIZE, 1))], axis=2).reshape(-1, 3)
    texels = unit(rows).reshape(SIZE, SIZE, 3).astype(np.float32)
    return encode(Map((Sheet("", texels, "normal", "tangent", "up", "float"),)), bits=bits, green=green)


def skewed_torus():
    """A torus whose UVs are sheared: averaged tangents and bitangents are far from square."""
    base = torus(24, 12)
    uv = base.parts[0].uvs[0]
    sheared = Stream(uv.values @ np.float32([[0.7, 0], [0.3, 0.9]]), uv.index)
    return frames(replace(base, parts=(replace(base.parts[0], uvs=(sheared,)),)), method="angle")


def shaded(map, mesh, decoder):
    """(texels, 3) float64: the normals that a decoder shows, where texels have an owner."""
    surface = surface_of(mesh, [0])
    owners = texel_owners(surface.places, SIZE, SIZE)
    normals = decoded(map.sheets[0])
    return np.array(
        [
            shade(surface.frames, owners.triangle[r, c], *owners.weights[r, c], WAYS[decoder], *normals[r, c])
            for r, c in zip(*np.nonzero(owners.triangle >= 0), strict=True)
        ]
    )


def angle(a, b):
    return np.degrees(2 * np.arcsin(np.clip(np.linalg.norm(a - b, axis=1) / 2, 0, 1)))


@pytest.mark.parametrize("made_for", ["pixel", "vertex", "vertex-unit"])
@pytest.mark.parametrize("wanted_for", ["pixel", "pixel-unit", "pixel-square", "vertex-square"])
def test_shading_agrees_to_quantisation(made_for, wanted_for):
    """A 16-bit code is 3e-5 wide; frames sheared as these magnify that a few times."""
    skew, square = skewed_torus(), orthogonalise(skewed_torus())
    moved = reencode(wavy(), skew, square, made_for=made_for, wanted_for=wanted_for)

    assert angle(shaded(moved, square, wanted_for), shaded(wavy(), skew, made_for)).max() < 0.01


@pytest.mark.parametrize("wanted_for", sorted(WAYS))
@pytest.mark.parametrize("green", ["up", "down"])
def test_there_and_back_changes_no_16_bit_code_by_more_than_one(wanted_for, green):
    made, wanted = frames(torus(24, 12)), frames(torus(24, 12), method="area")
    before = wavy(green=green)
    there = reencode(before, made, wanted, wanted_for=wanted_for)
    back = reencode(there, wanted, made, made_for=wanted_for)

    change = np.abs(before.sheets[0].texels.astype(int) - back.sheets[0].texels)
    if wanted_for == "object":  # where green points is no longer known there: it comes back pointing up
        change = np.abs(encode(before, bits=16).sheets[0].texels.astype(int) - back.sheets[0].texels)
    assert change.max() <= 1


def test_object_space_holds_what_the_decoder_shades():
    mesh = frames(torus(24, 12))
    moved = reencode(wavy(), mesh, mesh, wanted_for="object").sheets[0]
    owners = texel_owners(surface_of(mesh, [0]).places, SIZE, SIZE)

    assert moved.space == "object" and moved.green == ""
    assert angle(decoded(moved)[owners.triangle >= 0], shaded(wavy(), mesh, "pixel")).max() < 0.01


def test_flat_texels_of_a_flat_square_stay_flat_in_any_frames():
    flat = encode(Map((Sheet("", np.tile(np.float32([0, 0, 1]), (8, 8, 1)), "normal", "tangent", "up", "float"),)))
    made, turned = frames(asset(grid_part())), frames(asset(grid_part()), method="face")

    assert (reencode(flat, made, turned).sheets[0].texels == flat.sheets[0].texels).all()


def test_a_quarter_turn_of_the_uvs_turns_the_texels():
    """Tangent along x before, along y after: what leaned along +x was red, and becomes minus green."""
    upright = asset(grid_part(1, 1))
    uv = upright.parts[0].uvs[0]
    turned_uv = Stream(np.float32([[0, -1], [1, 0]] @ (uv.values.T - 0.5)).T + np.float32(0.5), uv.index)
    made = frames(upright)
    other = frames(asset(replace(upright.parts[0], uvs=(turned_uv,))))
    leaning = np.tile(np.float32([0.6, 0, 0.8]), (4, 4, 1))

    moved = reencode(Map((Sheet("", leaning, "normal", "tangent", "up", "float"),)), made, other).sheets[0].texels
    tangent = other.parts[0].frames.tangents[0]
    assert_allclose(moved, np.tile([0.6 * tangent[0], -0.6 * tangent[1], 0.8], (4, 4, 1)), atol=1e-6)


def test_the_gutter_moves_along_and_what_lies_beyond_stays():
    uv = grid_part(1, 1).uvs[0]
    small = asset(replace(grid_part(1, 1), uvs=(Stream(uv.values * np.float32(0.5) + np.float32(0.25), uv.index),)))
    made = frames(small)
    flipped = replace(made.parts[0].frames, tangents=-made.parts[0].frames.tangents)
    wanted = replace(made, parts=(replace(made.parts[0], frames=flipped),))
    leaning = np.tile(np.float32([0.6, 0, 0.8]), (32, 32, 1))
    moved = reencode(Map((Sheet("", leaning, "normal", "tangent", "up", "float"),)), made, wanted, gutter=3).sheets[0]

    # The chart covers rows 8 to 23; the side stays, so b turns round with t.
    assert_allclose(moved.texels[16, :, 0], [0.6] * 5 + [-0.6] * 22 + [0.6] * 5, atol=1e-6)


def test_alpha_passes_through():
    texels = np.concatenate([wavy().sheets[0].texels, np.full((SIZE, SIZE, 1), 77, np.uint16)], axis=2)
    mesh = frames(torus())
    moved = reencode(Map((replace(wavy().sheets[0], texels=texels),)), mesh, mesh, wanted_for="pixel-unit")

    assert (moved.sheets[0].texels[..., 3] == 77).all() and moved.sheets[0].texels.shape[2] == 4


@pytest.mark.parametrize(
    ("change", "mesh", "said"),
    [
        ({"green": "undecided"}, "framed", "green"),
        ({"space": "object"}, "framed", "object space"),
        ({"space": "world"}, "framed", "world space"),
        ({"material": "brass"}, "framed", 'material "brass"'),
        ({}, "bare", "no tangent frames"),
    ],
)
def test_what_can_not_be_moved_is_named(change, mesh, said):
    meshes = {"framed": frames(torus()), "bare": torus()}

    with pytest.raises(InputError, match=said):
        reencode(Map((replace(wavy().sheets[0], **change),)), meshes[mesh], meshes["framed"])
