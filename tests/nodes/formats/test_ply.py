"""PLY files in all three encodings, read and written."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from shapes import asset, box_part, grid_part, sphere_part, torus_part
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.formats.ply import read_ply
from tangentry.nodes.formats.ply_scan import TYPES
from tangentry.nodes.formats.ply_writing import write_ply
from tangentry.nodes.formats.vertices import vertices_of
from tangentry.nodes.frames import frames
from tangentry.nodes.model import Asset, Image, MapUse, Material, Stream
from tangentry.pipeline.flow import InputFile

ENCODINGS = ("ascii", "binary_little_endian", "binary_big_endian")
CORNERS = [(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0), (0.5, 0.5, 1)]
FACES = [[0, 1, 2, 3], [0, 4, 1], [0, 1, 4, 2, 3]]
XYZ = [("float", "x"), ("float", "y"), ("float", "z")]
LIST = [("list uchar int", "vertex_indices")]


@pytest.fixture
def read(tmp_path):
    """read(content, ...) -> the asset of a PLY file of these bytes."""

    def written(content):
        (tmp_path / "buoy.ply").write_bytes(content)
        return read_ply(InputFile("buoy.ply", tmp_path))

    return written


def ply(elements, encoding="ascii", comments=()):
    """A file of elements, (name, properties, rows) each; a list property's value in a row is a list."""
    head = ["ply", f"format {encoding} 1.0", *(f"comment {one}" for one in comments)]
    body = b""
    for name, properties, rows in elements:
        head += [f"element {name} {len(rows)}", *(f"property {kind} {one}" for kind, one in properties)]
        for row in rows:
            words = []
            for (kind, _), value in zip(properties, row, strict=True):
                *_, length, kind = ["", *kind.split()]
                words += [(length, len(value))] if isinstance(value, list) else []
                words += [(kind, one) for one in (value if isinstance(value, list) else [value])]
            body += encoded(words, encoding)
    return "\n".join([*head, "end_header", ""]).encode() + body


def encoded(words, encoding):
    """A row of (type, value) words."""
    if encoding == "ascii":
        return (" ".join(f"{value:.9g}" for _, value in words) + "\n").encode()
    order = "<" if "little" in encoding else ">"
    return b"".join(np.array(value, order + TYPES[kind]).tobytes() for kind, value in words)


def at(stream):
    """The values of a stream at every corner."""
    return stream.values[stream.index]


@pytest.mark.parametrize("encoding", ENCODINGS)
def test_polygons_of_every_size_are_read(read, encoding):
    part = read(ply([("vertex", XYZ, CORNERS), ("face", LIST, [[face] for face in FACES])], encoding)).parts[0]

    assert_array_equal(np.diff(part.starts), [len(face) for face in FACES])
    assert_array_equal(at(part.points), [CORNERS[k] for face in FACES for k in face])


@pytest.mark.parametrize("encoding", ENCODINGS)
@pytest.mark.parametrize(
    "kind", ["char", "uchar", "short", "ushort", "int", "uint", "float", "double", "int8", "float64"]
)
def test_every_type_is_read(read, encoding, kind):
    points = [(0, 0, 0), (100, 0, 0), (0, 100, 0)]
    points[1] = (100 if kind.startswith("u") else -100, 0, 0)
    properties = [(kind, axis) for axis in "xyz"]
    part = read(
        ply(
            [("vertex", properties, points), ("face", [(f"list {kind} {kind}", "vertex_index")], [[[0, 1, 2]]])],
            encoding,
        )
    ).parts[0]

    assert_array_equal(at(part.points), points)


@pytest.mark.parametrize("encoding", ENCODINGS)
def test_elements_and_properties_in_any_order_are_read(read, encoding):
    vertex = (
        "vertex",
        [("uchar", "flag"), XYZ[2], ("list uchar short", "near"), XYZ[0], XYZ[1]],
        [(7, p[2], [1] * k, p[0], p[1]) for k, p in enumerate(CORNERS)],
    )
    face = ("face", [("float", "area"), *LIST], [[1.5, [0, 1, 2]], [2.5, [0, 2, 3, 4]]])
    part = read(ply([("shelf", [("int", "row")], [[1], [2]]), face, vertex], encoding)).parts[0]

    assert_array_equal(at(part.points), [CORNERS[k] for k in (0, 1, 2, 0, 2, 3, 4)])


