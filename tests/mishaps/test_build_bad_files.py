"""Bad files in a library: each fails by itself, file and element named; others are built, nothing is left over."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import numpy as np
import pytest
from tangentry.nodes.load import load
from tangentry.pipeline.cli import main

GRAPHS = Path(__file__).parents[2] / "graphs"
PROPS = GRAPHS / "ferry_terminal" / "props"
SQUARE = "v 0 0 0\nv 1 0 0\nv 1 1 0\nvt 0 0\nvt 1 0\nvt 1 1\n"
FACE = "f 1/1 2/2 3/3\n"


def cut(name, share=0.5):
    """The beginning of a prop's file."""
    content = (PROPS / name).read_bytes()
    return content[: int(len(content) * share)]


def junk(size=5000):
    """Bytes that mean nothing."""
    return np.random.default_rng(1).integers(0, 256, size, np.uint8).tobytes()


BAD = {
    "empty.obj": (b"", "the file is empty"),
    "empty.ply": (b"", "the file is empty"),
    "empty.glb": (b"", "the file is empty"),
    "cut_off.obj": (cut("bollard.obj", 0.96) + b"\nf 1/1/1 2/2/2 99999/1/1\n", "point index 99999"),
    "cut_off.ply": (cut("buoy.ply"), "vertex "),
    "cut_off.glb": (cut("oar.glb"), ""),
    "cut_off.stl": (b"\0" * 80 + b"\7\0\0\0" + b"\0" * 120, "triangle 2: 7 triangles announced"),
    "no_faces.obj": (SQUARE.encode(), "there are no faces in it"),
    "no_uvs.obj": (b"v 0 0 0\nv 1 0 0\nv 1 1 0\nf 1 2 3\n", "no UVs"),
    "not_a_number.obj": (("v 0 nan 0\n" + SQUARE + FACE).encode(), "line 1: 'v 0 nan 0'"),
    "out_of_range.obj": ((SQUARE + "f 1/1 2/2 4/3\n").encode(), "line 7: point index 4, but the file has 3"),
    "a_picture.obj": (cut("crate_height.png", 1.0), "it holds a PNG image"),
    "a_ply.obj": (cut("buoy.ply", 1.0), "it holds .ply"),
    "an_obj.ply": (cut("crate.obj", 1.0), "line 1"),
    "an_obj.gltf": (cut("crate.obj", 1.0), ""),
    "bad_image.obj": ((SQUARE + "mtllib bad.mtl\nusemtl deck\n" + FACE).encode(), 'material "deck", image broken.png'),
    "junk.obj": (junk(), ""),
    "junk.ply": (junk(), "line 1"),
    "junk.glb": (junk(), ""),
    "junk.stl": (junk(), "no STL file"),
    "huge.ply": (
        b"ply\nformat ascii 1.0\nelement vertex 2000000000\nproperty float x\nend_header\n1\n",
        "vertex 1: the file ends here, but announces 2000000000",
    ),
    "b\xe2ton_\u6ce2.obj": ((SQUARE + "f 1/1 2/2 3/9\n").encode(), "line 7: UV index 9"),
}
GOOD = ("bench.obj", "buoy.ply", "oar.glb")


@pytest.fixture(scope="module")
def built(tmp_path_factory):
    """A library of bad files and a few good ones, built: exit code, record, folder of results, printed lines."""
    folder = tmp_path_factory.mktemp("bad")
    library = folder / "assets"
    shutil.copytree(
        PROPS, library, ignore=lambda _, names: [n for n in names if n not in GOOD and not n.endswith(("png", "mtl"))]
    )
    for name, (content, _) in BAD.items():
        (library / name).write_bytes(content)
    (library / "bad.mtl").write_text("newmtl deck\nmap_Kd broken.png\n")
    (library / "broken.png").write_bytes(b"no picture")
    words = ["--set", f"files={library}/*.{{obj,ply,stl,gltf,glb}}", "--set", f"out={folder / 'out'}"]
    places = ["--store", str(folder / "store"), "--record", str(folder / "record.json")]
    exit = main(["build", str(GRAPHS / "anything.yaml"), *words, *places])
    record = json.loads((folder / "record.json").read_text())
    return exit, {Path(one["name"]).name: one for one in record["assets"]}, folder / "out"


def test_good_files_are_made_beside_bad_ones(built):
    exit, assets, _ = built

    assert exit == 1 and set(assets) == {*BAD, *GOOD}
    assert {name: assets[name]["state"] for name in GOOD} == dict.fromkeys(GOOD, "made")


@pytest.mark.parametrize("name", BAD)
def test_each_bad_file_fails_with_its_name_and_place(built, name):
    _, assets, _ = built

    assert assets[name]["state"] == "failed"
    assert name in assets[name]["error"] and BAD[name][1] in assets[name]["error"]
    assert "Traceback" not in assets[name]["error"] and "\n" not in assets[name]["error"]


def test_nothing_half_written_is_left_behind(built):
    _, assets, out = built
    made = [Path(path) for name in GOOD for path in assets[name]["outputs"]]

    assert sorted(path for path in out.rglob("*") if path.is_file()) == sorted([*made, out / "tally.csv"])
    assert all(load(str(path)).parts for path in made)
    assert all(assets[name]["outputs"] == [] for name in BAD)


def test_a_file_that_is_mended_is_made_in_the_next_build(tmp_path):
    prop = tmp_path / "assets" / "quay.obj"
    prop.parent.mkdir()
    words = [
        "--set",
        f"files={prop.parent}/*.obj",
        "--set",
        f"out={tmp_path / 'out'}",
        "--store",
        str(tmp_path / "store"),
    ]
    prop.write_text(SQUARE + "f 1/1 2/2 4/3\n")
    first = main(["build", str(GRAPHS / "anything.yaml"), *words])
    prop.write_text(SQUARE + FACE)

    assert (first, main(["build", str(GRAPHS / "anything.yaml"), *words])) == (1, 0)
    assert len(list((tmp_path / "out").glob("quay*"))) == 1
