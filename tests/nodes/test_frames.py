"""Frames: exact where a parametrisation tells them, independent of order and place, never undefined."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from numpy.testing import assert_allclose
from shapes import (
    asset,
    box_part,
    cylinder_part,
    cylinder_truth,
    grid_part,
    half_mirrored,
    sphere_part,
    sphere_truth,
    torus_part,
    torus_truth,
    triangulated,
)
from tangentry.nodes.frames import frames
from tangentry.nodes.geometry.vectors import angle_between
from tangentry.nodes.model import Asset, Frames, MapUse, Material, Morph, Part, Stream
from tangentry.nodes.normals import normals
from tangentry.nodes.orthogonalise import orthogonalise
from tangentry.nodes.split import split
from tangentry.pipeline.errors import InputError

METHODS = ["face", "uniform", "area", "angle", "mikktspace"]


def solved(part: Part, **how) -> Frames:
    made = frames(asset(part), **how).parts[0].frames
    assert made is not None
    return made


def tangents(part: Part, **how) -> np.ndarray:
    made = solved(part, **how)
    return made.tangents[made.index]


SURFACES = [(torus_part, torus_truth), (cylinder_part, cylinder_truth), (sphere_part, sphere_truth)]
HALF_A_CELL = 180 / 64  # degrees around, of 64 cells


def centred(part: Part) -> Part:
    """The part with every corner's UV in the middle of its face."""
    middle = part.uvs[0].values[part.uvs[0].index].reshape(-1, 4, 2).mean(axis=1)
    return replace(part, uvs=(Stream(middle, np.repeat(np.arange(len(middle), dtype=np.int32), 4)),))


@pytest.mark.parametrize(("make", "truth"), SURFACES)
def test_frames_of_faces_are_those_of_the_parametrisation_at_their_middle(make, truth):
    """Differential geometry: a chord has the direction of dP/du halfway along its arc."""
    part = make(64, 32)

    assert angle_between(tangents(part, method="face"), truth(centred(part)).tangent).max() < 1e-3


@pytest.mark.parametrize(("method", "inner"), [("uniform", 0.2), ("area", 1 / 3), ("angle", 0), ("mikktspace", 0)])
@pytest.mark.parametrize(("make", "truth"), SURFACES)
def test_frames_of_vertices_are_those_of_the_parametrisation(make, truth, method, inner):
    """Differential geometry: T along dP/du. Where a chart ends, only the faces on one side tell: half a cell off.

    Beside a pole quads have one triangle with area, so that 2 of 5 triangles, or a third of the area, lie on one side:
    weights by triangles lean to the other by 1/5 or 1/3 of that; angles are the same on both sides.
    """
    part = make(64, 32)
    uv = part.uvs[0].values[part.uvs[0].index]
    inside = ((uv > 0) & (uv < 1)).all(axis=1)

    angle = angle_between(tangents(part, method=method), truth(part).tangent)

    assert angle[inside].max() < inner * HALF_A_CELL + 0.01 and angle.max() < HALF_A_CELL + 0.01


@pytest.mark.parametrize("method", METHODS)
def test_a_flat_grid_has_one_exact_frame(method):
    made = solved(grid_part(), method=method)

    assert_allclose(made.tangents, np.broadcast_to([1, 0, 0], made.tangents.shape), atol=1e-7)
    assert (made.sides == 1).all() and not made.fallback.any()


def test_mirrored_charts_get_the_other_side():
    made = solved(half_mirrored(grid_part(4, 4), 4, 4))

    assert sorted(set(made.sides.tolist())) == [-1, 1]
    assert_allclose(np.abs(made.tangents), np.broadcast_to([1, 0, 0], made.tangents.shape), atol=1e-7)


def test_v_counted_downward_is_the_same_surface():
    part = torus_part(12, 8)
    down = replace(
        part, uvs=(Stream(part.uvs[0].values * np.float32([1, -1]) + np.float32([0, 1]), part.uvs[0].index),)
    )

    made = frames(replace(asset(down), v_down=True)).parts[0].frames

    assert_allclose(made.tangents[made.index], tangents(part), atol=1e-5)
    assert (made.sides == 1).all()


def test_a_torus_with_one_seam_and_half_its_charts_mirrored_has_the_frames_it_should():
    """Topology: a frame for each corner of the seamed grid, and one more along the two lines where charts meet."""
    nu, nv = 40, 20
    part = torus_part(nu, nv)
    uv = part.uvs[0].values.copy()
    uv[:, 1] = np.minimum(uv[:, 1], 1 - uv[:, 1]).round(6)

    made = solved(triangulated(replace(part, uvs=(Stream(uv, part.uvs[0].index),))))

    assert len(made.tangents) == (nu + 1) * (nv + 2)


