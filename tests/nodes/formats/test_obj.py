"""OBJ files as they are read: index streams apart, polygons whole, and everything that is named beside them."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose, assert_array_equal
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.formats.obj import read_obj
from tangentry.nodes.normals import normals
from tangentry.pipeline.flow import InputFile

SQUARE = "v 0 0 0\nv 1 0 0\nv 1 1 0\nv 0 1 0\n"
PYRAMID = SQUARE + "v .5 .5 1\n"


@pytest.fixture
def read(tmp_path):
    """read(text, name=content, ...) -> (asset, file): an OBJ file with files beside it."""

    def written(text, **beside):
        for name, content in beside.items():
            path = tmp_path / name.replace("__", "/").replace("_dot_", ".")
            path.parent.mkdir(exist_ok=True)
            path.write_bytes(content if isinstance(content, bytes) else content.encode())
        (tmp_path / "pier.obj").write_bytes(text if isinstance(text, bytes) else text.encode())
        file = InputFile("pier.obj", tmp_path)
        return read_obj(file), file

    return written


def png():
    """A picture of one grey texel."""
    return write_png(np.full((1, 1, 3), 128, np.uint8)).tobytes()


def at(stream):
    """The values of a stream at every corner."""
    return stream.values[stream.index].tolist()


def test_points_uvs_and_normals_keep_indices_of_their_own(read):
    asset, _ = read(SQUARE + "vt 0 0\nvt 1 0\nvt 1 1\nvn 0 0 1\nf 1/1/1 2/2/1 3/3/1\nf 1/3/1 3/1/1 4/2/1\n")
    part = asset.parts[0]

    assert [len(stream.values) for stream in (part.points, part.uvs[0], part.normals)] == [4, 3, 1]
    assert_array_equal(part.points.index, [0, 1, 2, 0, 2, 3])
    assert_array_equal(part.uvs[0].index, [0, 1, 2, 2, 0, 1])
    assert_array_equal(part.normals.index, 0)
    assert not asset.v_down


def test_polygons_stay_polygons(read):
    part = read(PYRAMID + "f 4 3 2 1\nf 1 2 5\nf 1 2 3 4 5\n")[0].parts[0]

    assert_array_equal(np.diff(part.starts), [4, 3, 5])


@pytest.mark.parametrize(("corner", "uvs", "normals"), [("1", 0, 0), ("1/1", 1, 0), ("1//1", 0, 1), ("1/1/1", 1, 1)])
def test_every_way_of_writing_a_corner_is_read(read, corner, uvs, normals):
    words = " ".join(corner.replace("1", str(k)) for k in (1, 2, 3))
    part = read(SQUARE + "vt 0 0\nvt 1 0\nvt 1 1\n" + "vn 0 0 1\n" * 3 + f"f {words}\n")[0].parts[0]

    assert (len(part.uvs), int(part.normals is not None)) == (uvs, normals)


def test_negative_indices_count_back_from_the_statement_before(read):
    text = "v 9 9 9\n" + SQUARE + "vt 0 0\nvt 1 0\nvt 1 1\nf -4/-3 -3/-2 -2/-1\nv 5 5 5\nf -1/1 -5/2 -4/3\n"
    part = read(text)[0].parts[0]

    assert at(part.points) == [[0, 0, 0], [1, 0, 0], [1, 1, 0], [5, 5, 5], [0, 0, 0], [1, 0, 0]]
    assert at(part.uvs[0]) == [[0, 0], [1, 0], [1, 1]] * 2


@pytest.mark.parametrize("end", ["\\\n", "\\\r\n", " \\\n\t"])
def test_a_backslash_continues_the_line(read, end):
    part = read(SQUARE + f"f 1 2 {end} 3 {end} 4\nv 0 {end} 0 {end} 7\nf 1 2 5\n")[0].parts[0]

    assert_array_equal(np.diff(part.starts), [4, 3])
    assert at(part.points)[-1] == [0, 0, 7]


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
def test_any_line_end_is_read(read, end):
    part = read((SQUARE + "f 1 2 3 4").replace("\n", end))[0].parts[0]

    assert at(part.points) == [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]]


@pytest.mark.parametrize(
    ("written", "value"),
    [("-0.5", -0.5), (".25", 0.25), ("3.", 3.0), ("1e-3", 1e-3), ("+2.5E+2", 250.0), ("0.1000000000000000055", 0.1)],
)
def test_numbers_round_as_everywhere(read, written, value):
    part = read(f"v {written} 0 0\nv 1 0 0\nv 0 1 0\nf 1 2 3\n")[0].parts[0]

    assert part.points.values[0, 0] == np.float32(value)


def test_objects_and_materials_divide_parts_and_groups_do_not(read):
    quay = "o quay\nusemtl stone\ng a\nf 1 2 3\ng b\nf 1 3 4\nusemtl rope\nf 1 2 5\n"
    asset, _ = read(PYRAMID + quay + "o pile\nf 2 3 5\nusemtl stone\nf 3 4 5\n")

    shown = [(part.name, asset.materials[part.material].name, part.face_count) for part in asset.parts]
    assert shown == [("quay", "stone", 2), ("quay", "rope", 1), ("pile", "rope", 1), ("pile", "stone", 1)]


def test_faces_before_any_object_are_named_after_the_file(read):
    parts = read(PYRAMID + "g deck\nf 1 2 3\no quay\nf 1 3 4\no\nf 1 2 5\n")[0].parts

    assert [(part.name, part.face_count) for part in parts] == [("pier", 2), ("quay", 1)]


@pytest.mark.parametrize(
    ("written", "group"), [("2", 2), ("off", 0), ("3 # deck", 3), ("\u00b2", 0), ("-1", 0), ("", 0)]
)
def test_smoothing_groups_are_numbers_or_off(read, written, group):
    assert_array_equal(read(SQUARE + f"s {written}\nf 1 2 3\n")[0].parts[0].smoothing, [group])


def test_each_part_holds_only_the_rows_it_uses(read):
    parts = read(PYRAMID + "usemtl a\nf 1 2 3\nusemtl b\nf 3 4 5\n")[0].parts

    assert at(parts[1].points) == [[1, 1, 0], [0, 1, 0], [0.5, 0.5, 1]]
    assert [len(part.points.values) for part in parts] == [3, 3]


def test_smoothing_groups_shape_the_normals(read):
    roof = "v 0 0 0\nv 0 0 1\nv 1 1 0\nv 1 1 1\nv 2 0 0\nv 2 0 1\n"
    left, right = "f 1 2 4 3\n", "f 3 4 6 5\n"
    counts = []
    for text in ("s 1\n" + left + right, "s 1\n" + left + "s 2\n" + right, "s off\n" + left + right):
        built = normals(read(roof + text)[0], method="smoothing").parts[0]
        counts.append(len(np.unique(np.round(built.normals.values[built.normals.index], 5), axis=0)))

    assert counts == [3, 2, 2]  # both eaves and the ridge between; a hard ridge; all faceted


def test_a_file_without_smoothing_groups_has_none(read):
    assert read(SQUARE + "f 1 2 3\n")[0].parts[0].smoothing is None
    assert_array_equal(read(SQUARE + "f 1 2 3\ns 4\nf 1 3 4\n")[0].parts[0].smoothing, [0, 4])


@pytest.mark.parametrize("weight", ["", " 1.0"])
def test_colours_behind_positions_are_read(read, weight):
    part = read(f"v 0 0 0{weight} 1 0 0\nv 1 0 0{weight} 0 1 0\nv 1 1 0{weight} 0 0 .5\nf 1 2 3\n")[0].parts[0]

    assert at(part.colours[0]) == [[1, 0, 0], [0, 1, 0], [0, 0, 0.5]]


def test_faces_without_uvs_among_others_are_noted(read):
    asset, _ = read(SQUARE + "vt 0 0\nvt 1 0\nvt 1 1\nf 1/1 2/2 3/3\nf 1 3 4\n")

    assert at(asset.parts[0].uvs[0])[3:] == [[0, 0]] * 3
    assert "3 corners" in asset.notes[0] and "no UVs" in asset.notes[0]


def test_normals_come_out_unit_and_missing_ones_are_those_of_the_face(read):
    asset, _ = read(SQUARE + "vn 0 0 2\nvn 0 3 4\nvn 0 0 0\nf 1//1 2//2 3//3\nf 1 3 4\n")

    assert_allclose(at(asset.parts[0].normals), [[0, 0, 1], [0, 0.6, 0.8]] + [[0, 0, 1]] * 4, atol=1e-7)
    assert "4 corners" in asset.notes[0]


def test_lines_and_points_are_passed_over_and_counted(read):
    asset, _ = read(SQUARE + "l 1 2 3\np 1\nf 1 2 3\n")

    assert asset.parts[0].face_count == 1 and asset.notes == ("2 lines, curves or other statements passed over",)


@pytest.mark.parametrize(
    ("statement", "role", "strength"),
    [
        ("map_Kd -s 2 2 1 wood.png", "colour", 1.0),
        ("norm wood.png", "normal", 1.0),
        ("map_Kn -bm 0.5 wood.png", "normal", 0.5),
        ("map_bump -bm 2 wood.png", "height", 2.0),
        ("bump\twood.png", "height", 1.0),
        ("MAP_KE -clamp on -o 0 0 wood.png", "emissive", 1.0),
        ("map_Pr -imfchan r wood.png", "roughness", 1.0),
    ],
)
def test_maps_of_materials_are_found_behind_their_options(read, statement, role, strength):
    text = "mtllib pier.mtl\n" + SQUARE + "usemtl deck\nf 1 2 3\n"
    asset, _ = read(text, pier_dot_mtl=f"newmtl deck\n{statement}\n", wood_dot_png=png())

    (use,) = asset.materials[0].maps
    assert (use.role, use.strength, asset.images[use.image].name) == (role, strength, "wood.png")
    assert asset.images[use.image].content.tobytes() == png()


def test_what_is_read_beside_the_file_is_reported(read):
    text = "mtllib pier.mtl\n" + SQUARE + "usemtl deck\nf 1 2 3\n"
    _, file = read(text, pier_dot_mtl="newmtl deck\nmap_Kd skins/wood.png\nnorm gone.png\n", skins__wood_dot_png=png())

    assert {name for name, content in file.reads.items() if content is not None} == {
        "pier.obj",
        "pier.mtl",
        "skins/wood.png",
    }
    assert {name for name, content in file.reads.items() if content is None} == {"gone.png"}


def test_libraries_and_images_that_are_not_there_are_noted(read):
    text = "mtllib pier.mtl lost.mtl\n" + SQUARE + "usemtl deck\nf 1 2 3\n"
    asset, _ = read(text, pier_dot_mtl="newmtl deck\nmap_Kd C:\\skins\\wood.png\n")

    assert set(asset.notes) == {"material library lost.mtl is not there", "image C:\\skins\\wood.png is not there"}
    assert asset.images[0].name == "wood.png" and not asset.images[0].content.size


def test_names_with_spaces_are_one_name(read):
    text = "mtllib the pier.mtl\n" + SQUARE + "usemtl old deck\nf 1 2 3\n"
    asset, _ = read(text, **{"the pier_dot_mtl": "newmtl old deck\nmap_Kd -bm 1 a wood.png\n", "a wood_dot_png": png()})

    assert asset.materials[0].name == "old deck" and asset.images[0].content.size


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "latin-1"])
def test_names_are_read_as_utf_8_or_latin_1(read, encoding):
    text = "mtllib pier.mtl\n" + SQUARE + "usemtl bèche\no jetée\nf 1 2 3\n"
    library = "newmtl bèche\nmap_Kd toile_cirée.png\n".encode(encoding)
    asset, _ = read(text.encode(encoding), pier_dot_mtl=library, toile_cirée_dot_png=png())

    assert (asset.parts[0].name, asset.materials[0].name) == ("jetée", "bèche")
    assert asset.images[0].content.size


@pytest.mark.parametrize(
    ("texels", "role"),
    [
        (np.full((8, 8, 3), (128, 128, 255), np.uint8), "normal"),
        (np.full((8, 8, 3), (40000, 30000, 62000), np.uint16), "normal"),
        (np.full((8, 8, 3), 128, np.uint8), "height"),
        (np.full((8, 8, 3), 201, np.uint8), "height"),  # a grey whose code is a unit vector
        (np.full((8, 8, 1), 200, np.uint8), "height"),
        (np.random.default_rng(0).integers(0, 256, (8, 8, 3), np.uint8), "height"),
    ],
)
def test_a_bump_map_of_normals_is_a_normal_map(read, texels, role):
    text = "mtllib pier.mtl\n" + SQUARE + "usemtl deck\nf 1 2 3\n"
    image = write_png(texels).tobytes()
    asset, _ = read(text, pier_dot_mtl="newmtl deck\nmap_Bump -bm 0.5 wood.png\n", wood_dot_png=image)

    (use,) = asset.materials[0].maps
    assert (use.role, use.strength) == (role, 0.5)
    assert len(asset.notes) == (role == "normal")


def test_options_that_place_an_image_are_noted(read):
    text = "mtllib pier.mtl\n" + SQUARE + "usemtl deck\nf 1 2 3\n"
    asset, _ = read(text, pier_dot_mtl="newmtl deck\nmap_Kd -s 2 2 1 wood.png\n", wood_dot_png=png())

    assert asset.notes == ('material "deck": how wood.png is placed (-o, -s, -t) is passed over',)


# Real files; the figures are those of the samples' manifest


@pytest.mark.parametrize(
    ("name", "points", "uvs", "sizes"),
    [
        ("spot/spot_control_mesh.obj", 188, 267, {3: 4, 4: 160, 5: 16}),
        ("spot/spot_quadrangulated.obj", 2930, 3225, {4: 2928}),
        ("spot/spot_triangulated.obj", 2930, 3225, {3: 5856}),
        ("fuze/fuze.obj", 502, 664, {3: 1000}),
        ("nasty/capsule.obj", 5252, 5252, {3: 10200}),
        ("nasty/negative_indices.obj", 8, 13, {4: 6}),  # no face uses one of its 14 UVs
        ("nasty/quadknot.obj", 1440, 3, {4: 1440}),
        ("nasty/singlevn.obj", 4, 4, {3: 2}),
        ("nonmanifold/dodecahedron_poly.obj", 20, 0, {5: 12}),
    ],
)
def test_real_files_keep_their_counts(samples, name, points, uvs, sizes):
    parts = read_obj(InputFile(next(samples.rglob(name)))).parts
    found = np.concatenate([np.diff(part.starts) for part in parts])
    kinds, counts = np.unique(np.minimum(found, 5), return_counts=True)  # 5: any polygon of more corners

    assert dict(zip(kinds.tolist(), counts.tolist(), strict=True)) == sizes
    assert sum(len(part.points.values) for part in parts) == points
    assert sum(len(uv.values) for part in parts for uv in part.uvs) == uvs


def test_a_real_library_and_picture_with_spaces_in_their_names_are_read(samples):
    file = InputFile(next(samples.rglob("fuze.obj")))
    asset = read_obj(file)

    assert sorted(file.reads) == ["fuze uv.jpg", "fuze.obj", "fuze.obj.mtl"]
    assert all(content is not None for content in file.reads.values())
    assert [use.role for use in asset.materials[0].maps] == ["colour"]


def test_real_maps_are_told_apart_by_their_texels(samples):
    from tangentry.nodes.formats.obj_bump import holds_normals

    told = {path.name: holds_normals(np.fromfile(path, np.uint8), path.name) for path in samples.glob("tex/*/*.png")}

    assert {name for name, normals in told.items() if normals} == {name for name in told if "ormal" in name}
    assert len(told) > 5
