"""USD layers, read back through the library that defines them."""

from __future__ import annotations

import sys
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from shapes import asset, box_part, grid_part, torus_part
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.formats.usd import write_usd
from tangentry.nodes.frames import frames
from tangentry.nodes.model import Asset, Image, MapUse, Material, Stream
from tangentry.pipeline.errors import InputError

KINDS = (".usda", ".usdc")


@pytest.fixture
def opened(tmp_path):
    """opened(asset, suffix) -> the stage of its layer."""
    usd = pytest.importorskip("pxr.Usd")
    stages = []  # what a stage holds is gone when nobody holds the stage

    def written(asset, suffix):
        for file in write_usd(asset, "pier", suffix):
            (tmp_path / file.name).write_bytes(file.content.tobytes())
        stages.append(usd.Stage.Open(str(tmp_path / f"pier{suffix}")))
        return stages[-1]

    return written


def meshes(stage):
    """The meshes of a stage, in order."""
    from pxr import UsdGeom

    return [UsdGeom.Mesh(prim) for prim in stage.Traverse() if prim.IsA(UsdGeom.Mesh)]


def primvar(mesh, name):
    """A primvar's values at every corner."""
    from pxr import UsdGeom

    found = UsdGeom.PrimvarsAPI(mesh).GetPrimvar(name)
    assert found.GetInterpolation() == "faceVarying"
    return np.array(found.ComputeFlattened())


def at(stream):
    """The values of a stream at every corner."""
    return stream.values[stream.index]


@pytest.mark.parametrize("suffix", KINDS)
def test_polygons_normals_and_uvs_are_there(opened, suffix):
    before = asset(torus_part(6, 4), replace(box_part(), name="torus"))

    for was, mesh in zip(before.parts, meshes(opened(before, suffix)), strict=True):
        assert_array_equal(mesh.GetFaceVertexCountsAttr().Get(), np.diff(was.starts))
        assert_array_equal(np.array(mesh.GetPointsAttr().Get())[mesh.GetFaceVertexIndicesAttr().Get()], at(was.points))
        assert_array_equal(mesh.GetNormalsAttr().Get(), at(was.normals))
        assert_array_equal(primvar(mesh, "st"), at(was.uvs[0]))


@pytest.mark.parametrize("suffix", KINDS)
@pytest.mark.parametrize("v_down", [False, True])
def test_frames_are_there_with_the_bitangent_along_v(opened, suffix, v_down):
    framed = frames(replace(asset(torus_part(8, 6)), v_down=v_down), where="all")
    part = framed.parts[0]

    (mesh,) = meshes(opened(framed, suffix))

    tangent, normal, side = (
        part.frames.tangents[part.frames.index],
        at(part.normals),
        part.frames.sides[part.frames.index],
    )
    assert_array_equal(primvar(mesh, "tangents"), tangent)
    assert_allclose(primvar(mesh, "bitangents"), np.cross(normal, tangent) * side[:, None], atol=1e-6)
    assert_allclose(primvar(mesh, "st"), at(part.uvs[0]) * (1, -1) + (0, 1) if v_down else at(part.uvs[0]), atol=1e-6)


def test_skewed_bitangents_stay_skewed(opened):
    framed = frames(asset(grid_part(2, 2)), where="all").parts[0]
    own = np.tile(np.array([[0.6, 0.8, 0]], np.float32), (len(framed.frames.sides), 1))
    skewed = replace(framed, frames=replace(framed.frames, bitangents=own))

    assert_array_equal(primvar(meshes(opened(asset(skewed), ".usdc"))[0], "bitangents"), own[framed.frames.index])


def test_further_uv_sets_and_colours_are_there(opened):
    part = grid_part(2, 2)
    colours = Stream(np.random.default_rng(0).random((9, 4)).astype(np.float32), part.points.index)
    two = replace(
        part, uvs=(part.uvs[0], Stream(part.uvs[0].values * np.float32(2), part.uvs[0].index)), colours=(colours,)
    )

    (mesh,) = meshes(opened(asset(two), ".usda"))

    assert_array_equal(primvar(mesh, "st1"), at(two.uvs[1]))
    assert_array_equal(primvar(mesh, "displayColor"), at(colours)[:, :3])


def test_materials_show_their_images(opened, tmp_path):
    from pxr import UsdShade

    image = Image("old wood.png", "image/png", np.asarray(write_png(np.full((1, 1, 3), 128, np.uint8))))
    material = Material("a b", (MapUse("colour", 0), MapUse("normal", 0, uv=1, strength=0.5)))
    stage = opened(Asset("x", (replace(grid_part(), material=0),), (material,), (image,)), ".usda")

    bound, _ = UsdShade.MaterialBindingAPI(meshes(stage)[0]).ComputeBoundMaterial()
    surface = UsdShade.Shader(bound.GetPrim().GetChild("surface"))
    texture = UsdShade.Shader(surface.GetInput("normal").GetConnectedSource()[0])
    reader = UsdShade.Shader(texture.GetInput("st").GetConnectedSource()[0])
    assert surface.GetInput("diffuseColor").HasConnectedSource()
    assert texture.GetInput("file").Get().resolvedPath == str(tmp_path / "old wood.png")
    assert (tuple(texture.GetInput("scale").Get()), tuple(texture.GetInput("bias").Get())) == (
        (1, 1, 2, 1),
        (-0.5, -0.5, -1, 0),
    )
    assert reader.GetInput("varname").Get() == "st1"


def test_arrays_that_lie_anywhere_in_memory_are_written(opened):
    part = grid_part(2, 2)
    moved = np.frombuffer(b"x" + part.points.values.tobytes(), np.float32, offset=1).reshape(-1, 3)

    (mesh,) = meshes(opened(asset(replace(part, points=Stream(moved, part.points.index))), ".usda"))

    assert not moved.flags.aligned
    assert_array_equal(mesh.GetPointsAttr().Get(), part.points.values)


def test_names_become_identifiers_and_stay_apart(opened):
    named = [replace(grid_part(), name=name) for name in ("3 of a kind", "torus", "torus", "Materials")]

    stage = opened(asset(*named), ".usda")

    assert [prim.GetName() for prim in stage.GetDefaultPrim().GetChildren()] == [
        "__of_a_kind",
        "torus",
        "torus_",
        "Materials_",
    ]


def test_the_same_asset_makes_the_same_bytes():
    pytest.importorskip("pxr.Usd")
    for suffix in KINDS:
        one, other = (write_usd(frames(asset(torus_part(6, 4))), "pier", suffix)[0].content for _ in range(2))
        assert_array_equal(one, other)


def test_without_the_library_the_extra_is_named(monkeypatch):
    monkeypatch.setitem(sys.modules, "pxr", None)

    with pytest.raises(InputError, match=r"pier\.usda: USD needs the package usd-core.*tangentry\[usd\]"):
        write_usd(asset(grid_part()), "pier", ".usda")
