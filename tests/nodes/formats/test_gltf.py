"""glTF comes out as it went in; where frames were solved, TANGENT and what it needs, and nothing else."""

from __future__ import annotations

import copy
import json

import numpy as np
import pytest
from gltf_files import CODES, KINDS, PIXEL, Making, data_uri, meaning
from numpy.testing import assert_allclose
from tangentry.nodes.export import export
from tangentry.nodes.formats.gltf_builder import Builder
from tangentry.nodes.frames import frames
from tangentry.nodes.load import load
from tangentry.nodes.model import Map, Sheet
from tangentry.nodes.split import split
from tangentry.nodes.weld import weld
from tangentry.pipeline.errors import InputError

FLAT = [[0, 0, 1]] * 4
SQUARE = [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]]
UVS = [[0, 1], [1, 1], [1, 0], [0, 0]]  # v down


def bumpy(uv_set: int = 0) -> dict:
    return {
        "materials": [{"name": "stone", "normalTexture": {"index": 0, "texCoord": uv_set}}],
        "textures": [{"source": 0, "sampler": 0}],
        "samplers": [{"wrapS": 33071, "extras": {"a": 1}}],
    }


def square(making: Making, points=SQUARE, uvs=UVS, **more) -> dict:
    return {
        "attributes": {
            "POSITION": making.accessor(points, "f4", "VEC3", bounds=True),
            "NORMAL": making.accessor(FLAT, "f4", "VEC3"),
            "TEXCOORD_0": making.accessor(uvs, "f4", "VEC2"),
        },
        "indices": making.accessor([0, 1, 2, 0, 2, 3], "u2", "SCALAR"),
        "material": 0,
        **more,
    }


def with_image(making: Making) -> Making:
    making.json |= bumpy() | {"images": [{"bufferView": making.view(PIXEL), "mimeType": "image/png", "name": "bumps"}]}
    return making


def plain(making: Making) -> None:
    making.json["meshes"] = [{"primitives": [square(making)]}]


def rigged(making: Making) -> None:
    part = square(making)
    part["attributes"] |= {
        "JOINTS_0": making.accessor([[0, 1, 0, 0]] * 4, "u1", "VEC4"),
        "WEIGHTS_0": making.accessor([[255, 0, 0, 0]] * 4, "u1", "VEC4", normalized=True),
        "COLOR_0": making.accessor([[65535, 0, 9, 1]] * 4, "u2", "VEC4", normalized=True),
        "_WEAR": making.accessor([1, 2, 3, 4], "f4", "SCALAR", name="wear"),
    }
    push = making.accessor([[0, 0, 1]] * 4, "f4", "VEC3", bounds=True)
    part["targets"] = [{"POSITION": push, "NORMAL": making.accessor([[0.1, 0, 0]] * 4, "f4", "VEC3")}]
    times = making.accessor([0, 1], "f4", "SCALAR", bounds=True)
    making.json |= {
        "meshes": [{"primitives": [part], "weights": [0.25], "extras": {"targetNames": ["puffed"]}}],
        "nodes": [
            {"mesh": 0, "skin": 0, "name": "ü & bar", "extras": {"deep": [None, True, 1.5e-7, "\u2028"]}},
            {"name": "root", "children": [2], "rotation": [0, 0, 0, 1]},
            {"name": "tip", "camera": 0, "extensions": {"KHR_lights_punctual": {"light": 0}}},
        ],
        "skins": [{"joints": [1, 2], "inverseBindMatrices": making.accessor([np.eye(4)] * 2, "f4", "MAT4")}],
        "animations": [
            {
                "samplers": [{"input": times, "output": making.accessor([[0, 0, 0], [1, 0, 0]], "f4", "VEC3")}],
                "channels": [{"sampler": 0, "target": {"node": 2, "path": "translation"}}],
            }
        ],
        "cameras": [{"type": "perspective", "perspective": {"yfov": 0.7, "znear": 0.01}}],
        "scenes": [{"nodes": [0, 1]}, {"name": "empty"}],
        "scene": 0,
        "extensionsUsed": ["KHR_lights_punctual", "ACME_rust"],
        "extensions": {"KHR_lights_punctual": {"lights": [{"type": "point"}]}, "ACME_rust": {"depth": [1, 2]}},
    }


