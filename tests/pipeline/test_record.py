"""What programs may rely on: the keys of the record and of the plan, in every state that a step can end in."""

from __future__ import annotations

import json
import re
from typing import Any

import pytest
from tangentry.pipeline import record as record_module
from tangentry.pipeline.cli import main
from tangentry.pipeline.terminal import plan_json

COUNTS = {"ran", "reused", "skipped", "blocked", "failed"}
ASSET = {"name", "state", "error", "findings", "outputs", "steps"}
REASON = {"what", "name", "before", "after", "text"}
STEP = {
    "ran": {"node", "state", "reasons", "seconds"},
    "reused": {"node", "state"},
    "skipped": {"node", "state", "because"},
    "blocked": {"node", "state", "because"},
    "failed": {"node", "state", "error"},
}


@pytest.fixture
def record(project) -> Any:
    """The record of a build in which everything happens."""
    project.edit(
        "graph.yaml",
        "  all:",
        "  more:    {node: loud, text: some}\n  some:    {node: take, file: gone, if_missing: skip}\n  all:",
    )
    project.write("props/d.txt", "hello d")
    main(["build", str(project.graph)])
    for name, words in {"b": "rude", "c": "broken", "d": "bug"}.items():
        project.write(f"props/{name}.txt", words)
    main(["build", str(project.graph), "--record", str(project.folder / "record.json"), "--set", "times=3"])
    return json.loads(project.read("record.json"))


def test_the_record_has_the_keys_of_version_1(record):
    whole = {"tangentry_record", "graph", "states", "assets", "library", "restored", "left_over", "stopped"} | COUNTS
    steps = [step for asset in [*record["assets"], record["library"]] for step in asset["steps"]]

    assert record["tangentry_record"] == 1 and set(record) == whole
    assert all(set(asset) == ASSET for asset in [*record["assets"], record["library"]])
    assert {step["state"] for step in steps} == COUNTS
    assert all(set(step) - {"faulty", "detail", "reasons"} == STEP[step["state"]] - {"reasons"} for step in steps)
    assert all(set(reason) == REASON for step in steps for reason in step.get("reasons", ()))
    assert sum(step.get("faulty", False) for step in steps) == sum("detail" in step for step in steps) == 1


def test_its_counts_are_those_of_its_steps(record):
    states = [step["state"] for asset in [*record["assets"], record["library"]] for step in asset["steps"]]

    assert {state: states.count(state) for state in COUNTS} == {state: record[state] for state in COUNTS}
    assert record["states"] == {"made": 1, "unchanged": 0, "faulty": 1, "failed": 2}
    assert [asset["state"] for asset in record["assets"]] == ["made", "faulty", "failed", "failed"]


def test_every_key_is_documented(record):
    def keys(data: Any) -> set[str]:
        if isinstance(data, list):
            return {key for one in data for key in keys(one)}
        return {*data, *keys(list(data.values()))} if isinstance(data, dict) else set()

    record = {**record, "assets": [{**asset, "findings": []} for asset in record["assets"]]}
    documented = set(re.findall(r"\w+", record_module.__doc__ or ""))

    assert keys({key: one for key, one in record.items() if key != "states"}) <= documented


def test_the_plan_has_the_keys_of_version_1(project, capsys):
    project.build()
    project.write("props/b.txt", "good day")
    main(["plan", str(project.graph), "--json"])

    plan = json.loads(capsys.readouterr().out)

    assert set(plan) == {"tangentry_plan", "steps"} and plan["tangentry_plan"] == 1
    assert all(set(step) == {"asset", "node", "kind", "state", "reasons"} for step in plan["steps"])
    assert {step["state"] for step in plan["steps"]} == {"run", "wait", "reuse"}
    assert all(set(reason) == REASON for step in plan["steps"] for reason in step["reasons"])
    assert plan["steps"][4]["reasons"][0]["name"] == "props/b.txt" and "tangentry_plan" in (plan_json.__doc__ or "")


def test_a_plan_tells_what_the_build_then_does(project):
    from tangentry.pipeline.build import make_plan
    from tangentry.pipeline.graph import read_graph

    project.build()
    project.edit("kinds/deep/mark.py", "return words", "return words + '!'")
    project.write("props/b.txt", "good day")
    planned = make_plan(read_graph(project.graph))

    project.build()

    expected = [one for one in planned if one.decision.state in ("run", "wait")]
    assert sorted(one.step.kind.name for one in expected) == project.calls
