"""The demo library builds clean, into files the standard's validator has nothing against."""

from __future__ import annotations

import shutil

from tangentry.nodes.load import load


def test_every_prop_is_made_and_sound(demo):
    told = [finding for one in demo.assets.values() for finding in one["findings"]]

    assert demo.exit == 0 and len(demo.assets) >= 10
    assert {one["state"] for one in demo.assets.values()} == {"made"}
    assert {finding["severity"] for finding in told} == {"note"}


def test_the_validator_finds_neither_errors_nor_warnings(demo, validate):
    reports = validate(*sorted(demo.out.glob("*.glb")))

    issues = [report["issues"] for report in reports.values()]
    assert len(issues) == len(demo.assets)
    assert [one["messages"] for one in issues if one["numErrors"] or one["numWarnings"]] == []


def test_every_part_is_delivered_with_its_frames(demo):
    parts = [part for file in demo.out.glob("*.glb") for part in load(str(file)).parts]

    assert parts and all(part.frames is not None for part in parts)


def test_only_props_with_a_height_map_or_a_detailed_twin_get_a_normal_map(demo):
    mapped = {
        file.stem
        for file in demo.out.glob("*.glb")
        if any(use.role == "normal" for material in load(str(file)).materials for use in material.maps)
    }

    written = {file.stem.removesuffix("_normal") for file in demo.out.glob("*_normal.png")}
    assert mapped == written == {"cleat", "crate", "quay_slab"}


def test_building_again_runs_nothing_and_one_saved_prop_only_its_branch(graphs, build, tmp_path):
    kept = shutil.ignore_patterns(".tangentry", "build*", "__pycache__")
    terminal = shutil.copytree(graphs / "ferry_terminal", tmp_path / "terminal", ignore=kept)
    graph, crate = terminal / "ferry_terminal.yaml", terminal / "props" / "crate.obj"
    build(graph, tmp_path)

    again = build(graph, tmp_path)
    crate.write_text(crate.read_text().replace("v 0.4", "v 0.45"))
    saved = build(graph, tmp_path)

    assert again.record["ran"] == 0 and {one["state"] for one in again.assets.values()} == {"unchanged"}
    assert [name for name, one in saved.assets.items() if one["state"] != "unchanged"] == ["crate.obj"]