def sparse(making: Making) -> None:
    part = square(making)
    rows, new = making.view(np.array([1, 3], "<u2").tobytes()), making.view(np.ones((2, 3), "<f4").tobytes())
    base = making.entry(None, 0, np.zeros((4, 3), "<f4"), "VEC3", sparse={
        "count": 2, "indices": {"bufferView": rows, "componentType": 5123}, "values": {"bufferView": new}})  # fmt: skip
    part["targets"] = [{"POSITION": base}]
    making.json["accessors"][base] |= {"min": [0, 0, 0], "max": [1, 1, 1]}
    making.json["meshes"] = [{"primitives": [part], "weights": [0]}]


def interleaved(making: Making) -> None:
    rows = np.concatenate([SQUARE, FLAT, UVS], axis=1).astype("<f4")
    view = making.view(rows.tobytes(), byteStride=32, target=34962)
    limits = {"min": [0, 0, 0], "max": [1, 1, 0]}
    attributes = {
        "POSITION": making.entry(view, 0, rows[:, :3], "VEC3", **limits),
        "NORMAL": making.entry(view, 12, rows[:, 3:6], "VEC3"),
        "TEXCOORD_0": making.entry(view, 24, rows[:, 6:], "VEC2"),
    }
    making.json["meshes"] = [
        {"primitives": [{"attributes": attributes, "indices": making.accessor([0, 1, 2, 0, 2, 3], "u1", "SCALAR")}]}
    ]


def shared(making: Making) -> None:
    one = square(making)
    other = {**copy.deepcopy(one), "indices": making.accessor([0, 2, 3], "u4", "SCALAR"), "material": 0}
    making.json["meshes"] = [{"primitives": [one, other]}]


def quantised(making: Making) -> None:
    points = (np.array(SQUARE) * 32767).astype("<i2")
    part = {
        "attributes": {
            "POSITION": making.accessor(points, "i2", "VEC3", bounds=True, normalized=True),
            "NORMAL": making.accessor(np.array(FLAT) * 127, "i1", "VEC3", normalized=True),
            "TEXCOORD_0": making.accessor(np.array(UVS) * 255, "u1", "VEC2", normalized=True),
        },
        "indices": making.accessor([0, 1, 2, 0, 2, 3], "u1", "SCALAR"),
        "material": 0,
    }
    making.json |= {
        "meshes": [{"primitives": [part]}],
        "extensionsUsed": ["KHR_mesh_quantization"],
        "extensionsRequired": ["KHR_mesh_quantization"],
    }


def mixed(making: Making) -> None:
    strip = {**square(making), "mode": 5, "indices": making.accessor([0, 1, 3, 2], "u2", "SCALAR")}
    fan = {**square(making), "mode": 6, "indices": making.accessor([0, 1, 2, 3], "u2", "SCALAR")}
    dots = {"attributes": {"POSITION": making.accessor(SQUARE, "f4", "VEC3", bounds=True)}, "mode": 0}
    lines = {**copy.deepcopy(dots), "mode": 1}
    making.json["meshes"] = [{"primitives": [dots, strip, lines]}, {"name": "fan", "primitives": [fan]}]


def pictures(making: Making) -> None:
    plain(making)
    making.json["images"] += [
        {"bufferView": making.view(b"\xabKTX 20\xbb\r\n\x1a\nrest"), "mimeType": "image/ktx2"},
        {"bufferView": making.view(b"RIFF\x08\0\0\0WEBPVP8 "), "mimeType": "image/webp", "name": "leaf"},
        {"uri": "not%20there.png", "name": "gone"},
    ]
    making.json["textures"] += [{"extensions": {"KHR_texture_basisu": {"source": 1}}}, {"source": 3}]
    making.json["extensionsUsed"] = ["KHR_texture_basisu"]


