"""What is exported comes back: values, frames, maps; one vertex for each distinct corner; nothing of what is faulty."""

from __future__ import annotations

import io
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from shapes import asset, box_part, half_mirrored, sphere_part, torus_part
from tangentry.nodes.check import check
from tangentry.nodes.export import WRITTEN, export
from tangentry.nodes.formats.vertices import vertices_of
from tangentry.nodes.frames import frames
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.load import load
from tangentry.nodes.model import Asset, Map, MapUse, Material, Sheet
from tangentry.nodes.split import split
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Findings

MESHES = (".glb", ".gltf", ".obj", ".ply")  # what `load` reads again
WITH_FRAMES = (".glb", ".gltf", ".ply")


def solved(*parts, **more):
    """Parts split and with frames."""
    return frames(split(replace(asset(*parts), **more)), where="all")


def placed(made, folder):
    """Put files in a folder; gives the first."""
    for file in made.files:
        (folder / file.name).write_bytes(file.content.tobytes())
    return folder / made.files[0].name


def back(before, suffix, folder, map=None):
    """The asset loaded from what was exported."""
    return load(str(placed(export(before, map, file=f"out/pier{suffix}"), folder)))


def corners(part):
    """A part's values at the corners of its triangles: points, normals, UVs with v up, tangents with sides."""
    at = triangulate(part)[0].ravel()
    streams = [part.points, part.normals, *part.uvs]
    return [stream.values[stream.index[at]] for stream in streams]


def tangents(part):
    """(corners, 4): tangents and sides at the corners of a part's triangles."""
    at = part.frames.index[triangulate(part)[0].ravel()]
    return np.concatenate([part.frames.tangents[at], part.frames.sides[at, None]], axis=1)


@pytest.mark.parametrize("suffix", MESHES)
def test_positions_normals_and_uvs_come_back(tmp_path, suffix):
    before = solved(torus_part(8, 6))

    after = back(before, suffix, tmp_path)

    for was, now in zip(corners(before.parts[0]), corners(after.parts[0]), strict=True):
        turned = now * (1, -1) + (0, 1) if now.shape[1] == 2 and after.v_down else now
        assert_allclose(turned, was, atol=1e-6)


@pytest.mark.parametrize("suffix", WITH_FRAMES)
def test_tangents_and_sides_come_back(tmp_path, suffix):
    before = solved(half_mirrored(torus_part(8, 6), 8, 6))

    after = back(before, suffix, tmp_path).parts[0]

    assert set(after.frames.sides.tolist()) == {-1, 1}
    assert_allclose(tangents(after), tangents(before.parts[0]), atol=1e-6)


@pytest.mark.parametrize("suffix", WITH_FRAMES)
@pytest.mark.parametrize("make", [box_part, lambda: torus_part(8, 6), lambda: half_mirrored(torus_part(8, 6), 8, 6)])
def test_one_vertex_is_written_for_each_distinct_corner(tmp_path, suffix, make):
    before = solved(make()).parts[0]
    rows = np.concatenate([*corners(before), tangents(before)], axis=1)

    after = back(asset(before), suffix, tmp_path).parts[0]

    assert len(after.points.values) == len(np.unique(rows + 0.0, axis=0))  # + 0.0: -0.0 is 0.0


@pytest.mark.parametrize("suffix", [".obj", ".usda"])
def test_polygons_stay_polygons_where_the_format_has_them(tmp_path, suffix):
    path = placed(export(solved(sphere_part(6, 4)), file=f"pier{suffix}"), tmp_path)
    if suffix == ".obj":
        assert set(np.diff(load(str(path)).parts[0].starts)) == {4}
    else:
        assert path.read_text().count("[4, 4, 4") == 1


@pytest.mark.parametrize("suffix", WRITTEN)
def test_what_is_faulty_is_held_back(suffix):
    before = solved(box_part())
    found = check(before)
    faulty = Findings("x", tuple(replace(one, severity="fault") for one in check(asset(torus_part(6, 4))).items), {})

    assert not found.faulty and export(before, None, found, file=f"pier{suffix}") is not None
    assert faulty.faulty and export(before, None, faulty, file=f"pier{suffix}") is None


