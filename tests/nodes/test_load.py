"""Loading: by suffix, by what stands in the file, and with everything beside it reported."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, torus_part
from tangentry.nodes.export import export
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.formats.vertices import vertices_of
from tangentry.nodes.load import load
from tangentry.nodes.model import Asset, Image, MapUse, Material
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import InputFile

PROPS = Path(__file__).parents[2] / "graphs" / "ferry_terminal" / "props"
SOLID = b"solid a\nfacet\nouter loop\nvertex 0 0 0\nvertex 1 0 0\nvertex 0 1 0\nendloop\nendfacet\nendsolid a\n"


def placed(made, folder):
    """Put files in a folder; gives the first."""
    for file in made.files:
        (folder / file.name).write_bytes(file.content.tobytes())
    return folder / made.files[0].name


def painted(name="wood.png"):
    """A torus with a colour map."""
    image = Image(name, "image/png", np.asarray(write_png(np.full((1, 1, 3), 128, np.uint8))))
    part = replace(torus_part(6, 4), material=0)
    return Asset("ring", (part,), (Material("wood", (MapUse("colour", 0),)),), (image,))


@pytest.mark.parametrize("suffix", [".obj", ".ply", ".gltf", ".glb"])
def test_the_suffix_says_the_format(tmp_path, suffix):
    before = asset(torus_part(8, 4))

    part = load(str(placed(export(before, file=f"ring{suffix}"), tmp_path))).parts[0]

    wanted = vertices_of(before.parts[0])
    corners = vertices_of(part)
    assert_allclose(corners.points[corners.triangles], wanted.points[wanted.triangles])


@pytest.mark.parametrize("name", ["RING.STL", "ring.Stl"])
def test_capitals_in_the_suffix_do_not_matter(tmp_path, name):
    (tmp_path / name).write_bytes(SOLID)

    assert load(str(tmp_path / name)).parts[0].face_count == 1


def test_a_file_that_is_not_there_is_an_error_or_left_out(tmp_path):
    missing = InputFile("gone.obj", tmp_path)

    assert load(missing, if_missing="skip") is None
    assert missing.reads == {"gone.obj": None}
    with pytest.raises(InputError, match=r"gone\.obj: there is no such file.*if_missing: skip"):
        load(missing)


def test_what_is_there_is_loaded_with_skip_too():
    assert load(str(PROPS / "crate.obj"), if_missing="skip").parts


@pytest.mark.parametrize(
    ("suffix", "beside"),
    [(".obj", {"ring.mtl", "wood.png"}), (".ply", {"wood.png"}), (".gltf", {"ring.bin", "wood.png"})],
)
def test_files_beside_are_reported_as_read(tmp_path, suffix, beside):
    file = InputFile(placed(export(painted(), file=f"ring{suffix}"), tmp_path))

    load(file)

    assert {name for name, content in file.reads.items() if content is not None} == {f"ring{suffix}", *beside}


@pytest.mark.parametrize("suffix", [".obj", ".ply"])
def test_files_looked_for_in_vain_are_reported_too(tmp_path, suffix):
    path = placed(export(painted(), file=f"ring{suffix}"), tmp_path)
    (tmp_path / "wood.png").unlink()
    file = InputFile(path)

    loaded = load(file)

    assert file.reads["wood.png"] is None and loaded.notes == ("image wood.png is not there",)


@pytest.mark.parametrize("name", ["crate.step", "crate.objj", "crate", "crate.fbx"])
def test_other_suffixes_are_refused_with_those_that_are_read(tmp_path, name):
    (tmp_path / name).write_bytes(b"something")

    with pytest.raises(InputError, match=r"crate.*names no mesh format; \.obj, \.ply, \.stl, \.gltf, \.glb are read"):
        load(str(tmp_path / name))


@pytest.mark.parametrize(
    ("prop", "name", "told"),
    [
        ("buoy.ply", "buoy.obj", "suffix says .obj, but it holds .ply"),
        ("oar.glb", "oar.obj", "suffix says .obj, but it holds .glb"),
        ("oar.glb", "oar.ply", "suffix says .ply, but it holds .glb"),
        ("crate.obj", "crate.ply", "a PLY file begins with"),
        ("crate_height.png", "crate.obj", "it holds a PNG image"),
        ("crate.obj", "crate.stl", "no STL file"),
    ],
)
def test_contents_that_belie_the_suffix_are_told(tmp_path, prop, name, told):
    (tmp_path / name).write_bytes((PROPS / prop).read_bytes())

    with pytest.raises(InputError, match=told) as error:
        load(str(tmp_path / name))
    assert name in str(error.value)


def test_a_glb_under_the_suffix_gltf_is_read(tmp_path):
    (tmp_path / "oar.gltf").write_bytes((PROPS / "oar.glb").read_bytes())

    assert load(str(tmp_path / "oar.gltf")).parts


def test_the_name_is_the_path_as_it_was_given(tmp_path):
    (tmp_path / "props").mkdir()
    (tmp_path / "props" / "a.stl").write_bytes(SOLID)

    assert load(InputFile("props/a.stl", tmp_path)).name == "props/a.stl"