def overlapping(making: Making) -> None:
    """Accessors and views over the same bytes, and views with names of their own."""
    part = square(making)
    view = making.json["bufferViews"][making.json["accessors"][part["attributes"]["POSITION"]]["bufferView"]]
    view |= {"name": "points", "extras": {"from": "the quay"}}
    making.json["bufferViews"].append({**view, "byteOffset": view["byteOffset"] + 12, "byteLength": 36, "name": "tail"})
    tail = making.entry(len(making.json["bufferViews"]) - 1, 0, np.zeros((3, 3), "<f4"), "VEC3")
    making.json["accessors"][tail] |= {"min": [0, 0, 0], "max": [1, 1, 0]}
    rest = {"attributes": {"POSITION": tail}, "indices": making.accessor([0, 1, 2], "u1", "SCALAR")}
    making.json["meshes"] = [{"primitives": [part, rest]}]


def apart(making: Making) -> None:
    """Three buffers, the second one with a name."""
    plain(making)
    colours = (np.arange(16).reshape(4, 4) / 16).astype("<f4")
    held = {"byteLength": colours.nbytes, "uri": data_uri(colours.tobytes())}
    making.json["buffers"] = [{}, {"name": "colours", "extras": {"deep": [1]}, **held}, held]
    for number in (1, 2):
        making.json["bufferViews"].append({"buffer": number, "byteLength": colours.nbytes})
        shades = making.entry(len(making.json["bufferViews"]) - 1, 0, colours, "VEC4")
        making.json["meshes"][0]["primitives"][0]["attributes"][f"COLOR_{number - 1}"] = shades


DOCUMENTS = [plain, overlapping, apart, rigged, sparse, interleaved, shared, quantised, mixed, pictures]


@pytest.fixture
def made(tmp_path):
    def make(document, name: str, buffer: str = ""):
        making = with_image(Making())
        document(making)
        (tmp_path / "in").mkdir(exist_ok=True)
        return making.write(tmp_path / "in" / name, buffer)

    return make


@pytest.fixture
def exported(tmp_path):
    def write(asset, name: str, maps=None, **how):
        (tmp_path / "out").mkdir(exist_ok=True)
        for file in export(asset, maps, file=name, **how).files:
            (tmp_path / "out" / file.name).write_bytes(file.content.tobytes())
        return tmp_path / "out" / name

    return write


@pytest.mark.parametrize("suffix", [".glb", ".gltf"])
@pytest.mark.parametrize("brought", [("a.glb", ""), ("a.gltf", ""), ("a.gltf", "two words ü.bin")])
@pytest.mark.parametrize("document", DOCUMENTS)
def test_it_comes_out_as_it_went_in(made, exported, document, brought, suffix):
    path = made(document, *brought)

    assert meaning(exported(load(str(path)), f"b{suffix}")) == meaning(path)


@pytest.mark.parametrize("suffix", [".glb", ".gltf"])
def test_samples_come_out_as_they_went_in(samples, exported, suffix):
    kept = []
    for path in sorted([*samples.rglob("*.glb"), *samples.rglob("*.gltf")]):
        try:
            asset = load(str(path))
        except InputError:
            continue  # refusals are the business of other tests
        if asset.notes and "unpacked" in asset.notes[0]:
            continue  # not to be packed again
        kept.append(path)
        assert meaning(exported(asset, f"b{suffix}")) == meaning(path), path

    assert len(kept) > 8


@pytest.mark.parametrize("document", DOCUMENTS)
def test_exports_are_valid(made, exported, validate, document):
    """The standard's validator, npm gltf-validator: nothing that the input did not have."""
    brought = made(document, "a.glb")
    plainly = exported(load(str(brought)), "b.glb")
    solved = exported(frames(split(load(str(brought))), where="all"), "c.glb")
    reports = validate(brought, plainly, solved)
    told = [
        {one["code"] for one in reports[str(path)]["issues"]["messages"] if one["severity"] < 2}
        for path in (brought, plainly, solved)
    ]

    assert told[1] <= told[0] and told[2] <= told[0]


