"""A bake holds what rays meet: normals in the target's frames, heights, openness; misses are told."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, box_part, grid_part, torus, triangulated
from tangentry.nodes.bake import bake
from tangentry.nodes.frames import frames
from tangentry.nodes.maps.bake import COLOURS
from tangentry.nodes.model import Asset, Material, Stream
from tangentry.nodes.reencode import reencode
from tangentry.pipeline.errors import InputError

GREEN, RED, BLUE = COLOURS[1], COLOURS[2], COLOURS[3]


def moved(part, by, name=None):
    points = (part.points.values + np.float32(by)).astype(np.float32)
    return replace(part, points=Stream(points, part.points.index), name=name or part.name)


def turned_over(part):
    """The part with every face wound the other way; its normals stay."""
    order = np.arange(part.corner_count).reshape(-1, 4)[:, ::-1].ravel()
    streams = [Stream(one.values, one.index[order]) for one in (part.points, part.normals, part.uvs[0])]
    return replace(part, points=streams[0], normals=streams[1], uvs=(streams[2],))


def floor():
    return frames(asset(grid_part()))


def only(map):
    return map.sheets[0].texels


def test_a_flat_detail_gives_flat_texels_in_the_charts_and_around_them():
    uv = grid_part().uvs[0]
    small = asset(replace(grid_part(), uvs=(Stream(uv.values * np.float32(0.5), uv.index),)))

    assert_allclose(only(bake(frames(small), asset(grid_part()), size=32)), np.tile([0, 0, 1], (32, 32, 1)), atol=1e-6)


@pytest.mark.parametrize("hit", ["outermost", "nearest"])
@pytest.mark.parametrize("height", [0.03, -0.03])
def test_height_is_the_distance_from_the_target(hit, height):
    raised = asset(moved(grid_part(), (0, 0, height)))

    texels = only(bake(floor(), raised, size=16, distance=0.05, gives="height", hit=hit))
    assert_allclose(texels, np.full((16, 16, 1), height), atol=1e-6)


@pytest.mark.parametrize(("hit", "height"), [("outermost", 0.04), ("nearest", 0.01)])
def test_of_two_layers_the_one_asked_for_counts(hit, height):
    layers = asset(moved(grid_part(), (0, 0, 0.04)), moved(grid_part(), (0, 0, 0.01)))

    texels = only(bake(floor(), layers, size=16, distance=0.05, gives="height", hit=hit))
    assert_allclose(texels, np.full((16, 16, 1), height), atol=1e-6)


@pytest.mark.parametrize("hit", ["outermost", "nearest"])
def test_what_became_of_each_texel_is_drawn(hit):
    near, far = moved(grid_part(), (0, 0, 0.02)), moved(grid_part(), (0, 0, 0.2))
    for detail, colour in ((near, GREEN), (far, RED), (turned_over(near), BLUE)):
        drawn = only(bake(floor(), asset(detail), size=8, distance=0.05, gives="hits", hit=hit))
        assert (drawn == colour).all()


def test_what_is_missed_is_filled_from_its_neighbours():
    half = moved(grid_part(), (0.5, 0, 0))  # reaches over the right half of the target
    tilted = replace(half, normals=Stream(np.float32([[0.6, 0, 0.8]]), half.normals.index))

    near, far = (only(bake(floor(), asset(tilted), size=32, gutter=reach)) for reach in (4, 32))
    assert_allclose(far, np.tile([0.6, 0, 0.8], (32, 32, 1)), atol=1e-6)
    assert_allclose(near[:, :11], np.tile([0, 0, 1], (32, 11, 1)), atol=1e-6)


def test_straight_rays_are_not_skewed_on_flat_faces():
    """A box 0.05 larger all round: along the face's normal its height is 0.05, along a leaning ray more."""
    target = frames(asset(box_part()))
    larger = box_part(1.1)
    shell = asset(moved(larger, (-0.05, -0.05, -0.05)))

    straight, skewed = (
        only(bake(target, shell, size=60, distance=0.1, gives="height", aim=a)) for a in ("straight", "smoothed")
    )
    # The first chart covers columns 2 to 17 and 3 to 26 from the bottom; this is well inside.
    inside = np.s_[38:50, 6:14]
    assert_allclose(straight[inside], 0.05, atol=1e-6)
    assert (skewed[inside] > 0.0501).any()


def test_parts_of_one_name_see_each_other_alone():
    low = frames(asset(replace(grid_part(), name="lid_low"), moved(grid_part(), (0, 0, 0.02), "hull_low")))
    high = asset(moved(grid_part(), (0, 0, 0.01), "hull_high"), moved(grid_part(), (0, 0, 0.03), "lid_high"))
    materials = (Material("lid"), Material("hull"))
    low = replace(low, materials=materials, parts=tuple(replace(p, material=k) for k, p in enumerate(low.parts)))

    sheets = bake(low, high, size=8, distance=0.05, gives="height", pairs="name").sheets
    assert [sheet.material for sheet in sheets] == ["lid", "hull"]
    assert_allclose([sheet.texels.mean() for sheet in sheets], [0.03, -0.01], atol=1e-6)


