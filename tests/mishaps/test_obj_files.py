"""Bad OBJ files and libraries: each a clear error, or a note, that names file and place; none hangs."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_array_equal
from tangentry.nodes.check import check
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.frames import frames
from tangentry.nodes.load import load
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import InputFile

SQUARE = "v 0 0 0\nv 1 0 0\nv 1 1 0\nv 0 1 0\nvt 0 0\nvt 1 0\nvt 1 1\nvn 0 0 1\n"
WHOLE = (
    b"mtllib a.mtl\no quay\n" + SQUARE.encode() + b"usemtl deck\ns 1\nf 1/1/1 2/2/1 3/3/1\nf -4//1 \\\n -2//1 -1//1\n"
)
LIBRARY = b"newmtl deck\nmap_Kd -s 2 2 1 wood.png\nnorm -bm 0.5 wood.png\n"
PNG = write_png(np.zeros((2, 2, 3), np.uint8)).tobytes()


def read(folder, content, **beside):
    """Load an OBJ file of these bytes with files beside it."""
    for name, other in beside.items():
        (folder / name.replace("_", ".")).write_bytes(other)
    (folder / "pier.obj").write_bytes(content if isinstance(content, bytes) else content.encode())
    return load(InputFile("pier.obj", folder))


@pytest.mark.parametrize(
    ("content", "told"),
    [
        ("", "pier.obj: the file is empty"),
        ("# only words\n", "pier.obj: there are no faces in it"),
        ("v 0 0 0\nv 1 0 0\nl 1 2\n", "pier.obj: there are lines or points, but no faces in it"),
        (SQUARE + "f 1 2\n", "there are lines or points, but no faces"),
        (SQUARE + "f 1 2 5\n", "pier.obj: line 9: point index 5, but the file has 4"),
        (SQUARE + "f 1 2 0\n", "line 9: point index 0, but the file has 4"),
        (SQUARE + "f 1 2 -5\n", "line 9: point index -5, but the file has 4"),
        (SQUARE + "f 1/1 2/2 3/4\n", "line 9: UV index 4, but the file has 3"),
        (SQUARE + "f 1//1 2//1 3//2\n", "line 9: normal index 2, but the file has 1"),
        (SQUARE + "f 1 2 99999999999999999999999\n", "line 9: point index"),
        ("v 0 0 nan\n" + SQUARE + "f 1 2 3\n", "line 1: 'v 0 0 nan' is no finite position"),
        (SQUARE + "\n\nv 1e999 0 0\nf 1 2 3\n", "line 11: 'v 1e999 0 0' is no finite position"),
        ("v 0 0 -1.#IND\n" + SQUARE + "f 1 2 3\n", "line 1: 'v 0 0 -1.#IND' is no finite position"),
        ("v 0 0\n" + SQUARE + "f 1 2 3\n", "line 1: 'v 0 0' can't be read"),
        (SQUARE + "f 1 2 three\n", "line 9: 'f 1 2 three' can't be read"),
        (SQUARE + "f 1/1/1/1 2 3\n", "line 9: 'f 1/1/1/1 2 3' can't be read"),
        ("v 0 0 0\rv 1 0 0\rv 1 1 x\rf 1 2 3\r", "line 3: 'v 1 1 x' can't be read"),
    ],
)
def test_what_cannot_be_read_is_told_with_its_line(tmp_path, content, told):
    with pytest.raises(InputError) as error:
        read(tmp_path, content)

    assert told in str(error.value) and str(error.value).startswith("pier.obj: ")


def test_frames_are_refused_for_want_of_uvs(tmp_path):
    with pytest.raises(InputError, match=r'pier\.obj: part "quay": no UVs'):
        frames(read(tmp_path, "o quay\nv 0 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 3\n"))


def test_uvs_and_normals_that_are_not_finite_are_replaced_and_noted(tmp_path):
    text = SQUARE + "vt nan 0\nvn nan 0 0\nf 1/1/1 2/4/1 3/3/2\n"

    asset = read(tmp_path, text)
    part = asset.parts[0]

    assert_array_equal(part.uvs[0].values[part.uvs[0].index], [[0, 0], [0, 0], [1, 1]])
    assert_array_equal(part.normals.values[part.normals.index], [[0, 0, 1]] * 3)
    assert len(asset.notes) == 2


@pytest.mark.parametrize("image", [b"", b"not an image at all, but words", PNG[:20], b"<svg></svg>"])
def test_an_image_that_is_none_is_told_with_its_material(tmp_path, image):
    with pytest.raises(InputError, match=r'pier\.obj: material "deck", image wood\.png: '):
        read(tmp_path, WHOLE, a_mtl=LIBRARY, wood_png=image)


def test_a_library_of_junk_does_no_harm(tmp_path):
    junk = np.random.default_rng(0).integers(0, 256, 4096, np.uint8).tobytes()

    assert read(tmp_path, WHOLE, a_mtl=junk).parts[0].face_count == 2


@pytest.mark.parametrize("name", ["x" * 5000, "a\0b.png", "../" * 2000 + "x.png", ".", "/", "C:\\", "-bm", "-s 1 2 3"])
def test_names_that_no_file_can_have_are_only_noted(tmp_path, name):
    library = f"newmtl deck\nmap_Kd {name}\n".encode()

    asset = read(tmp_path, WHOLE, a_mtl=library)

    assert asset.parts[0].face_count == 2
    assert all(len(note) < 200 for note in asset.notes)


def test_names_of_any_bytes_are_read(tmp_path):
    content = WHOLE.replace(b"quay", b"\xff\xfe\x80 qu\xe9").replace(b"deck", b"d\xe9ck")

    asset = read(tmp_path, content, a_mtl=LIBRARY.replace(b"deck", b"d\xe9ck"), wood_png=PNG)

    assert asset.parts[0].name == "\xff\xfe\x80 qu\xe9" and len(asset.materials[0].maps) == 2


def test_a_polygon_of_a_hundred_thousand_corners_is_solved(tmp_path):
    count = 100_000
    turn = np.linspace(0, 2 * np.pi, count, endpoint=False)
    points = np.stack([np.cos(turn), np.sin(turn)], axis=1) * (1 + 0.1 * np.cos(5 * turn))[:, None]
    rows = "".join(f"v {x} {y} 0\nvt {x} {y}\n" for x, y in points.tolist())

    (part,) = frames(read(tmp_path, rows + "f" + "".join(f" {k}/{k}" for k in range(1, count + 1)) + "\n")).parts

    assert part.corner_count == count
    assert np.abs(part.frames.tangents - (1, 0, 0)).max() < 1e-4


FLAT = "vt 0 0\nvt 1 0\nvt 1 1\nf 1/1 2/2 3/3\n"


@pytest.mark.parametrize(
    "text",
    [
        "v 0 0 0\nv 1 0 0\nv 1 1 0\nv 3e38 0 0\nv 3e38 1 0\nv 2e38 5 0\n" + FLAT + "f 4/1 5/2 6/3\n",
        "v 1e38 0 0\nv 1e38 1 0\nv 1e38 2 3\n" + FLAT,
        "v 0 0 0\nv 1 0 0\nv 2 0 0\n" + FLAT,
        "v 0 0 0\nv 0 0 0\nv 0 0 0\n" + FLAT,
    ],
    ids=["some far away", "all far away", "in a line", "in one place"],
)
def test_faces_without_area_or_beyond_all_measure_are_checked(tmp_path, text):
    asset = read(tmp_path, text)

    assert check(asset).facts["faces"] == asset.parts[0].face_count


def test_a_line_without_end_is_read(tmp_path):
    padded = SQUARE + "f 1 2 3" + " " * 3_000_000 + "\nf 1 3 4" + " \\\n" * 300_000 + "\n"

    assert read(tmp_path, padded).parts[0].face_count == 2


def test_large_files_are_the_same_in_chunks_as_in_one(tmp_path, monkeypatch):
    from tangentry.nodes.formats import obj_scan

    rng = np.random.default_rng(0)
    lines = ["v 0 0 0\nvt 0 0\nvn 0 0 1"]
    for k in range(2000):
        lines += [f"v {k} {k} 0.5", f"vt {k} 0", "vn 0 1 0", f"usemtl m{k % 3}"] * int(rng.integers(0, 2))
        lines += ["f -1/-1/-1 \\", " 1/1/1 1//1", "f 1 1", "l 1 1"][: 3 + k % 2]
    file = InputFile("pier.obj", tmp_path)
    (tmp_path / "pier.obj").write_text("\n".join(lines))
    found = []
    for size in (1 << 20, 97):
        monkeypatch.setattr(obj_scan, "FEWEST_BYTES", size)
        monkeypatch.setattr(obj_scan, "core_count", lambda: 25)
        found.append(obj_scan.read_statements(file))

    for one, other in zip(*found, strict=True):
        assert_array_equal(one, other) if isinstance(one, np.ndarray) else None
        assert isinstance(one, np.ndarray) or one == other


@settings(max_examples=200, deadline=None)
@given(st.data())
def test_any_damage_ends_in_an_asset_or_a_clear_error(tmp_path_factory, data):
    folder = tmp_path_factory.mktemp("damaged")
    files = {"obj": bytearray(WHOLE), "mtl": bytearray(LIBRARY), "png": bytearray(PNG)}
    chosen = files[data.draw(st.sampled_from(sorted(files)))]
    at = data.draw(st.integers(0, len(chosen)))
    put = data.draw(
        st.sampled_from([b"nan", b"-", b"0", b"/", b"\\", b"\\\n", b"\0", b"\xff", b"9" * 30, b"f ", b"v "])
    )
    chosen[at : at + data.draw(st.sampled_from([0, 1, len(put), len(chosen)]))] = put

    try:
        asset = read(folder, bytes(files["obj"]), a_mtl=bytes(files["mtl"]), wood_png=bytes(files["png"]))
    except InputError as error:
        assert str(error).startswith("pier.obj: ")
    else:
        assert all(
            stream.index.max() < len(stream.values) for part in asset.parts for stream in (part.points, *part.uvs)
        )