def test_arrays_in_npz_are_those_of_the_vertices():
    before = replace(solved(torus_part(8, 6), box_part()), v_down=True)

    (file,) = export(before, file="pier.npz").files
    arrays = np.load(io.BytesIO(file.content.tobytes()))

    assert file.name == "pier.npz" and bool(arrays["v_down"])
    assert arrays["names"].tolist() == ["torus", "box"]
    for k, part in enumerate(before.parts):
        found = vertices_of(part)
        for name, wanted in (("points", found.points), ("normals", found.normals), ("uv0", found.uvs[0])):
            assert_array_equal(arrays[f"{k}/{name}"], wanted)
        assert_array_equal(arrays[f"{k}/triangles"], found.triangles)
        assert_array_equal(arrays[f"{k}/tangents"], found.tangents)


def flat_map(material=""):
    """A normal map of one tilted texel, green down."""
    return Map((Sheet(material, np.array([[[200, 90, 220]]], np.uint8), "normal", "tangent", "down"),))


@pytest.mark.parametrize("suffix", [".glb", ".gltf", ".obj"])
def test_the_map_comes_back_in_its_material_green_up(tmp_path, suffix):
    from tangentry.nodes.texture import texture

    parts = tuple(replace(box_part(), name=name, material=k) for k, name in enumerate("ab"))
    before = Asset(
        "pier", parts, (Material("deck"), Material("rail", (MapUse("normal", 0, strength=0.5),))), (image(),)
    )

    after = back(before, suffix, tmp_path, flat_map("rail"))

    assert after.materials[0].tangent_space_map is None
    assert after.materials[1].tangent_space_map.strength == 0.5
    (sheet,) = texture(after).sheets
    assert sheet.material == "rail" and sheet.texels.tolist() == [[[200, 165, 220]]]


def image():
    """Some other image."""
    from tangentry.nodes.formats.images import write_png
    from tangentry.nodes.model import Image

    return Image("old.png", "image/png", np.asarray(write_png(np.zeros((1, 1, 3), np.uint8))))


@pytest.mark.parametrize("suffix", [".glb", ".obj"])
def test_a_map_for_all_reaches_parts_without_material(tmp_path, suffix):
    after = back(solved(box_part()), suffix, tmp_path, flat_map())

    (part,) = after.parts
    assert after.materials[part.material].tangent_space_map is not None


@pytest.mark.parametrize("suffix", [".ply", ".npz"])
def test_a_map_is_refused_where_it_has_no_place(suffix):
    with pytest.raises(InputError, match=rf"pier\{suffix}: input map: \{suffix} has no place for maps"):
        export(solved(box_part()), flat_map(), file=f"pier{suffix}")


@pytest.mark.parametrize("suffix", [".glb", ".obj", ".usda"])
def test_only_tangent_space_normals_are_taken_as_maps(suffix):
    height = Map((Sheet("", np.zeros((1, 1, 1), np.uint8), "height"),))

    with pytest.raises(InputError, match="not tangent-space normals"):
        export(solved(box_part()), height, file=f"pier{suffix}")


@pytest.mark.parametrize("suffix", [".glb", ".obj", ".usda"])
@pytest.mark.parametrize(("green", "told"), [("undecided", "is undecided"), ("", "is not said")])
def test_a_map_whose_green_nobody_knows_is_refused(suffix, green, told):
    unknown = Map((replace(flat_map().sheets[0], green=green),))

    with pytest.raises(InputError, match=f"map pier_normal: which way its green points {told}; say it"):
        export(solved(box_part()), unknown, file=f"pier{suffix}")


@pytest.mark.parametrize("suffix", [".gltf", ".obj"])
def test_of_a_chain_of_levels_the_map_itself_is_put_in(suffix):
    (full,) = flat_map().sheets
    small = replace(full, texels=full.texels // 2, level=1)

    alone = export(solved(box_part()), Map((full,)), file=f"pier{suffix}")
    chain = export(solved(box_part()), Map((full, small)), file=f"pier{suffix}")

    assert [(file.name, file.content.tobytes()) for file in chain.files] == [
        (file.name, file.content.tobytes()) for file in alone.files
    ]


def test_other_suffixes_are_refused_with_those_that_are_written():
    with pytest.raises(InputError, match=r'pier\.fbx: suffix "\.fbx" names no format; write one of \.glb'):
        export(solved(box_part()), file="pier.fbx")


def test_only_the_last_part_of_the_path_counts():
    names = [file.name for suffix in WRITTEN for file in export(solved(box_part()), file=f"a/b/c.d{suffix}").files]

    assert names == [
        "c.d.glb",
        "c.d.gltf",
        "c.d.bin",
        "c.d.obj",
        "c.d.frames",
        "c.d.ply",
        "c.d.usda",
        "c.d.usdc",
        "c.d.npz",
    ]
