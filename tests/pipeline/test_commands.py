"""The command line: exit codes, last lines, JSON."""

from __future__ import annotations

import json
import re
import subprocess
import sys

import jsonschema
import pytest
from tangentry.pipeline.cli import main

HEAVY = {"numpy", "networkx", "yaml", "pydantic", "rich", "numba", "trimesh", "scipy", "PIL", "blake3", "sqlite3"}


def test_build_ends_with_a_line_that_counts(project, capsys):
    assert main(["build", str(project.graph)]) == 0

    assert (
        capsys.readouterr().out.splitlines()[-1]
        == "3 assets: 3 made, 0 unchanged, 0 faulty, 0 failed (13 steps ran, 0 reused)"
    )


@pytest.mark.parametrize("words", ["rude", "broken", "bug"])
def test_something_faulty_or_failed_gives_exit_code_1(project, words):
    project.write("props/b.txt", words)

    assert main(["build", str(project.graph)]) == 1


def test_a_wrong_graph_gives_exit_code_2_and_plain_lines(project, capsys):
    project.edit("graph.yaml", "node: loud", "node: lood")

    assert main(["build", str(project.graph)]) == 2

    told = capsys.readouterr().err
    assert re.match(r".*graph.yaml:8:19: there is no node kind \"lood\"", told) and "Traceback" not in told


def test_the_record_is_the_contracts(project):
    project.write("props/b.txt", "rude")
    project.write("props/c.txt", "broken")
    main(["build", str(project.graph), "--record", str(project.folder / "record.json")])

    record = json.loads(project.read("record.json"))

    assert record["tangentry_record"] == 1 and (record["ran"], record["reused"], record["failed"]) == (9, 0, 1)
    assert [(one["name"], one["state"]) for one in record["assets"]] == [
        ("props/a.txt", "made"),
        ("props/b.txt", "faulty"),
        ("props/c.txt", "failed"),
    ]
    assert record["assets"][1]["findings"][0] == {
        "id": "rude",
        "severity": "fault",
        "count": 1,
        "what": "a rude word",
        "advice": "be polite",
        "where": [
            {
                "part": "",
                "material": "",
                "what": "a rude word",
                "count": 1,
                "element": "",
                "elements": [],
                "charts": [],
                "measured": [],
                "limit": None,
            }
        ],
    }
    assert record["assets"][0]["outputs"] == ["made/a.out"] and record["assets"][0]["error"] is None
    assert record["assets"][2]["error"].startswith("props/c.txt: word 1")


def test_a_nothing_changed_build_is_told_from_stats_alone(project, capsys, monkeypatch):
    project.write("props/b.txt", "rude")
    main(["build", str(project.graph)])
    project.settle()
    main(["build", str(project.graph)])
    before = capsys.readouterr().out

    monkeypatch.setattr("tangentry.pipeline.build.run_build", None)  # not reached
    assert main(["build", str(project.graph), "--record", str(project.folder / "record.json")]) == 1

    record = json.loads(project.read("record.json"))
    assert (record["ran"], record["reused"]) == (0, 13) and record["assets"][1]["state"] == "faulty"
    assert capsys.readouterr().out.splitlines()[-1] == before.splitlines()[-1]


@pytest.mark.parametrize(
    "change", ["a member added", "a member changed", "an output altered", "a source changed", "another setting"]
)
def test_any_change_breaks_the_seal(project, change, capsys):
    main(["build", str(project.graph)])
    project.settle()
    main(["build", str(project.graph)])
    more: list[str] = []
    if change == "a member added":
        project.write("props/d.txt", "d")
    elif change == "a member changed":
        project.write("props/a.txt", "d")
    elif change == "an output altered":
        project.write("made/a.out", "scribbled")
    elif change == "a source changed":
        project.edit("kinds/helper.py", "upper()", "lower()")
    else:
        more = ["--set", "times=4"]
    capsys.readouterr()

    main(["build", str(project.graph), *more])

    assert "0 made, 3 unchanged" not in capsys.readouterr().out or change == "an output altered"
    assert project.read("made/a.out") != "scribbled"


def test_plan_touches_nothing_and_says_why(project, capsys):
    main(["build", str(project.graph)])
    project.write("props/b.txt", "good day\n")
    before = sorted((path, path.stat().st_mtime_ns) for path in project.folder.rglob("*"))
    capsys.readouterr()

    assert main(["plan", str(project.graph), "--json"]) == 0

    plan = json.loads(capsys.readouterr().out)
    busy = [
        (one["asset"], one["node"], one["state"], one["reasons"][0]["text"])
        for one in plan["steps"]
        if one["state"] in ("run", "wait")
    ]
    assert (
        plan["tangentry_plan"] == 1
        and busy[0] == ("props/b.txt", "raw", "run", "file props/b.txt changed")
        and len(busy) == 5
    )
    assert sorted((path, path.stat().st_mtime_ns) for path in project.folder.rglob("*")) == before