def test_what_is_passed_over_is_noted(read):
    vertex = ("vertex", [*XYZ, ("float", "wetness")], [(*p, 0.5) for p in CORNERS])
    notes = read(ply([vertex, ("edge", [("int", "a")], [[1]]), ("face", LIST, [[[0, 1, 2]], [[0, 1]]])])).notes

    assert set(notes) == {
        "element vertex: wetness passed over",
        "element edge is passed over",
        "1 faces of fewer than three corners passed over",
    }


@pytest.mark.parametrize("names", [("s", "t"), ("u", "v"), ("texture_u", "texture_v")])
def test_uvs_per_vertex_are_read_under_every_name(read, names):
    vertex = ("vertex", [*XYZ, *(("float", one) for one in names)], [(*p, p[0], p[1]) for p in CORNERS])
    asset = read(ply([vertex, ("face", LIST, [[face] for face in FACES])]))

    assert_array_equal(at(asset.parts[0].uvs[0]), at(asset.parts[0].points)[:, :2])
    assert not asset.v_down


@pytest.mark.parametrize("encoding", ENCODINGS)
def test_uvs_per_corner_are_read_and_equal_ones_shared(read, encoding):
    properties = [*LIST, ("list uchar float", "texcoord")]
    faces = [[face, [0.25 * k + 0.5 * j for k in range(len(face)) for j in (0, 1)]] for face in FACES]
    part = read(ply([("vertex", XYZ, CORNERS), ("face", properties, faces)], encoding)).parts[0]

    assert_array_equal(at(part.uvs[0]).ravel(), [value for _, uvs in faces for value in uvs])
    assert len(part.uvs[0].values) == 5


def test_faces_without_uvs_among_others_are_noted(read):
    faces = [[FACES[0], [0.5] * 8], [FACES[1], []]]
    asset = read(ply([("vertex", XYZ, CORNERS), ("face", [*LIST, ("list uchar float", "texcoord")], faces)]))

    assert_array_equal(at(asset.parts[0].uvs[0]), [[0.5, 0.5]] * 4 + [[0, 0]] * 3)
    assert any("3 corners" in note and "no UVs" in note for note in asset.notes)


@pytest.mark.parametrize("encoding", ENCODINGS)
@pytest.mark.parametrize(("kind", "most"), [("uchar", 255), ("float", 1)])
@pytest.mark.parametrize("per", ["vertex", "face"])
def test_colours_of_vertices_or_faces_are_between_nought_and_one(read, encoding, kind, most, per):
    colour = [(kind, name) for name in ("red", "green", "blue")]
    vertex = ("vertex", XYZ + colour, [(*p, most, 0, 0) for p in CORNERS])
    face = ("face", LIST + colour, [[FACES[0], most, 0, 0]])
    plain = {"vertex": ("vertex", XYZ, CORNERS), "face": ("face", LIST, [[FACES[0]]])}
    chosen = [vertex, plain["face"]] if per == "vertex" else [plain["vertex"], face]

    assert_array_equal(at(read(ply(chosen, encoding)).parts[0].colours[0]), [[1, 0, 0]] * 4)


def test_normals_come_out_unit_and_lost_ones_are_those_of_the_face(read):
    normals = [(0, 0, 2), (0, 3, 4), (0, 0, 0), (0, 0, 1)]
    vertex = (
        "vertex",
        [*XYZ, *(("float", one) for one in ("nx", "ny", "nz"))],
        [(*p, *n) for p, n in zip(CORNERS, normals, strict=False)],
    )
    asset = read(ply([vertex, ("face", LIST, [[[0, 1, 2, 3]]])]))

    assert_allclose(at(asset.parts[0].normals), [[0, 0, 1], [0, 0.6, 0.8], [0, 0, 1], [0, 0, 1]], atol=1e-7)
    assert "1 corners" in asset.notes[0]