def without(document: dict, *names: str) -> dict:
    """A document without some attributes of its primitives, and without what they are made of."""
    document = copy.deepcopy(document)
    for mesh in document["meshes"]:
        for primitive in mesh["primitives"]:
            for name in names:
                primitive["attributes"].pop(name, None)
    document.pop("accessors")
    return document


@pytest.mark.parametrize("document", [plain, rigged, shared, quantised, interleaved, pictures])
def test_solving_adds_tangents_and_nothing_else(made, exported, document):
    path = made(document, "a.glb")
    before = meaning(path)

    after = meaning(exported(frames(load(str(path)), where="all"), "b.glb"))

    assert len(after["accessors"]) > len(before["accessors"])
    assert after["accessors"][: len(before["accessors"])] == before["accessors"]
    for mesh in after["meshes"]:
        for primitive in mesh["primitives"]:
            number = primitive["attributes"]["TANGENT"]
            assert after["accessors"][number] | {"values": 0} == {
                "componentType": 5126, "count": 4, "type": "VEC4", "values": 0
            }  # fmt: skip
            for target in primitive.get("targets", []):
                del target["TANGENT"]
    assert without(after, "TANGENT") == without(before)


def values(document: dict, number: int) -> np.ndarray:
    entry = document["accessors"][number]
    return np.frombuffer(entry["values"], KINDS[entry["componentType"]]).reshape(entry["count"], -1)


def test_primitives_that_shared_their_vertices_still_do(made, exported):
    after = meaning(exported(frames(load(str(made(shared, "a.glb")))), "b.glb"))
    one, other = after["meshes"][0]["primitives"]

    assert one["attributes"] == other["attributes"]
    assert len(after["accessors"]) == 6


def test_a_tangent_that_several_shared_leaves_no_data_behind(tmp_path, exported):
    making = with_image(Making())
    one = square(making)
    one["attributes"]["TANGENT"] = making.accessor([[0, 1, 0, 1]] * 4, "f4", "VEC4")
    making.json["meshes"] = [{"primitives": [one, {**one, "indices": making.accessor([0, 2, 3], "u2", "SCALAR")}]}]
    path = exported(frames(load(str(making.write(tmp_path / "a.glb"))), stored="replace"), "b.glb")

    after = meaning(path)

    assert values(after, after["meshes"][0]["primitives"][1]["attributes"]["TANGENT"]).tolist() == [[1, 0, 0, 1]] * 4
    assert path.stat().st_size <= (tmp_path / "a.glb").stat().st_size + 120


def folded(making: Making) -> None:
    """Two squares that share an edge and its vertices, the second one's UVs mirrored: the edge must be split."""
    points = [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [2, 0, 0], [2, 1, 0]]
    uvs = [[0, 1], [1, 1], [1, 0], [0, 0], [0, 1], [0, 0]]
    count = len(points)
    part = {
        "attributes": {
            "POSITION": making.accessor(points, "f4", "VEC3", bounds=True),
            "NORMAL": making.accessor([[0, 0, 1]] * count, "f4", "VEC3"),
            "TEXCOORD_0": making.accessor(uvs, "f4", "VEC2"),
            "TEXCOORD_1": making.accessor(np.arange(2 * count) / 16, "f4", "VEC2"),
            "COLOR_0": making.accessor(np.arange(4 * count), "u1", "VEC4", normalized=True),
            "JOINTS_0": making.accessor(np.arange(4 * count) % 2, "u1", "VEC4"),
            "WEIGHTS_0": making.accessor([[1, 0, 0, 0]] * count, "f4", "VEC4"),
            "_WEAR": making.accessor(np.arange(count), "u2", "SCALAR"),
        },
        "indices": making.accessor([0, 1, 2, 0, 2, 3, 1, 4, 5, 1, 5, 2], "u1", "SCALAR"),
        "material": 0,
        "targets": [
            {
                "POSITION": making.accessor(np.arange(3 * count), "f4", "VEC3", bounds=True),
                "NORMAL": making.accessor([[0.5, 0, 0]] * count, "f4", "VEC3"),
                "TEXCOORD_0": making.accessor(np.arange(2 * count), "f4", "VEC2"),
            }
        ],
    }
    making.json |= {"meshes": [{"primitives": [part], "weights": [0]}]}


