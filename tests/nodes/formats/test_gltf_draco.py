"""Draco-compressed meshes, packed by DracoPy and read back."""

from __future__ import annotations

import sys

import numpy as np
import pytest
from gltf_files import Making, meaning
from tangentry.nodes.export import export
from tangentry.nodes.frames import frames
from tangentry.nodes.load import load
from tangentry.pipeline.errors import InputError

NAME = "KHR_draco_mesh_compression"
POINTS = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0.5]], np.float32)
UVS = np.array([[0, 1], [1, 1], [1, 0], [0, 0]], np.float64)
FACES = np.array([[0, 1, 2], [0, 2, 3]], np.uint32)


def packed(tmp_path, spoil=lambda content: content, count=4):
    draco = pytest.importorskip("DracoPy", reason="the extra `draco` is not installed")
    content = draco.encode(POINTS, faces=FACES, tex_coord=UVS, quantization_bits=16)
    ids = {
        {0: "POSITION", 3: "TEXCOORD_0"}[one["attribute_type"]]: one["unique_id"]
        for one in draco.decode(content).attributes
    }
    making = Making()
    position = making.entry(None, 0, np.zeros((count, 3), "<f4"), "VEC3", min=[0, 0, 0], max=[1, 1, 0.5])
    uv = making.entry(None, 0, np.zeros((count, 2), "<f4"), "VEC2")
    index = making.entry(None, 0, np.zeros((6, 1), "<u2"), "SCALAR")
    part = {
        "attributes": {"POSITION": position, "TEXCOORD_0": uv},
        "indices": index,
        "extensions": {NAME: {"bufferView": making.view(spoil(content)), "attributes": ids}},
    }
    making.json |= {"meshes": [{"primitives": [part]}], "extensionsUsed": [NAME], "extensionsRequired": [NAME]}
    return making.write(tmp_path / "a.glb")


def test_they_are_unpacked_and_solved(tmp_path):
    asset = load(str(packed(tmp_path)))
    part = asset.parts[0]
    faces = [
        set(map(tuple, face.round(3).tolist())) for face in part.points.values[part.points.index].reshape(-1, 3, 3)
    ]

    assert len(faces) == 2 and all({tuple(point) for point in POINTS[face].tolist()} in faces for face in FACES)
    assert asset.notes == ("its Draco-compressed meshes were unpacked, and go out uncompressed",)
    assert set(frames(asset, where="all").parts[0].frames.sides.tolist()) == {1}


def test_they_go_out_plain_and_valid(tmp_path, validate):
    (file,) = export(load(str(packed(tmp_path))), file="b.glb").files
    (tmp_path / "b.glb").write_bytes(file.content.tobytes())
    after = meaning(tmp_path / "b.glb")

    assert "extensionsUsed" not in after and "extensions" not in after["meshes"][0]["primitives"][0]
    assert validate(tmp_path / "b.glb")[str(tmp_path / "b.glb")]["issues"]["numErrors"] == 0


def test_without_the_extra_the_error_names_it(tmp_path, monkeypatch):
    path = packed(tmp_path)
    monkeypatch.setitem(sys.modules, "DracoPy", None)

    with pytest.raises(InputError, match=r"KHR_draco_mesh_compression: .*pip install 'tangentry\[draco\]'"):
        load(str(path))


@pytest.mark.parametrize("spoil", [lambda content: content[:30], lambda content: b"DRACO" + bytes(60), lambda _: b""])
def test_spoilt_data_is_refused(tmp_path, spoil):
    with pytest.raises(InputError, match="mesh 0 primitive 0"):
        load(str(packed(tmp_path, spoil)))


def test_counts_that_disagree_are_refused(tmp_path):
    with pytest.raises(InputError, match="5 elements announced, but the Draco data holds"):
        load(str(packed(tmp_path, count=5)))