@pytest.mark.parametrize("encoding", ENCODINGS)
def test_strips_become_triangles_wound_alike(read, encoding):
    strip = [0, 1, 3, 2, -1, 0, 4, 1, 1, 2]
    elements = [("vertex", XYZ, CORNERS), ("tristrips", [("list int int", "vertex_indices")], [[strip], [[2, 3, 4]]])]
    part = read(ply(elements, encoding)).parts[0]

    wanted = [[0, 1, 3], [3, 1, 2], [0, 4, 1], [2, 3, 4]]
    assert_array_equal(at(part.points).reshape(-1, 3, 3), [[CORNERS[k] for k in face] for face in wanted])


def test_images_named_in_comments_are_found(read, tmp_path):
    (tmp_path / "wet wood.png").write_bytes(picture(9).content.tobytes())
    comments = ["TextureFile skins\\wet wood.png", "TextureFile gone.png"]
    asset = read(ply([("vertex", XYZ, CORNERS), ("face", LIST, [[FACES[0]]])], comments=comments))

    assert [len(image.content) > 0 for image in asset.images] == [True, False]
    assert [use.role for use in asset.materials[0].maps] == ["colour"]
    assert asset.notes == ("image gone.png is not there",)


def picture(grey, name="wood.png"):
    """An image of one texel."""
    return Image(name, "image/png", np.asarray(write_png(np.full((1, 1, 3), grey, np.uint8))))


def back(asset, tmp_path):
    """The asset read from the files written for it."""
    for file in write_ply(asset, "buoy"):
        (tmp_path / file.name).write_bytes(file.content.tobytes())
    return read_ply(InputFile("buoy.ply", tmp_path))


def test_positions_normals_uvs_and_frames_come_back(tmp_path):
    framed = frames(asset(torus_part(6, 4), sphere_part(6, 4)), where="all")
    vertices = [vertices_of(part) for part in framed.parts]

    (part,) = back(framed, tmp_path).parts

    used = [one.triangles for one in vertices]
    for name, stream in (("points", part.points), ("normals", part.normals)):
        wanted = np.concatenate([getattr(one, name)[t] for one, t in zip(vertices, used, strict=True)])
        assert_allclose(at(stream).reshape(-1, 3, 3), wanted, atol=1e-6)
    tangents = np.concatenate([one.tangents[t] for one, t in zip(vertices, used, strict=True)]).reshape(-1, 4)
    assert_array_equal(part.frames.tangents[part.frames.index], tangents[:, :3])
    assert_array_equal(part.frames.sides[part.frames.index], tangents[:, 3])
    assert part.frames.method == "stored"


def test_one_vertex_is_written_for_each_distinct_corner(tmp_path):
    part = box_part()

    assert len(back(asset(part), tmp_path).parts[0].points.values) == 24
    bare = replace(part, normals=None, uvs=())
    assert len(back(asset(bare), tmp_path).parts[0].points.values) == 8


def test_further_uv_sets_and_v_come_back_upward(tmp_path):
    part = grid_part(2, 2)
    two = replace(part, uvs=(part.uvs[0], Stream(part.uvs[0].values * np.float32(0.5), part.uvs[0].index)))

    after = back(replace(asset(two), v_down=True), tmp_path).parts[0]

    vertices = vertices_of(two)
    for k, scale in enumerate((1, 0.5)):
        wanted = vertices.uvs[0][vertices.triangles.ravel()] * scale
        assert_allclose(at(after.uvs[k]), wanted * (1, -1) + (0, 1), atol=1e-7)