def test_a_split_carries_everything_along(made, exported):
    path = made(folded, "a.glb")
    before, after = meaning(path), meaning(exported(frames(split(load(str(path)))), "b.glb"))
    old, new = before["meshes"][0]["primitives"][0], after["meshes"][0]["primitives"][0]
    source = [0, 1, 2, 3, 4, 5, 1, 2]  # the two vertices of the edge come again at the end

    for name, number in old["attributes"].items():
        entry = after["accessors"][new["attributes"][name]]
        assert (values(after, new["attributes"][name]) == values(before, number)[source]).all(), name
        assert entry.get("normalized") == before["accessors"][number].get("normalized")
    for name, number in old["targets"][0].items():
        assert (values(after, new["targets"][0][name]) == values(before, number)[source]).all(), name
    index = values(after, new["indices"])[:, 0]
    assert index.dtype == np.uint8 and (np.array(source)[index] == values(before, old["indices"])[:, 0]).all()
    assert values(after, new["attributes"]["TANGENT"])[:, 3].tolist() == [1, 1, 1, 1, -1, -1, -1, -1]
    assert after["accessors"][new["attributes"]["POSITION"]]["max"] == [2, 1, 0]


def at_corners(document: dict, primitive: dict) -> dict:
    """What a primitive of triangles shows at its corners, but for tangents."""
    count = document["accessors"][primitive["attributes"]["POSITION"]]["count"]
    index = values(document, primitive["indices"])[:, 0] if "indices" in primitive else np.arange(count)
    named = [primitive["attributes"], *primitive.get("targets", [])]
    return {
        (t, name): values(document, number)[index].tobytes()
        for t, attributes in enumerate(named)
        for name, number in attributes.items()
        if name != "TANGENT"
    }


def test_samples_show_at_every_corner_what_they_showed_and_nothing_else_changes(samples, exported):
    splits = 0
    for path in sorted([*samples.rglob("*.glb"), *samples.rglob("*.gltf")]):
        try:
            asset = load(str(path))
        except InputError:
            continue  # refusals are the business of other tests
        if any("unpacked" in note for note in asset.notes):
            continue
        solved = frames(split(asset), stored="replace", where="all")
        before, after = meaning(path), meaning(exported(solved, "b.glb"))
        old, new = ([one for mesh in document["meshes"] for one in mesh["primitives"]] for document in (before, after))
        for one, other in zip(old, new, strict=True):
            shown, wanted = at_corners(after, other), at_corners(before, one)
            assert {key: shown[key] for key in wanted} == wanted, path
            assert set(shown) - set(wanted) <= {(0, "NORMAL")}, path
            counts = [
                document["accessors"][part["attributes"]["POSITION"]]["count"]
                for document, part in ((before, one), (after, other))
            ]
            splits += counts[0] != counts[1]
        for document in (before, after):
            del document["accessors"], document["meshes"]
        assert after == before, path

    assert splits > 3


@pytest.mark.parametrize(
    ("vertices", "was", "kind"),
    [(255, "u1", "u1"), (256, "u1", "u2"), (255, "u4", "u2"), (65535, "u2", "u2"), (65536, "u2", "u4")],
)
def test_indices_are_of_the_smallest_type_that_holds_them(vertices, was, kind):
    """The largest number of a type is no vertex: it would restart the primitive (glTF 2.0, 3.7.2.1). Bytes only where
    there were bytes: other files are better off with shorts."""
    builder = Builder("float", {"accessors": [{"componentType": CODES[was]}]})

    assert builder.indices(np.array([0, 1, vertices - 1]), vertices, replaces=0) == 0
    assert builder.list("accessors")[0]["componentType"] == CODES[kind]


