"""Broken and hostile glTF: an error that names file and place, and nothing worse."""

from __future__ import annotations

import copy
import json
import random
from typing import Any

import numpy as np
import pytest
from gltf_files import PIXEL, Making
from tangentry.nodes.check import check
from tangentry.nodes.export import export
from tangentry.nodes.frames import frames
from tangentry.nodes.load import load
from tangentry.nodes.split import split
from tangentry.pipeline.errors import InputError


def square() -> Making:
    making = Making()
    part: dict[str, Any] = {
        "attributes": {
            "POSITION": making.accessor([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]], "f4", "VEC3", bounds=True),
            "NORMAL": making.accessor([[0, 0, 1]] * 4, "f4", "VEC3"),
            "TANGENT": making.accessor([[1, 0, 0, 1]] * 4, "f4", "VEC4"),
            "TEXCOORD_0": making.accessor([[0, 1], [1, 1], [1, 0], [0, 0]], "f4", "VEC2"),
        },
        "indices": making.accessor([0, 1, 2, 0, 2, 3], "u2", "SCALAR"),
        "material": 0,
        "targets": [{"POSITION": making.accessor([[0, 0, 1]] * 4, "f4", "VEC3", bounds=True)}],
    }
    rows, new = making.view(np.array([1], "<u2").tobytes()), making.view(np.ones((1, 3), "<f4").tobytes())
    making.json["accessors"][5]["sparse"] = {
        "count": 1,
        "indices": {"bufferView": rows, "componentType": 5123},
        "values": {"bufferView": new},
    }
    times = making.accessor([0, 1], "f4", "SCALAR", bounds=True)
    making.json |= {
        "meshes": [{"primitives": [part], "weights": [0]}],
        "materials": [
            {
                "normalTexture": {"index": 0, "extensions": {"KHR_texture_transform": {"scale": [2, 2]}}},
                "extensions": {"KHR_materials_clearcoat": {"clearcoatNormalTexture": {"index": 0}}},
            }
        ],
        "textures": [{"source": 0}],
        "images": [{"bufferView": making.view(PIXEL), "mimeType": "image/png"}],
        "nodes": [{"mesh": 0, "skin": 0}],
        "skins": [{"joints": [0], "inverseBindMatrices": making.accessor([np.eye(4)], "f4", "MAT4")}],
        "animations": [
            {
                "samplers": [{"input": times, "output": times}],
                "channels": [{"sampler": 0, "target": {"node": 0, "path": "weights"}}],
            }
        ],
        "scenes": [{"nodes": [0]}],
        "scene": 0,
        "extensionsUsed": ["KHR_texture_transform"],
    }
    return making


def places(data: Any, path: tuple = ()) -> list[tuple]:
    """The path of every member, at any depth."""
    members = data.items() if isinstance(data, dict) else enumerate(data) if isinstance(data, list) else ()
    return [found for key, value in members for found in [(*path, key), *places(value, (*path, key))]]


def put(data: Any, path: tuple, value: Any) -> None:
    for key in path[:-1]:
        data = data[key]
    data[path[-1]] = value


def everything(path) -> None:
    """Load, and do with it what a graph would."""
    asset = load(str(path))
    check(asset)
    solved = frames(split(asset), where="all", stored="replace") if all(part.uvs for part in asset.parts) else asset
    for name in ("b.glb", "b.gltf"):
        export(solved, file=name)


HOSTILE = [-1, 7, 2**40, 10**25, 0.5, -1e30, True, None, "x", "", [], [0], {}, {"a": 1}]


@pytest.mark.parametrize("value", HOSTILE, ids=lambda value: json.dumps(value)[:12])
def test_any_member_may_be_anything(tmp_path, value):
    """Each member of a document put to each kind of value: an error of ours, or none."""
    whole = square()
    for path in places(whole.json):
        making = square()
        making.json = copy.deepcopy(whole.json)
        put(making.json, path, value)
        try:
            everything(making.write(tmp_path / "a.glb"))
        except InputError as error:
            assert str(error).startswith(str(tmp_path / "a.glb")) or "b.gl" in str(error), path