def shuffled(part: Part, seed: int) -> tuple[Part, np.ndarray]:
    """The part with faces in another order, each beginning at another corner; and the old corner of each new one."""
    rng = np.random.default_rng(seed)
    order = rng.permutation(part.face_count)
    corners = np.concatenate([np.roll(np.arange(part.starts[f], part.starts[f + 1]), rng.integers(4)) for f in order])
    starts = np.concatenate([[0], np.cumsum(np.diff(part.starts)[order])]).astype(np.int32)

    def taken(stream: Stream) -> Stream:
        rows = rng.permutation(len(stream.values))
        return Stream(stream.values[rows], np.argsort(rows).astype(np.int32)[stream.index[corners]])

    return Part(part.name, -1, starts, taken(part.points), taken(part.normals), (taken(part.uvs[0]),)), corners


@settings(max_examples=20, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), method=st.sampled_from(METHODS))
def test_the_order_of_faces_corners_and_rows_does_not_matter(seed, method):
    part = half_mirrored(sphere_part(9, 6), 9, 6)
    other, corners = shuffled(part, seed)

    one, two = solved(part, method=method), solved(other, method=method)

    assert_allclose(two.tangents[two.index], one.tangents[one.index][corners], atol=2e-5)
    assert (two.sides[two.index] == one.sides[one.index][corners]).all()


@settings(max_examples=20, deadline=None)
@given(seed=st.integers(0, 2**32 - 1), scale=st.floats(0.01, 100), method=st.sampled_from(METHODS))
def test_a_rigid_motion_and_a_scale_move_the_frames_along(seed, scale, method):
    rng = np.random.default_rng(seed)
    turn = np.linalg.qr(rng.normal(size=(3, 3)))[0]
    turn *= np.sign(np.linalg.det(turn))
    part = torus_part(9, 7)
    points = (part.points.values @ turn.T * scale + rng.normal(size=3)).astype(np.float32)
    moved = replace(
        part,
        points=Stream(points, part.points.index),
        normals=Stream((part.normals.values @ turn.T).astype(np.float32), part.normals.index),
    )

    assert angle_between(tangents(moved, method=method), tangents(part, method=method) @ turn.T).max() < 0.05


def test_a_mirrored_copy_has_the_mirrored_frames_and_the_other_side():
    part = torus_part(10, 8)
    flip = np.float32([-1, 1, 1])
    corners = np.arange(part.corner_count).reshape(-1, 4)[:, ::-1].ravel()
    points, normals, uvs = (Stream(s.values, s.index[corners]) for s in (part.points, part.normals, part.uvs[0]))
    points, normals = (Stream(stream.values * flip, stream.index) for stream in (points, normals))
    mirrored = Part("mirrored", -1, part.starts, points, normals, (uvs,))

    one, two = solved(part), solved(mirrored)

    assert angle_between(two.tangents[two.index], one.tangents[one.index][corners] * flip).max() < 0.01
    assert (two.sides == -1).all() and (one.sides == 1).all()


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("harm", ["one UV for all", "one face", "one point for all"])
def test_frames_are_never_undefined(method, harm):
    part = sphere_part(8, 6)
    uv, points = part.uvs[0].values.copy(), part.points.values.copy()
    if harm == "one UV for all":
        uv[:] = 0.5
    elif harm == "one face":
        uv[part.uvs[0].index[:4]] = 0.5
    else:
        points[:] = 1.0
    broken = replace(part, points=Stream(points, part.points.index), uvs=(Stream(uv, part.uvs[0].index),))

    made = solved(broken, method=method)
    normal = broken.normals.values[broken.normals.index]

    assert_allclose(np.linalg.norm(made.tangents, axis=1), 1, atol=1e-5)
    assert set(np.unique(made.sides)) <= {-1, 1}
    assert made.fallback.any() or harm == "one face"
    if method == "mikktspace":
        assert np.abs((made.tangents[made.index] * normal).sum(1)).max() < 1e-5


def test_frames_are_never_averaged_across_a_split():
    part = half_mirrored(grid_part(2, 1), 2, 1)

    together, apart = (frames(one, method="angle").parts[0].frames for one in (asset(part), split(asset(part))))

    assert len(together.tangents) == 6 and len(apart.tangents) == 8
    assert not together.fallback.all() and (np.abs(apart.tangents) == [1, 0, 0]).all()


def materials(*maps: MapUse) -> tuple[Material, ...]:
    return (Material("plain", (MapUse("colour", 0),)), Material("bumpy", maps))


