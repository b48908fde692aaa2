"""What runs, what is reused, and how a build ends."""

from __future__ import annotations

from typing import Any

from tangentry.pipeline.build import make_plan
from tangentry.pipeline.graph import read_graph

EVERY = sorted(["take", "loud", "judge", "put"] * 3 + ["join"])


def states(record: Any) -> dict[str, str]:
    return {asset.name: asset.state for asset in record.assets}


def test_a_first_build_runs_every_step_once(project):
    record = project.build()

    assert project.calls == EVERY
    assert record.sound and set(states(record).values()) == {"made"}
    assert project.read("made/a.out") == "HELLO A\nHELLO A\n"


def test_a_second_build_runs_nothing(project):
    project.build()

    record = project.build()

    assert project.calls == []
    assert set(states(record).values()) == {"unchanged"} and record.count("reused") == 13


def test_touching_one_prop_reruns_only_its_branch(project):
    project.build()
    project.write("props/b.txt", "good day b\n")

    record = project.build()

    assert project.calls == sorted(["take", "loud", "judge", "put", "join"])
    assert states(record) == {"props/a.txt": "unchanged", "props/b.txt": "made", "props/c.txt": "unchanged"}


def test_a_rerun_that_gives_the_same_value_stops_there(project):
    project.build()
    project.edit("kinds/helper.py", "upper()", "upper().replace('ß', 'SS')")

    project.build()

    assert project.calls == ["loud"] * 3


def test_data_beside_a_module_is_part_of_its_source(project):
    project.write("kinds/helper.txt", "quiet")
    project.edit("kinds/helper.py", "def ", "PLACE = __file__\n\n\ndef ")
    project.build()
    project.write("kinds/helper.txt", "louder")

    project.build()

    assert project.calls == ["loud"] * 3


def test_a_changed_setting_reruns_only_what_is_downstream(project):
    project.build()

    project.build({"times": 3})

    assert project.calls == sorted(["loud", "judge", "put"] * 3 + ["join"])


def test_a_side_file_that_appears_reruns_its_asset(project):
    project.build()
    project.write("props/a.side", "and more\n")

    record = project.build()

    assert states(record)["props/a.txt"] == "made" and project.calls.count("take") == 1
    assert "AND MORE" in project.read("made/a.out")


def test_a_side_file_that_changes_or_goes_reruns_its_asset(project):
    side = project.write("props/a.side", "and more\n")
    project.build()
    side.write_text("and less\n")
    project.build()
    assert project.calls.count("take") == 1 and "AND LESS" in project.read("made/a.out")
    side.unlink()

    project.build()

    assert project.read("made/a.out") == "HELLO A\nHELLO A\n"


def test_one_assets_failure_never_stops_the_others(project):
    project.write("props/b.txt", "broken\n")

    record = project.build()

    assert states(record) == {"props/a.txt": "made", "props/b.txt": "failed", "props/c.txt": "made"}
    assert record.assets[1].errors == ["props/b.txt: word 1: it says broken; write something else"]
    assert "props/b.txt" not in project.read("made/all.out")


def test_a_broken_file_is_not_read_again_until_it_changes(project):
    project.write("props/b.txt", "broken\n")
    project.build()

    assert project.build().assets[1].state == "failed"
    assert project.calls == []


def test_a_nodes_own_fault_is_told_with_its_traceback_and_tried_again(project):
    project.write("props/b.txt", "bug\n")
    record = project.build()
    step = record.assets[1].plain()["steps"][0]

    project.build()

    assert step["error"] == 'node "raw" (take) failed: RuntimeError: a bug of the node\'s own'
    assert "Traceback" in step["detail"] and project.calls == ["take"]


def test_a_faulty_asset_is_held_back(project):
    project.write("props/b.txt", "rude\n")

    record = project.build()

    assert states(record)["props/b.txt"] == "faulty" and not record.sound
    assert not (project.folder / "made/b.out").exists()
    assert [one["id"] for one in record.assets[1].findings] == ["rude"]


def test_what_a_skip_leaves_out_optional_inputs_see_as_nothing(project):
    project.edit("graph.yaml", "text: raw,", "text: raw, other: extra,")
    project.edit(
        "graph.yaml",
        "  said:",
        '  extra:   {node: take, file: "props/{stem}.more", if_missing: skip, log: LOG}\n  said:',
    )
    project.edit("graph.yaml", "LOG", str(project.log))
    project.write("props/a.more", "plus\n")

    record = project.build()

    assert record.sound and "PLUS" in project.read("made/a.out") and "PLUS" not in project.read("made/b.out")


def test_what_needs_a_skipped_value_is_skipped_and_says_so(project):
    project.edit("graph.yaml", 'file: "{file}",', 'file: "{stem}.gone", if_missing: skip,')

    record = project.build()

    told = {step["node"]: (step["state"], step.get("because")) for step in record.assets[0].steps}
    assert told == {
        "raw": ("ran", None),
        "said": ("skipped", "raw"),
        "verdict": ("skipped", "said"),
        "done": ("skipped", "said"),
    }


def test_reasons_are_data(project):
    project.build()
    project.write("props/b.txt", "good day b\n")

    steps = {step["node"]: step for step in project.build({"times": 5}).assets[1].steps}

    assert [reason["text"] for reason in steps["raw"]["reasons"]] == ["file props/b.txt changed"]
    assert steps["said"]["reasons"][0] | {} == {
        "what": "setting",
        "name": "times",
        "before": 2,
        "after": 5,
        "text": "setting times changed 2 -> 5",
    }


def test_stopping_at_the_first_failure_tells_only_of_what_was_reached(project):
    project.write("props/b.txt", "broken\n")

    record = project.build(stop_at_first=True)

    assert states(record) == {"props/a.txt": "made", "props/b.txt": "failed"} and not record.sound
    assert record.stopped == "stopped at the first failure: props/b.txt" and project.calls.count("join") == 0
    project.write("props/b.txt", "hello b\n")
    assert project.build(stop_at_first=True).sound and project.calls.count("take") == 2


def test_planning_sets_nothing_aside(project):
    project.build()
    results = sorted((project.folder / ".tangentry/results").glob("*/*"))
    results[0].write_text("spoilt")

    make_plan(read_graph(project.graph))

    assert results[0].exists() and not (project.folder / ".tangentry/aside").exists()