def test_only_the_chosen_asset_is_built(project, capsys):
    main(["build", str(project.graph), "--asset", "b"])

    assert capsys.readouterr().out.splitlines()[-1].startswith("1 asset: 1 made")
    assert not (project.folder / "made/a.out").exists()


def test_the_schema_takes_this_graph_and_refuses_wrong_ones(project, capsys):
    main(["nodes", "--schema", "--kinds", str(project.folder / "kinds")])
    schema = json.loads(capsys.readouterr().out)
    good = {"tangentry": 1, "per_asset": {"x": {"node": "loud", "text": "raw", "times": "{times}"}}}
    node = good["per_asset"]["x"]

    jsonschema.validate(good, schema)
    for bad in (
        {**node, "tims": 1},
        {"node": "loud"},
        {**node, "times": "often"},
        {**node, "node": "lood"},
        {**node, "text": 3},
    ):
        with pytest.raises(jsonschema.ValidationError):
            jsonschema.validate({**good, "per_asset": {"x": bad}}, schema)


def test_the_reference_tells_a_kinds_settings(project, capsys):
    main(["nodes", "loud", "--kinds", str(project.folder / "kinds")])

    told = capsys.readouterr().out
    assert "times          a whole number; default 1" in told and "how often they are said, at least 1" in told


def test_draw_shows_every_node_with_its_state(project):
    main(["build", str(project.graph)])
    main(["draw", str(project.graph), "-o", str(project.folder / "graph.svg")])

    picture = project.read("graph.svg")
    assert (
        all(f">{name}</text>" in picture for name in ("raw", "said", "verdict", "done", "all"))
        and picture.count("3 ran") >= 4
    )


def test_start_writes_a_project_that_builds_at_once(tmp_path, capsys):
    assert main(["start", str(tmp_path / "new")]) == 0
    assert main(["build", str(tmp_path / "new" / "library.yaml")]) == 0
    assert main(["start", str(tmp_path / "new")]) == 2 and "is there already" in capsys.readouterr().err


def test_help_imports_nothing_heavy():
    code = (
        "import sys; from tangentry.pipeline.cli import main\n"
        "try: main(['--help'])\nexcept SystemExit: print(sorted(sys.modules), file=sys.stderr)"
    )
    told = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stderr

    assert not HEAVY & set(re.findall(r"'(\w+)'", told))


def test_store_commands(project, capsys):
    main(["build", str(project.graph)])
    assert main(["store", "size", str(project.graph)]) == 0 and main(["store", "verify", str(project.graph)]) == 0
    next((project.folder / ".tangentry/values").glob("*/*")).write_text("spoilt")
    capsys.readouterr()

    assert main(["store", "verify", str(project.graph)]) == 1 and "1 damaged" in capsys.readouterr().out
    assert main(["store", "trim", str(project.graph), "--max-size", "1K"]) == 0


@pytest.mark.parametrize(
    ("words", "told"),
    [
        ("build GRAPH --workers 0", "'0' is not a number of processes; write 1 or more"),
        ("build GRAPH --set times", "--set times: write --set NAME=VALUE"),
        ("build GRAPH --set tims=1", 'has no such option; it has out, times. Did you mean "times"?'),
        ("build GRAPH --asset nobody", "--asset nobody: no asset of the library has such a name"),
        ("build GRAPH --keep-going --stop-at-first", "not allowed with argument"),
        ("build nowhere.yaml", "nowhere.yaml: can't be read: No such file or directory"),
        ("store trim GRAPH", "say what may go: --keep-days DAYS or --max-size SIZE"),
        ("store trim GRAPH --max-size inf", "'inf' is not a size; write 500M or 20G"),
        ("store trim GRAPH --max-size much", "'much' is not a size; write 500M or 20G"),
        ("store trim GRAPH --keep-days -3", "'-3' is not a number of days"),
        ("store trim GRAPH --keep-days nan", "'nan' is not a number of days"),
        ("store size --store s3://shelf", "a store behind a URL is looked after where it lies"),
        ("nodes lood", 'there is no node kind "lood"; there are'),
        ("bild GRAPH", "invalid choice: 'bild'"),
    ],
)
def test_a_wrong_call_is_told_in_plain_words_with_exit_code_2(project, capsys, words, told):
    (project.folder / ".tangentry").mkdir()
    try:
        code = main(words.replace("GRAPH", str(project.graph)).split())
    except SystemExit as end:
        code = end.code

    assert code == 2 and told in capsys.readouterr().err