@pytest.mark.parametrize("step", [255, 3])
def test_colours_come_back_as_they_were(tmp_path, step):
    values = (np.random.default_rng(0).integers(0, step + 1, (9, 4)) / step).astype(np.float32)
    part = grid_part(2, 2)
    coloured = replace(part, colours=(Stream(values, part.points.index),))

    after = back(asset(coloured), tmp_path).parts[0]

    assert_array_equal(at(after.colours[0]), values[part.points.index[triangulated(part)]])


def triangulated(part):
    """The corners of the triangles of a part, in order."""
    from tangentry.nodes.geometry.triangles import triangulate

    return triangulate(part)[0].ravel()


def test_each_material_keeps_its_image(tmp_path):
    images = (picture(10), picture(20), picture(30, "height.png"))
    materials = (
        Material("deck", (MapUse("height", 2), MapUse("colour", 1))),
        Material("rail", (MapUse("colour", 0),)),
        Material("bare"),
    )
    parts = tuple(replace(grid_part(1, 1, 1.0 + k), material=k) for k in range(3))

    after = back(Asset("pier", parts, materials, images), tmp_path)

    shown = {
        float(part.points.values.max()): after.images[after.materials[part.material].maps[0].image].content.tobytes()
        for part in after.parts
        if part.material >= 0
    }
    assert shown == {1.0: images[1].content.tobytes(), 2.0: images[0].content.tobytes()}
    assert [part.material for part in after.parts] == [-1, 0, 1]


def test_what_only_some_parts_have_is_written_for_all(tmp_path):
    framed = frames(asset(grid_part(1, 1)), where="all").parts[0]
    coloured = replace(framed, colours=(Stream(np.full((1, 3), 0.25, np.float32), np.zeros(4, np.int32)),))
    bare = replace(grid_part(1, 1, 2.0), normals=None, uvs=())

    after = back(asset(coloured, bare), tmp_path)
    (part,) = after.parts

    assert_array_equal(at(part.normals), [[0, 0, 1]] * 12)
    assert_array_equal(at(part.uvs[0])[6:], [[0, 0]] * 6)
    assert_array_equal(at(part.colours[0]), [[0.25] * 3 + [1]] * 6 + [[1] * 4] * 6)
    assert part.frames is None and "not every vertex has a tangent" in after.notes[-1]


@pytest.mark.parametrize(("bare", "materials"), [(True, [-1, 0]), (False, [0])])
def test_a_lone_image_covers_only_what_shows_it(tmp_path, bare, materials):
    parts = tuple(replace(grid_part(1, 1), material=k) for k in ((0, -1) if bare else (0, 0)))
    before = Asset("pier", parts, (Material("deck", (MapUse("colour", 0),)), Material("unused")), (picture(1),))

    assert [part.material for part in back(before, tmp_path).parts] == materials


def test_the_same_asset_makes_the_same_bytes():
    one, other = (write_ply(asset(torus_part(6, 4)), "a")[0].content for _ in range(2))

    assert_array_equal(one, other)


# Real files; the figures are those of the samples' manifest


@pytest.mark.parametrize(
    ("name", "points", "faces", "triangles"),
    [
        ("suzanne", 1966, 500, None),
        ("cube_blender_uv", 24, 6, 12),
        ("BoxTextured", 24, 12, 12),
        ("fuze", 502, 1000, 1000),
    ],
)
def test_real_files_keep_their_counts(samples, name, points, faces, triangles):
    (part,) = read_ply(InputFile(next(samples.rglob(f"{name}.ply")))).parts

    assert (len(part.points.values), part.face_count) == (points, faces)
    assert len(part.uvs) == 1 and (triangles is None or len(triangulated(part)) == 3 * triangles)


def test_a_real_mesh_is_the_same_from_ply_as_from_obj(samples):
    from tangentry.nodes.formats.obj import read_obj

    one = read_obj(InputFile(next(samples.rglob("fuze.obj")))).parts[0]
    other = read_ply(InputFile(next(samples.rglob("fuze.ply")))).parts[0]

    assert_allclose(at(other.points), at(one.points), atol=1e-5)
    assert_allclose(at(other.uvs[0]), at(one.uvs[0]), atol=1e-5)