@pytest.mark.parametrize("seed", range(60))
def test_any_bytes_may_be_changed(tmp_path, seed):
    chance = random.Random(seed)
    content = bytearray(square().write(tmp_path / "a.glb").read_bytes())
    for _ in range(chance.choice([1, 3, 40])):
        content[chance.randrange(len(content))] = chance.randrange(256)
    if seed % 3 == 0:
        content = content[: chance.randrange(len(content))]
    (tmp_path / "a.glb").write_bytes(content)
    try:
        everything(tmp_path / "a.glb")
    except InputError as error:
        assert str(tmp_path / "a.glb") in str(error)


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("", "the file is empty"),
        ("{", "line 1, column 2: not JSON"),
        ("[1]", "JSON, but no object"),
        ('{"asset": {"version": "1.0"}}', "asset.version: '1.0', but glTF 2.x is read"),
        ('{"asset": {"version": "2.0"}}', "there are no triangles in it"),
        ('{"asset": {"version": "2.0"}, "nodes": [{"translation": [NaN, 0, 0]}]}', "not JSON: the number NaN"),
        ('{"asset": {"version": "2.0"}, "extras": 1e999}', "not JSON: the number 1e999 is not finite"),
        ('{"asset": {"version": "2.0"}, "extras": ' + "9" * 5000 + "}", "not JSON"),
        ("[" * 100_000, "nested too deeply"),
        ('{"asset": {"version": "2.0"}, "extras": ' + "[" * 300 + "]" * 300 + "}", "more than 256 levels"),
        ('{"asset": {"version": "2.0"}, "extras": "\\udc00"}', r"the escape \\udc00 stands alone"),
        ('{"asset": {"version": "2.0"}, "buffers": [{"byteLength": 8, "uri": "../../etc/passwd"}]}', "passwd"),
        (
            '{"asset": {"version": "2.0"}, "buffers": [{"byteLength": 8, "uri": "http://far/away"}]}',
            "is not a relative",
        ),
        (
            '{"asset": {"version": "2.0"}, "buffers": [{"byteLength": 8, "uri": "' + "n" * 3000 + '"}]}',
            "buffer 0: there is no",
        ),
        ('{"asset": {"version": "2.0"}, "buffers": [{"byteLength": 8, "uri": "%2e"}]}', "buffer 0: there is no file"),
        ('{"asset": {"version": "2.0"}, "buffers": [{"byteLength": 8, "uri": "data:;base64,A"}]}', "not base64"),
        ('{"asset": {"version": "2.0"}, "extensionsRequired": 3}', "extensionsRequired: not a list"),
    ],
)
def test_what_is_wrong_is_said(tmp_path, text, told):
    (tmp_path / "a.gltf").write_text(text)

    with pytest.raises(InputError, match=told):
        load(str(tmp_path / "a.gltf"))


@pytest.mark.parametrize(("place", "name"), [("attributes", "JOINTS_0"), ("attributes", "_WEAR"), ("target", "NORMAL")])
def test_what_is_only_carried_along_must_fit_the_vertices_too(tmp_path, place, name):
    making = square()
    part = making.json["meshes"][0]["primitives"][0]
    holder = part["attributes"] if place == "attributes" else part["targets"][0]
    holder[name] = making.accessor([[0, 0, 0]] * 3, "f4", "VEC3")

    with pytest.raises(InputError, match=f"mesh 0 primitive 0, {name}: 3 elements, but POSITION has 4"):
        load(str(making.write(tmp_path / "a.glb")))


@pytest.mark.parametrize("share", [0, 0.01, 0.3, 0.8, 0.999])
def test_a_file_that_was_cut_off_is_refused(tmp_path, share):
    content = square().write(tmp_path / "a.glb").read_bytes()
    (tmp_path / "a.glb").write_bytes(content[: int(len(content) * share)])

    with pytest.raises(InputError, match=r"a\.glb"):
        load(str(tmp_path / "a.glb"))


def test_a_small_file_cannot_ask_for_much_memory(tmp_path):
    making = square()
    making.json["accessors"][0] = {"componentType": 5126, "type": "VEC3", "count": 2**27}

    with pytest.raises(InputError, match="134217728 elements without data"):
        load(str(making.write(tmp_path / "a.glb")))


def test_many_accessors_cannot_read_the_same_bytes_without_end(tmp_path, monkeypatch):
    monkeypatch.setattr("tangentry.nodes.formats.gltf_accessors.MOST_BYTES", 2**20)
    making = square()
    points = np.zeros((2**12, 3), "<f4")
    view = making.view(points.tobytes())
    numbers = [making.entry(view, 0, points, "VEC3") for _ in range(40)]
    making.json["meshes"] = [{"primitives": [{"attributes": {"POSITION": one}} for one in numbers]}]

    with pytest.raises(InputError, match="hold more than 1048576 bytes"):
        load(str(making.write(tmp_path / "a.glb")))