@pytest.mark.parametrize("role", ["normal", "clearcoat normal", "anisotropy"])
def test_frames_are_made_only_where_a_tangent_space_map_needs_them(role):
    parts = tuple(replace(grid_part(), material=row) for row in (0, 1))

    made = frames(Asset("a", parts, materials(MapUse(role, 0))))

    assert [part.frames is not None for part in made.parts] == [False, True]


def test_a_file_that_names_no_maps_needs_them_everywhere():
    assert solved(replace(grid_part(), material=-1)) is not None


def test_the_uv_set_of_the_map_is_followed():
    turned = Stream(grid_part().uvs[0].values[:, ::-1].copy() * np.float32([1, -1]), grid_part().uvs[0].index)
    part = replace(grid_part(), material=1, uvs=(*grid_part().uvs, turned))

    made = frames(Asset("a", (part,), materials(MapUse("normal", 0, 1)))).parts[0].frames

    assert made.uv == 1 and np.allclose(np.abs(made.tangents), [0, 1, 0], atol=1e-6)


def test_a_maps_uv_transform_turns_the_frames():
    """KHR_texture_transform turns UVs counter-clockwise as seen on the image, whose v points down."""
    part = replace(grid_part(), material=1)
    use = MapUse("normal", 0, 0, (0.0, 0.0, np.pi / 2, 1.0, 1.0))

    made = frames(Asset("a", (part,), materials(use))).parts[0].frames

    assert np.allclose(np.abs(made.tangents), [0, 1, 0], atol=1e-6)


def test_a_part_that_needs_frames_and_has_no_uvs_is_an_error():
    with pytest.raises(InputError, match='shape: part "grid": no UVs, which its tangent frames would follow'):
        frames(asset(replace(grid_part(), uvs=())))


def test_stored_frames_are_kept_unless_they_are_to_be_replaced():
    part = torus_part(6, 4)
    stored = Frames(
        np.float32([[0, 1, 0]]),
        None,
        np.int8([1]),
        np.zeros(1, bool),
        np.zeros(part.corner_count, np.int32),
        0,
        "stored",
    )
    brought = asset(replace(part, frames=stored))

    assert frames(brought).parts[0].frames is stored
    assert frames(brought, stored="replace").parts[0].frames.method == "mikktspace"


def test_morph_targets_get_displacements_of_tangents():
    """A quarter turn about z as a morph target: every tangent moves from x to y."""
    part = grid_part(2, 2)
    corner = part.points.index
    turned = part.points.values[:, [1, 0, 2]] * np.float32([-1, 1, 1])
    morph = Morph(turned - part.points.values, np.zeros_like(part.points.values), None)

    after = frames(asset(replace(part, source=corner, morphs=(morph,)))).parts[0]

    assert_allclose(after.morphs[0].tangents, np.broadcast_to([-1, 1, 0], after.frames.tangents.shape), atol=1e-6)


def test_hard_edges_keep_frames_apart():
    made = orthogonalise(frames(asset(box_part()))).parts[0].frames

    assert len(made.tangents) == 24


JUNK = st.sampled_from([0.0, -0.0, 1.0, 0.5, 1e-30, 1e-44, -3e38, 3e38, np.nan, np.inf, -np.inf])


def junk(draw) -> Part:
    """Faces of any size on points, normals and UVs that may be anything, many of them alike."""
    sizes = draw(st.lists(st.integers(0, 7), min_size=1, max_size=6))
    corners = sum(sizes)

    def stream(width: int) -> Stream:
        values = draw(arrays(np.float32, (5, width), elements=st.one_of(JUNK, st.floats(-2, 2, width=32))))
        return Stream(values, draw(arrays(np.int32, corners, elements=st.integers(0, 4))))

    points, normal, uv = stream(3), stream(3), stream(2)
    return Part("junk", -1, np.cumsum([0, *sizes]).astype(np.int32), points, normal, (uv,))


@settings(max_examples=150, deadline=None)
@given(data=st.data(), method=st.sampled_from(METHODS), how=st.sampled_from(["gram-schmidt", "polar"]))
def test_whatever_comes_in_no_frame_that_goes_out_is_undefined(data, method, how):
    part = junk(data.draw)

    for one in (asset(part), split(asset(part)), normals(asset(replace(part, normals=None)), method="angle")):
        made = frames(one, method=method)
        for framed in (made, orthogonalise(made, method=how)):
            found = framed.parts[0].frames
            assert_allclose(np.linalg.norm(found.tangents, axis=1), 1, atol=1e-5)
            assert found.bitangents is None or np.isfinite(found.bitangents).all()
            assert set(found.sides.tolist()) <= {-1, 1}
            assert len(found.index) == part.corner_count