def test_morph_targets_whose_normals_move_get_tangent_displacements(made, exported):
    """glTF 2.0, 3.7.2.2: TANGENT of a target is VEC3. The normal leans by (1/2, 0, 0), so the tangent must follow."""
    after = meaning(exported(frames(split(load(str(made(folded, "a.glb"))))), "b.glb"))
    part = after["meshes"][0]["primitives"][0]
    entry = after["accessors"][part["targets"][0]["TANGENT"]]
    moved = values(after, part["targets"][0]["TANGENT"]) + values(after, part["attributes"]["TANGENT"])[:, :3]
    normal = values(after, part["targets"][0]["NORMAL"]) + values(after, part["attributes"]["NORMAL"])

    assert (entry["type"], entry["componentType"], entry["count"]) == ("VEC3", 5126, 8)
    assert_allclose((moved * normal).sum(axis=1), 0, atol=1e-6)


def test_strips_and_fans_are_solved_as_triangles_and_the_rest_is_carried_through(made):
    asset = load(str(made(mixed, "a.glb")))

    assert [part.place for part in asset.parts] == [(0, 1), (1, 0)]
    assert {tuple(sorted(face)) for face in asset.parts[0].points.index.reshape(-1, 3).tolist()} == {
        (0, 1, 3), (1, 2, 3)
    }  # fmt: skip
    assert all(part.frames is None or (part.frames.sides == 1).all() for part in frames(asset).parts)
    assert asset.notes == (
        "mesh 0 primitive 0: points carried through as they are",
        "mesh 0 primitive 2: lines carried through as they are",
    )


def test_only_materials_with_a_tangent_space_map_get_frames(tmp_path, exported):
    making = with_image(Making())
    making.json["materials"].append({"name": "bare"})
    making.json["meshes"] = [{"primitives": [square(making), square(making, material=1)]}]

    after = meaning(exported(frames(load(str(making.write(tmp_path / "a.glb")))), "b.glb"))

    assert ["TANGENT" in one["attributes"] for one in after["meshes"][0]["primitives"]] == [True, False]


@pytest.mark.parametrize("turn", [np.diag([1, 1, 1]), np.diag([-1, 1, 1]), np.diag([2, 0.5, 3])[[1, 2, 0]]])
def test_frames_go_with_the_node_that_places_the_mesh(tmp_path, exported, turn):
    """glTF 2.0, 3.7.4: a node of negative determinant turns the winding over. Tangents move as directions do, the side
    with them: solving in place gives the same frames as solving what was moved."""
    points = np.array(SQUARE) @ np.array([[1, 0.2, 0.1], [0, 1, 0.3], [0, 0, 1]])
    normal = np.cross(points[1] - points[0], points[3] - points[0])
    moved = points @ turn.T
    over = np.linalg.det(turn) < 0
    order = [0, 2, 1, 0, 3, 2] if over else [0, 1, 2, 0, 2, 3]

    def solved(points, normal, order):
        making = with_image(Making())
        part = square(making, points, indices=making.accessor(order, "u2", "SCALAR"))
        part["attributes"]["NORMAL"] = making.accessor([normal / np.linalg.norm(normal)] * 4, "f4", "VEC3")
        making.json["meshes"] = [{"primitives": [part]}]
        return frames(load(str(making.write(tmp_path / "a.glb")))).parts[0].frames

    here = solved(points, normal, [0, 1, 2, 0, 2, 3])
    there = solved(moved, np.cross(moved[1] - moved[0], moved[3] - moved[0]) * (-1 if over else 1), order)
    carried = here.tangents[here.index[0]] @ turn.T

    assert_allclose(there.tangents[there.index[0]], carried / np.linalg.norm(carried), atol=1e-6)
    assert there.sides[there.index[0]] == here.sides[here.index[0]] * (-1 if over else 1)


