"""Any mesh, from anywhere, ends with a verdict."""

from __future__ import annotations

import shutil
from pathlib import Path

MESHES = (".obj", ".ply", ".gltf", ".glb")


def has_a_verdict(asset: dict) -> bool:
    """Exported; or held back with a fault that is named; or failed with an error that names the file."""
    faults = [one for one in asset["findings"] if one["severity"] == "fault"]
    return {
        "made": bool(asset["outputs"]) and not faults,
        "faulty": bool(faults) and not asset["outputs"],
        "failed": bool(asset["error"]) and Path(asset["name"]).name in asset["error"] and not asset["outputs"],
    }[asset["state"]]


def everything_below(folder: Path) -> list[str]:
    """Words for the command line."""
    return ["--set", f"files={folder}/**/*.{{obj,ply,gltf,glb}}"]


def test_every_real_sample_ends_with_a_verdict_and_no_traceback(graphs, build, samples, tmp_path, capfd):
    built = build(graphs / "anything.yaml", tmp_path, *everything_below(samples))

    told = capfd.readouterr()
    assert "Traceback" not in told.out + told.err
    assert len(built.record["assets"]) == sum(path.suffix.lower() in MESHES for path in samples.rglob("*"))
    assert [one for one in built.record["assets"] if not has_a_verdict(one)] == []


def test_what_is_exported_from_real_samples_is_valid(graphs, build, samples, validate, tmp_path):
    built = build(graphs / "anything.yaml", tmp_path, *everything_below(samples))
    reports = validate(*(Path(path) for one in built.record["assets"] for path in one["outputs"]))

    assert reports and [name for name, report in reports.items() if report["issues"]["numErrors"]] == []


def test_files_of_one_stem_do_not_collide(graphs, build, tmp_path):
    props = graphs / "ferry_terminal" / "props"
    for place in ("north", "south/pier"):
        (tmp_path / "assets" / place).mkdir(parents=True)
        shutil.copy(props / "buoy.ply", tmp_path / "assets" / place)
    shutil.copy(props / "bench.obj", tmp_path / "assets" / "north" / "buoy.obj")

    built = build(graphs / "anything.yaml", tmp_path, *everything_below(tmp_path / "assets"))

    assert built.exit == 0
    delivered = {path.relative_to(built.out).as_posix() for path in built.out.rglob("*.glb")}
    assert delivered == {"north/buoy.obj.glb", "north/buoy.ply.glb", "south/pier/buoy.ply.glb"}


def test_bad_files_get_a_verdict_beside_good_ones(graphs, build, tmp_path):
    assets = tmp_path / "assets"
    assets.mkdir()
    shutil.copy(graphs / "ferry_terminal" / "props" / "bench.obj", assets)
    buoy = (graphs / "ferry_terminal" / "props" / "buoy.ply").read_bytes()
    bad = {"empty.obj": b"", "words.glb": b"not a mesh", "cut.ply": buoy[: len(buoy) // 2], "list.gltf": b"[]"}
    for name, content in bad.items():
        (assets / name).write_bytes(content)

    built = build(graphs / "anything.yaml", tmp_path, *everything_below(assets))

    assert built.exit == 1 and all(has_a_verdict(one) for one in built.record["assets"])
    assert {name: one["state"] for name, one in built.assets.items()} == {"bench.obj": "made"} | dict.fromkeys(
        bad, "failed"
    )


def test_tangents_that_a_file_brought_are_kept(graphs, build, tmp_path):
    from numpy.testing import assert_array_equal
    from tangentry.nodes.load import load

    gangway = graphs / "ferry_terminal" / "props" / "gangway.glb"
    built = build(graphs / "anything.yaml", tmp_path, "--set", f"files={gangway}")

    for before, after in zip(load(str(gangway)).parts, load(str(built.out / "gangway.glb.glb")).parts, strict=True):
        for name in ("tangents", "sides"):
            kept, brought = (getattr(part.frames, name)[part.frames.index] for part in (after, before))
            assert_array_equal(kept, brought)
