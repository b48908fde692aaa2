"""Buffer views compressed by meshopt (EXT_meshopt_compression), packed by its own encoder and read back."""

from __future__ import annotations

import copy
import sys

import numpy as np
import pytest
from gltf_files import Making, meaning
from numpy.testing import assert_allclose
from tangentry.nodes.export import export
from tangentry.nodes.frames import frames
from tangentry.nodes.load import load
from tangentry.pipeline.errors import InputError

NAMES = ["EXT_meshopt_compression", "KHR_meshopt_compression"]
POINTS = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0.5]], "<f4")
UVS = np.array([[0, 1], [1, 1], [1, 0], [0, 0]], "<f4")
FACES = np.array([0, 1, 2, 0, 2, 3], "<u4")


def plain() -> Making:
    making = Making()
    part = {
        "attributes": {
            "POSITION": making.accessor(POINTS, "f4", "VEC3", bounds=True),
            "TEXCOORD_0": making.accessor(UVS, "f4", "VEC2"),
        },
        "indices": making.accessor(FACES, "u4", "SCALAR"),
    }
    making.json["meshes"] = [{"primitives": [part]}]
    return making


def packed(tmp_path, name=NAMES[0], spoil=lambda content: content, **more):
    """The same with each view compressed, its own place in a buffer that is not there."""
    meshopt = pytest.importorskip("meshopt", reason="the extra `meshopt` is not installed")
    making = Making()
    making.json |= copy.deepcopy(plain().json)
    views, making.json["bufferViews"] = making.json["bufferViews"], []
    for rows, mode, view in zip((POINTS, UVS, FACES), ("ATTRIBUTES", "ATTRIBUTES", "TRIANGLES"), views, strict=True):
        at = making.view(spoil(meshopt.encode_gltf_buffer(rows, mode)))
        held = making.json["bufferViews"][at]
        stride = rows.itemsize * (1 if mode == "TRIANGLES" else rows.shape[1])
        held |= {"byteStride": stride, "count": len(rows), "mode": mode, **more}
        making.json["bufferViews"][at] = {**view, "buffer": 1, "extensions": {name: held}}
    making.json |= {"extensionsUsed": [name], "extensionsRequired": [name]}
    making.json["buffers"] = [{}, {"byteLength": 10**12, "extensions": {name: {"fallback": True}}}]
    return making.write(tmp_path / "a.glb")


@pytest.mark.parametrize("name", NAMES)
def test_they_mean_what_they_meant_before(tmp_path, validate, name):
    asset = load(str(packed(tmp_path, name)))
    (file,) = export(asset, file="b.glb").files
    (tmp_path / "b.glb").write_bytes(file.content.tobytes())

    corners = asset.parts[0].points.values[asset.parts[0].points.index].reshape(2, 3, 3)
    for face, wanted in zip(corners, POINTS[FACES].reshape(2, 3, 3), strict=True):  # the codec may turn triangles round
        assert any((np.roll(face, turn, axis=0) == wanted).all() for turn in range(3))
    before, after = meaning(plain().write(tmp_path / "c.glb")), meaning(tmp_path / "b.glb")
    assert after["accessors"][:2] == before["accessors"][:2] and after["meshes"] == before["meshes"]
    assert "extensionsUsed" not in after
    assert asset.notes == ("its meshopt-compressed data was unpacked, and goes out uncompressed",)
    assert validate(tmp_path / "b.glb")[str(tmp_path / "b.glb")]["issues"]["numErrors"] == 0


def test_filtered_directions_are_unpacked(tmp_path):
    meshopt = pytest.importorskip("meshopt", reason="the extra `meshopt` is not installed")
    normals = np.array([[0.6, 0, 0.8, 0], [0, 1, 0, 0], [0, -0.6, 0.8, 0], [-1, 0, 0, 0]], np.float32)
    rows = meshopt.encode_filter_oct(normals, 8, 16)
    making = plain()
    view = making.view(meshopt.encode_gltf_buffer(rows, "ATTRIBUTES"))
    held = {**making.json["bufferViews"][view], "byteStride": 8, "count": 4, "mode": "ATTRIBUTES"}
    making.json["bufferViews"][view]["byteStride"] = 8
    making.json["bufferViews"][view]["extensions"] = {NAMES[0]: {**held, "filter": "OCTAHEDRAL"}}
    normal = making.entry(view, 0, np.zeros((4, 3), "<i2"), "VEC3", normalized=True)
    making.json["meshes"][0]["primitives"][0]["attributes"]["NORMAL"] = normal
    part = load(str(making.write(tmp_path / "a.glb"))).parts[0]

    assert_allclose(part.normals.values, normals[:, :3], atol=1e-4)
    assert set(frames(load(str(tmp_path / "a.glb")), where="all").parts[0].frames.sides.tolist()) <= {-1, 1}


def test_without_the_extra_the_error_names_it(tmp_path, monkeypatch):
    path = packed(tmp_path)
    monkeypatch.setitem(sys.modules, "meshopt", None)

    with pytest.raises(InputError, match=r"EXT_meshopt_compression: .*pip install 'tangentry\[meshopt\]'"):
        load(str(path))


@pytest.mark.parametrize(
    "spoil", [lambda content: content[:9], lambda content: bytes(60), lambda content: content + b"123"]
)
def test_spoilt_data_is_refused(tmp_path, spoil):
    with pytest.raises(InputError, match="bufferView 0, EXT_meshopt_compression: it can't be decoded"):
        load(str(packed(tmp_path, spoil=spoil)))


@pytest.mark.parametrize(
    "more",
    [
        {"count": 10**9},
        {"count": -1},
        {"count": 0},
        {"byteStride": 3},
        {"byteStride": "x"},
        {"byteLength": 10**9},
        {"buffer": 9},
        {"mode": "ANYHOW"},
        {"mode": None},
        {"mode": []},
        {"filter": 7},
        {"filter": []},
        {"filter": "QUATERNION"},
    ],
)
def test_what_can_not_be_is_refused(tmp_path, more):
    with pytest.raises(InputError, match="bufferView 0, EXT_meshopt_compression"):
        load(str(packed(tmp_path, **more)))
