"""STL files of both kinds hold the same triangles, and nothing for frames to follow."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_array_equal
from tangentry.nodes.formats.stl import read_stl
from tangentry.nodes.frames import frames
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import InputFile

TETRA = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 0.5]], np.float32)[
    np.array([[0, 2, 1], [0, 1, 3], [0, 3, 2], [1, 2, 3]])
]


def ascii_stl(triangles, name="cleat"):
    """A solid in words."""
    loops = [
        "facet normal 0 0 0\n outer loop\n"
        + "".join(f"  vertex {x:.9g} {y:.9g} {z:.9g}\n" for x, y, z in one)
        + " endloop\nendfacet\n"
        for one in triangles
    ]
    return f"solid {name}\n{''.join(loops)}endsolid {name}\n".encode()


def binary_stl(triangles, head=b"made of iron", announced=None):
    """A solid in bytes."""
    rows = np.zeros(len(triangles), [("normal", "<f4", 3), ("points", "<f4", (3, 3)), ("more", "<u2")])
    rows["points"] = triangles
    count = np.array(len(triangles) if announced is None else announced, "<u4")
    return head.ljust(80, b"\0") + count.tobytes() + rows.tobytes()


@pytest.fixture
def read(tmp_path):
    """read(content) -> the asset of an STL file of these bytes."""

    def written(content):
        (tmp_path / "cleat.stl").write_bytes(content)
        return read_stl(InputFile("cleat.stl", tmp_path))

    return written


@pytest.mark.parametrize("content", [ascii_stl(TETRA), binary_stl(TETRA), binary_stl(TETRA, b"solid all the same")])
def test_triangles_are_read_and_equal_points_joined(read, content):
    (part,) = read(content).parts

    assert_array_equal(part.points.values[part.points.index].reshape(-1, 3, 3), TETRA)
    assert len(part.points.values) == 4 and part.name == "cleat"


def test_each_solid_of_a_file_is_a_part(read):
    parts = read(ascii_stl(TETRA, "foot") + ascii_stl(TETRA[:1], "") + ascii_stl(TETRA[:2], "long horn")).parts

    assert [(part.name, part.face_count) for part in parts] == [("foot", 4), ("cleat", 1), ("long horn", 2)]


def test_frames_are_refused_for_want_of_uvs(read):
    with pytest.raises(InputError, match=r"cleat\.stl.*no UVs"):
        frames(read(binary_stl(TETRA)))