@pytest.mark.parametrize(("vectors", "code", "most"), [("short", 5122, 32767), ("byte", 5120, 127)])
@pytest.mark.parametrize("document", [plain, rigged, folded])
def test_directions_may_go_out_as_normalised_integers(made, exported, validate, document, vectors, code, most):
    """KHR_mesh_quantization: NORMAL and TANGENT may be normalised bytes or shorts, aligned to four bytes."""
    asset = frames(split(load(str(made(document, "a.glb")))))
    as_floats, packed = exported(asset, "b.glb"), exported(asset, "c.glb", vectors=vectors)
    before, after = meaning(as_floats), meaning(packed)

    assert after["extensionsRequired"] == ["KHR_mesh_quantization"]
    assert validate(packed)[str(packed)]["issues"]["numErrors"] == 0
    for name in ("NORMAL", "TANGENT"):
        old, new = (one["meshes"][0]["primitives"][0]["attributes"][name] for one in (before, after))
        assert (after["accessors"][new]["componentType"], after["accessors"][new]["normalized"]) == (code, True)
        assert_allclose(values(after, new) / most, values(before, old), atol=0.51 / most)


def test_a_map_is_put_beside_images_of_its_name(made, exported):
    def document(making):
        plain(making)
        making.json["images"][0] = {"uri": "data:image/png;base64," + "", "name": "b_normal"}
        making.json["images"] = [{"bufferView": making.view(PIXEL), "mimeType": "image/png", "name": "b_normal"}]

    flat = Sheet("", np.full((2, 2, 3), (128, 128, 255), np.uint8), "normal", "tangent", "up")
    after = meaning(exported(frames(load(str(made(document, "a.glb")))), "b.gltf", Map((flat,))))
    images = after["images"]

    assert len({one["bytes"] for one in images}) == 2
    assert after["textures"][after["materials"][0]["normalTexture"]["index"]]["source"] == 1


@pytest.mark.parametrize("name", ["B.GLB", "B.GlTF"])
def test_the_file_has_the_name_that_was_asked_for(made, exported, name):
    assert exported(load(str(made(plain, "a.glb"))), name).exists()


def test_welding_and_solving_keep_the_documents_vertices(made, exported):
    path = made(folded, "a.glb")

    after = meaning(exported(frames(split(weld(load(str(path))))), "b.glb"))

    assert after["accessors"][after["meshes"][0]["primitives"][0]["attributes"]["POSITION"]]["count"] == 8


def test_what_nothing_uses_any_more_is_left_out(tmp_path, exported):
    making = with_image(Making())
    plain(making)
    making.view(b"x" * 10_000)
    path = making.write(tmp_path / "a.glb")

    assert exported(load(str(path)), "b.glb").stat().st_size < path.stat().st_size - 9_000


@pytest.mark.parametrize(
    ("name", "change"),
    [
        ("KHR_draco_mesh_compression", {"extensionsRequired": ["KHR_draco_mesh_compression"]}),
        ("EXT_meshopt_compression", {"extensionsRequired": ["EXT_meshopt_compression"]}),
        ("ACME_packed", {"extensionsRequired": ["ACME_packed"]}),
    ],
)
def test_vertex_data_in_a_form_that_is_not_read_is_refused_by_name(tmp_path, name, change):
    making = with_image(Making())
    plain(making)
    making.json["meshes"][0]["primitives"][0]["extensions"] = {name: {"bufferView": 0}}
    making.json |= change

    with pytest.raises(InputError, match=name):
        load(str(making.write(tmp_path / "a.glb")))


def test_other_extensions_that_are_required_are_carried_through_with_a_note(tmp_path, exported):
    making = with_image(Making())
    plain(making)
    making.json |= {"extensionsUsed": ["ACME_rust"], "extensionsRequired": ["ACME_rust"]}
    asset = load(str(making.write(tmp_path / "a.glb")))

    assert asset.notes == ("the extension ACME_rust, which the file requires, is carried through as it is",)
    assert json.loads(asset.document.text)["extensionsRequired"] == ["ACME_rust"]
