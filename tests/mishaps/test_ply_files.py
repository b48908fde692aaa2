"""Bad PLY and STL files: each a clear error that names file, element and row; none hangs or eats memory."""

from __future__ import annotations

import tracemalloc

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from tangentry.nodes.load import load
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import InputFile

POINTS = [(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0)]
XYZ = "property float x\nproperty float y\nproperty float z\n"
LIST = "property list uchar int vertex_indices\n"
HEAD = f"ply\nformat {{}} 1.0\nelement vertex 4\n{XYZ}element face 1\n{LIST}end_header\n"
TRIANGLES = np.array(POINTS, np.float32)[[[0, 1, 2], [0, 2, 3]]]


def body(kind, points=POINTS, faces=((0, 1, 2, 3),), length="u1"):
    """Rows of a file of that format."""
    if kind == "ascii":
        rows = [*points, *((len(face), *face) for face in faces)]
        return "".join(" ".join(str(value) for value in row) + "\n" for row in rows).encode()
    order = "<" if "little" in kind else ">"
    lists = [np.array(len(face), order + length).tobytes() + np.array(face, order + "i4").tobytes() for face in faces]
    return np.array(points, order + "f4").tobytes() + b"".join(lists)


def ply(kind, **more):
    """A whole file."""
    return HEAD.format(kind).encode() + body(kind, **more)


def read(folder, content, name="buoy.ply"):
    """Load a file of these bytes."""
    (folder / name).write_bytes(content)
    return load(InputFile(name, folder))


KINDS = pytest.mark.parametrize("kind", ["ascii", "binary_little_endian", "binary_big_endian"])


@KINDS
def test_the_whole_file_can_be_read(tmp_path, kind):
    assert read(tmp_path, ply(kind)).parts[0].corner_count == 4


@KINDS
def test_a_file_cut_off_is_told_with_element_and_row(tmp_path, kind):
    whole = ply(kind)
    for end in range(len(HEAD.format(kind)), len(whole) - (2 if kind == "ascii" else 0)):
        with pytest.raises(
            InputError, match=r"^buoy\.ply: (vertex [0-3]|face 0): the file ends here, but announces [14]"
        ):
            read(tmp_path, whole[:end])


@KINDS
@pytest.mark.parametrize("index", [4, -1, 2**31 - 1])
def test_indices_out_of_range_are_told_with_their_face(tmp_path, kind, index):
    head = HEAD.replace("face 1", "face 2")
    with pytest.raises(InputError, match=rf"buoy\.ply: face 1: vertex index {index}, but the file has 4 vertices"):
        read(tmp_path, head.format(kind).encode() + body(kind, faces=((0, 1, 2), (0, 1, index))))


@KINDS
@pytest.mark.parametrize("value", [np.nan, np.inf])
def test_positions_that_are_not_finite_are_told_with_their_vertex(tmp_path, kind, value):
    with pytest.raises(InputError, match=r"buoy\.ply: vertex 2: its position is \["):
        read(tmp_path, ply(kind, points=[*POINTS[:2], (value, 0, 0), POINTS[3]]))


@pytest.mark.parametrize(
    ("head", "told"),
    [
        ("", "the file is empty"),
        ("plywood\n", "line 1: "),
        ("ply\nformat ascii 1.0\nelement vertex 3\n", "header: it has no end_header: the file is cut off"),
        ("ply\nend_header\n", "header: it does not say its format"),
        ("ply\nformat utf-8 1.0\nend_header\n", "line 2: 'format utf-8 1.0' can't be read"),
        ("ply\nformat ascii 1.0\nelement vertex -1\nend_header\n", "line 3: "),
        ("ply\nformat ascii 1.0\nelement vertex 99999999999999999999\nend_header\n", "line 3: "),
        ("ply\nformat ascii 1.0\nelement vertex many\nend_header\n", "line 3: "),
        ("ply\nformat ascii 1.0\nproperty float x\nend_header\n", "line 3: "),
        (f"ply\nformat ascii 1.0\nelement vertex 1\n{XYZ}property float x\nend_header\n", "line 7: "),
        ("ply\nformat ascii 1.0\nelement vertex 1\nproperty half x\nend_header\n", "line 4: 'property half x'"),
        (
            "ply\nformat ascii 1.0\nelement face 1\n" + LIST + "end_header\n3 0 1 2\n",
            "element vertex: it has no properties",
        ),
        (f"ply\nformat ascii 1.0\nelement vertex 1\n{XYZ}end_header\n0 0 0\n", "there are no faces in it"),
        (f"ply\nformat ascii 1.0\nelement vertex 1\n{XYZ}element face 0\n{LIST}end_header\n0 0 0\n", "no faces"),
        (HEAD.format("ascii") + "0 0 0\n1 0 0\n1 one 0\n", "vertex 2: a list or value that can't be read"),
        (HEAD.format("ascii") + "0 0 0\n1 0 0\n1 1 0\n0 1 0\n-3 0 1 2\n", "face 0: a list or value that can't be read"),
        (HEAD.format("ascii") + "0 0 0\n1 0 0\n1 1 0\n0 1 0\n3 0 1 1.5\n", "face 0: vertex index 1.5"),
        (HEAD.format("ascii") + "0 0 0\n1 0 0\n1 1 0\n0 1 0\n2 0 1\n", "there are no faces in it"),
    ],
)
def test_what_cannot_be_read_is_told_with_its_place(tmp_path, head, told):
    with pytest.raises(InputError) as error:
        read(tmp_path, head.encode())

    assert str(error.value).startswith("buoy.ply: ") and told in str(error.value)