def test_object_normals_are_the_tangent_ones_taken_out_of_their_frames():
    target, detail = frames(torus(24, 12)), torus(96, 48)
    tangent = bake(target, detail, size=64, distance=0.1)
    by_object = bake(target, detail, size=64, distance=0.1, gives="object normal")

    assert_allclose(only(reencode(tangent, target, target, wanted_for="object")), only(by_object), atol=1e-5)


def test_turning_both_meshes_changes_nothing():
    turn = np.linalg.qr(np.random.default_rng(2).normal(size=(3, 3)))[0]
    turn *= np.linalg.det(turn)

    def turned(mesh: Asset, turn) -> Asset:
        part = triangulated(mesh.parts[0])
        return asset(
            replace(
                part,
                points=Stream((part.points.values @ turn.T).astype(np.float32), part.points.index),
                normals=Stream((part.normals.values @ turn.T).astype(np.float32), part.normals.index),
            )
        )

    here, there = (
        only(bake(frames(turned(torus(24, 12), by)), turned(torus(96, 48), by), size=64, distance=0.1))
        for by in (np.eye(3), turn)
    )
    assert_allclose(there, here, atol=2e-5)


@pytest.mark.parametrize("samples", [4, 16])
def test_finer_samples_average_what_a_finer_map_holds(samples):
    fine = {4: 2, 16: 4}[samples]
    target, detail = frames(torus(24, 12)), torus(96, 48)
    coarse = only(bake(target, detail, size=32, distance=0.1, samples=samples))
    whole = only(bake(target, detail, size=32 * fine, distance=0.1)).reshape(32, fine, 32, fine, 3).sum(axis=(1, 3))

    assert_allclose(coarse, whole / np.linalg.norm(whole, axis=2, keepdims=True), atol=1e-6)


def test_openness_beside_a_wall_is_what_the_form_factor_says():
    """Beside an endless wall of height H, at distance d, the floor sees (1 + d / sqrt(d^2 + H^2)) / 2 of the sky.

    The factor of a small patch to an endless strip, half the difference of the sines of the angles from its
    normal: Siegel & Howell, Thermal Radiation Heat Transfer (from memory).
    """
    wall = grid_part(1, 1)
    corners = np.float32([[0, -50, 0], [0, 50, 0], [0, -50, 1], [0, 50, 1]])
    wall = replace(wall, points=Stream(corners, np.int32([0, 1, 3, 2])), name="wall")
    seen = only(bake(floor(), asset(grid_part(), wall), size=64, distance=0.001, gives="occlusion"))[..., 0]

    d = (np.arange(64) + 0.5) / 64
    assert_allclose(seen.mean(axis=0)[2:], ((1 + d / np.hypot(d, 1)) / 2)[2:], atol=0.01)


def test_an_open_floor_sees_the_whole_sky():
    assert (only(bake(floor(), asset(grid_part()), size=16, gives="occlusion")) == 1).all()


def test_vertex_colours_scale_the_distance():
    """Red from 0 at the left to 1 at the right, a detail 0.05 above, rays from 0.1 above: met from the middle on."""
    part = grid_part()
    red = np.repeat(part.uvs[0].values[:, :1], 3, axis=1)
    target = frames(asset(replace(part, colours=(Stream(red, part.uvs[0].index),))))
    raised = asset(moved(part, (0, 0, 0.05)))

    drawn = only(bake(target, raised, size=64, distance=0.1, distance_by="vertex colour", gives="hits"))
    assert (drawn[:, :32] == RED).all() and (drawn[:, 32:] == GREEN).all()


def test_an_oblong_sheet_is_as_wide_and_high_as_asked():
    assert only(bake(floor(), asset(grid_part()), size=(24, 8))).shape == (8, 24, 3)


@pytest.mark.parametrize(
    ("target", "settings", "said"),
    [
        (floor, {"size": 0}, "0 x 0"),
        (floor, {"size": 20000}, "20000"),
        (floor, {"distance": 0.0}, "distance"),
        (floor, {"distance": float("nan")}, "distance"),
        (floor, {"pairs": "name"}, 'part "grid"'),
        (floor, {"distance_by": "vertex colour"}, "vertex colours"),
        (lambda: asset(grid_part()), {}, "no tangent frames"),
        (lambda: asset(replace(grid_part(), uvs=())), {}, "no UV set"),
        (asset, {}, "no faces"),
    ],
)
def test_what_can_not_be_baked_is_named(target, settings, said):
    with pytest.raises(InputError, match=said):
        bake(target(), asset(box_part()), **{"size": 8, **settings})


def test_an_empty_detail_is_missed_everywhere():
    assert (only(bake(floor(), asset(), size=8, gives="hits")) == RED).all()
