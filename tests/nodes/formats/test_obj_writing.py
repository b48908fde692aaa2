"""What is written as OBJ comes back from it; frames from the sidecar."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from shapes import asset, box_part, grid_part, torus_part
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.formats.obj import read_obj
from tangentry.nodes.formats.obj_writing import write_obj
from tangentry.nodes.frames import frames
from tangentry.nodes.model import Asset, Image, MapUse, Material, Stream
from tangentry.pipeline.flow import InputFile


@pytest.fixture
def back(tmp_path):
    """back(asset) -> the asset read from its OBJ file, and the folder it was written to."""

    def written(asset):
        for file in write_obj(asset, "pier"):
            (tmp_path / file.name).write_bytes(file.content.tobytes())
        return read_obj(InputFile(tmp_path / "pier.obj"))

    return written


def at(stream):
    """The values of a stream at every corner."""
    return stream.values[stream.index]


def picture(grey, name):
    """An image of one texel."""
    return Image(name, "image/png", np.asarray(write_png(np.full((1, 1, 3), grey, np.uint8))))


def test_every_value_and_every_index_comes_back(back):
    before = asset(replace(torus_part(6, 4), name="ring"), replace(box_part(), name="box"))

    for was, part in zip(before.parts, back(before).parts, strict=True):
        assert part.name == was.name
        assert_array_equal(part.starts, was.starts)
        for one, other in zip((was.points, was.normals, *was.uvs), (part.points, part.normals, *part.uvs), strict=True):
            assert_array_equal(other.values, one.values)
            assert_array_equal(other.index, one.index)


def test_v_is_turned_up(back):
    part = grid_part(2, 2)

    after = back(replace(asset(part), v_down=True))

    assert not after.v_down
    assert_allclose(at(after.parts[0].uvs[0]), at(part.uvs[0]) * (1, -1) + (0, 1), atol=1e-7)


def test_smoothing_groups_come_back(back):
    groups = np.array([0, 0, 3, 3, 1, 0], np.int32)

    assert_array_equal(back(asset(replace(box_part(), smoothing=groups))).parts[0].smoothing, groups)


def test_colours_come_back_and_a_point_of_two_colours_is_two_points(back):
    part = grid_part(2, 1)
    colours = Stream(np.array([[1, 0, 0], [0, 0.25, 1]], np.float32), np.repeat([0, 1], 4).astype(np.int32))

    after = back(asset(replace(part, colours=(colours,)))).parts[0]

    assert_array_equal(at(after.colours[0]), at(colours))
    assert_array_equal(at(after.points), at(part.points))
    assert len(after.points.values) == len(part.points.values) + 2


def test_materials_come_back_with_their_maps_and_images(back):
    images = (picture(10, "wood.png"), picture(20, "wood.png"), picture(30, "height"))
    maps = (MapUse("colour", 0), MapUse("normal", 1, strength=0.5), MapUse("height", 2))
    parts = tuple(replace(grid_part(1, 1), material=row) for row in (0, 1))

    after = back(Asset("pier", parts, (Material("deck", maps), Material("rail", maps[:1])), images))

    for was, material in zip((maps, maps[:1]), after.materials, strict=True):
        assert [(use.role, use.strength) for use in material.maps] == [(use.role, use.strength) for use in was]
        for one, other in zip(was, material.maps, strict=True):
            assert_array_equal(after.images[other.image].content, images[one.image].content)


def test_materials_of_one_name_stay_apart(back):
    parts = tuple(replace(grid_part(1, 1), material=row) for row in (0, 1, 2))

    after = back(Asset("pier", parts, (Material("a\nb"), Material("a b"), Material("")), ()))

    assert len({material.name for material in after.materials}) == len(after.parts) == 3


def test_only_images_that_a_statement_names_are_written():
    images = (picture(10, "wood.png"), picture(20, "packed.png"), Image("gone.png", "", np.zeros(0, np.uint8)))
    maps = (MapUse("colour", 0), MapUse("metallic roughness", 1), MapUse("emissive", 2))

    files = write_obj(Asset("pier", (replace(grid_part(), material=0),), (Material("deck", maps),), images), "pier")

    assert [file.name for file in files] == ["pier.obj", "pier.mtl", "wood.png"]
    assert b"map_Ke gone.png" in files[1].content.tobytes()


def read_frames(text):
    """A reader of the sidecar, from what its head says: (frames, 4) and per face the frame of each corner."""
    rows = [line.split() for line in text.splitlines() if not line.startswith("#")]
    tangents = np.array([row[1:] for row in rows if row[0] == "t"], np.float32)
    bitangents = np.array([row[1:] for row in rows if row[0] == "b"], np.float32)
    return tangents, bitangents, [[int(word) for word in row[1:]] for row in rows if row[0] == "f"]


def test_frames_stand_in_the_sidecar_by_the_faces_of_the_file():
    framed = frames(asset(torus_part(5, 4), box_part()), where="all")

    sidecar = {file.name: file.content.tobytes().decode() for file in write_obj(framed, "pier")}["pier.frames"]
    tangents, _, faces = read_frames(sidecar)
    corner = np.concatenate(faces) - 1

    wanted = [
        np.concatenate([p.frames.tangents, p.frames.sides[:, None]], axis=1)[p.frames.index] for p in framed.parts
    ]
    assert_array_equal(tangents[corner], np.concatenate(wanted))
    assert [len(face) for face in faces] == [4] * (20 + 6)


def test_skewed_bitangents_and_parts_without_frames_are_told():
    skewed = frames(asset(grid_part(1, 1)), where="all").parts[0]
    own = np.tile(np.array([[0.6, 0.8, 0]], np.float32), (len(skewed.frames.sides), 1))
    skewed = replace(skewed, frames=replace(skewed.frames, bitangents=own))

    sidecar = write_obj(asset(grid_part(1, 1), skewed), "pier")[-1].content.tobytes().decode()
    _, bitangents, faces = read_frames(sidecar)

    assert_array_equal(bitangents, own)
    assert faces[0] == [0] * 4 and min(faces[1]) == 1


def test_no_frames_make_no_sidecar():
    assert [file.name for file in write_obj(asset(box_part()), "pier")] == ["pier.obj"]