@pytest.mark.parametrize("kind", ["ascii", "binary_little_endian"])
@pytest.mark.parametrize(
    "properties", [XYZ, LIST, "property list uchar uchar a\n", "property list uint uint a\n", "property uchar a\n", ""]
)
def test_huge_counts_take_no_memory(tmp_path, kind, properties):
    head = f"ply\nformat {kind} 1.0\nelement vertex 2147483647\n{properties}end_header\n"
    tracemalloc.start()
    with pytest.raises(InputError, match=r"^buoy\.ply: "):
        read(
            tmp_path, head.encode() + b"\xff\xff\xff\x7f" * 8 if kind != "ascii" else head.encode() + b"4294967295 " * 8
        )
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()

    assert peak < 50_000_000


@KINDS
def test_a_polygon_of_a_hundred_thousand_corners_is_read(tmp_path, kind):
    count = 100_000
    turn = np.linspace(0, 2 * np.pi, count, endpoint=False)
    points = np.stack([np.cos(turn), np.sin(turn), np.zeros(count)], axis=1).tolist()
    head = HEAD.replace("uchar int", "uint int").replace("vertex 4", f"vertex {count}").format(kind).encode()
    content = body(kind, points=points, faces=(range(count),), length="u4")

    assert read(tmp_path, head + content).parts[0].corner_count == count


@settings(max_examples=200, deadline=None)
@given(st.data())
def test_any_damage_ends_in_an_asset_or_a_clear_error(tmp_path_factory, data):
    kind = data.draw(st.sampled_from(["ascii", "binary_little_endian", "binary_big_endian"]))
    content = bytearray(ply(kind))
    at = data.draw(st.integers(0, len(content)))
    put = data.draw(
        st.sampled_from([b"nan", b"-", b"\0", b"\xff\xff\xff\xff", b"9" * 30, b"list ", b"\n", b"element a 5\n"])
    )
    content[at : at + data.draw(st.sampled_from([0, 1, len(put), len(content)]))] = put

    try:
        asset = read(tmp_path_factory.mktemp("damaged"), bytes(content))
    except InputError as error:
        assert str(error).startswith("buoy.ply: ")
    else:
        assert all(part.points.index.max() < len(part.points.values) for part in asset.parts)


def test_an_image_that_is_none_is_told(tmp_path):
    (tmp_path / "wood.png").write_bytes(b"no picture")
    content = ply("ascii").replace(b"element vertex", b"comment TextureFile wood.png\nelement vertex")

    with pytest.raises(InputError, match=r"^buoy\.ply: image wood\.png: not an image that can be read"):
        read(tmp_path, content)


# STL


def stl(triangles=TRIANGLES, announced=None):
    """A binary file."""
    rows = np.zeros(len(triangles), [("normal", "<f4", 3), ("points", "<f4", (3, 3)), ("more", "<u2")])
    rows["points"] = triangles
    return b"\0" * 80 + np.array(len(triangles) if announced is None else announced, "<u4").tobytes() + rows.tobytes()


LOOP = "solid a\nouter loop\nvertex 0 0 0\nvertex 1 0 0\nvertex 0 1 0\nendloop\n"


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"", "the file is empty"),
        (b"\x07" * 50, "triangle 0: 0 triangles announced, 0 there: cut off, or no STL file"),
        (stl(announced=2**32 - 1), "triangle 2: 4294967295 triangles announced, 2 there"),
        (stl()[:-1], "triangle 1: 2 triangles announced, 1 there"),
        (stl(TRIANGLES[:0]), "there are no faces in it"),
        (stl(np.where(TRIANGLES == 1, np.nan, TRIANGLES)), "triangle 0: its points are"),
        (b"solid a\nendsolid a\n", "there are no faces in it"),
        (LOOP.replace("1 0 0", "1 nan 0").encode(), "line 4: 'vertex 1 nan 0'"),
        (LOOP.replace("1 0 0", "1 0").encode(), "line 4: 'vertex 1 0'"),
        (LOOP.replace("vertex 1 0 0\n", "").encode(), "line 5: 'endloop'"),
        (LOOP.replace("endloop\n", "").encode(), "line 5: 'vertex 0 1 0'"),
        (LOOP.replace("endloop\n", LOOP).encode(), "line 7: 'outer loop'"),
    ],
)
def test_bad_stl_is_told_with_its_triangle_or_line(tmp_path, content, told):
    with pytest.raises(InputError) as error:
        read(tmp_path, content, "cleat.stl")

    assert str(error.value).startswith("cleat.stl: ") and told in str(error.value)
