"""Keys are right: after any edits, exactly what is affected runs again, and everything else is reused.

The nodes of the test project write down all they can see when they are called: their arguments, the files they read,
the version of their own source and of what they import. So a build from scratch tells what an incremental build had
to call, without asking any key: every call it made whose like was never made before.
"""

from __future__ import annotations

import re
import tempfile
from collections import Counter
from pathlib import Path
from typing import Any

import hypothesis.strategies as st
import pytest
from hypothesis import example, given, note, settings

SOURCES = {
    "take": "take",
    "loud": "loud",
    "judge": "judge",
    "put": "put",
    "join": "join",
    "helper": "helper",
    "mark": "deep/mark",
}
WIRINGS = [
    ("text: said, unless_faulty: verdict", "text: raw, unless_faulty: verdict"),
    ("{node: judge, text: said", "{node: judge, text: raw"),
    ("texts: said", "texts: raw"),
    ("{node: loud, text: raw,", "{node: loud, text: raw, other: raw,"),
    ('{stem}.out"', '{stem}.words"'),
]
STEMS = st.sampled_from(["a", "b", "c", "d"])
WORDS = st.sampled_from(["hello", "rude words", "broken", "bug", "good day", ""])
EDITS = st.one_of(
    st.tuples(st.just("file"), STEMS, WORDS),  # written, added, or written as it was
    st.tuples(st.just("removed"), STEMS),
    st.tuples(st.just("renamed"), STEMS, STEMS),
    st.tuples(st.just("side file"), STEMS, st.sampled_from(["and more", "and less"])),
    st.tuples(st.just("side file gone"), STEMS),
    st.tuples(st.just("touched"), STEMS),
    st.tuples(st.just("setting"), st.sampled_from(["times: 2", "times: 3", 'times: "{times}"'])),
    st.tuples(st.just("option"), st.integers(1, 3)),
    st.tuples(st.just("source"), st.sampled_from(sorted(SOURCES)), st.integers(1, 3)),
    st.tuples(st.just("wiring"), st.sampled_from(range(len(WIRINGS))), st.booleans()),
    st.tuples(st.just("comment"), st.integers(0, 9)),
)


def edit(project: Any, what: str, *how: Any) -> None:
    """Change one thing of a project, anything."""
    props = project.folder / "props"
    if what == "file":
        project.write(f"props/{how[0]}.txt", how[1] + "\n")
    elif what == "side file":
        project.write(f"props/{how[0]}.side", how[1] + "\n")
    elif what == "side file gone":
        (props / f"{how[0]}.side").unlink(missing_ok=True)
    elif what == "removed":
        (props / f"{how[0]}.txt").unlink(missing_ok=True)
    elif what == "renamed" and (props / f"{how[0]}.txt").exists():
        (props / f"{how[0]}.txt").rename(props / f"{how[1]}.txt")
    elif what == "touched" and (props / f"{how[0]}.txt").exists():
        (props / f"{how[0]}.txt").touch()
    elif what == "setting":
        project.write("graph.yaml", re.sub(r'times: ("\{times\}"|\d)(?=, log)', how[0], project.read("graph.yaml")))
    elif what == "option":
        project.write("graph.yaml", re.sub(r"times: \d(?=\})", f"times: {how[0]}", project.read("graph.yaml")))
    elif what == "source":
        path = f"kinds/{SOURCES[how[0]]}.py"
        project.write(path, re.sub(r"VERSION = \d", f"VERSION = {how[1]}", project.read(path)))
    elif what == "wiring":
        old, new = WIRINGS[how[0]] if how[1] else WIRINGS[how[0]][::-1]
        project.write("graph.yaml", project.read("graph.yaml").replace(old, new))
    elif what == "comment":
        project.write("graph.yaml", project.read("graph.yaml") + f"# {how[0]}\n")
    if not list(props.glob("*.txt")):
        project.write("props/a.txt", "hello\n")


def source_versions(project: Any) -> dict[str, str]:
    """What each call must begin with, by kind, as the files say it."""
    number = {name: re.findall(r"VERSION = (\d)", project.read(f"kinds/{SOURCES[name]}.py"))[0] for name in SOURCES}
    return {**number, "loud": f"{number['loud']}, {number['helper']}, {number['mark']}"}


def told(record: Any) -> list[Any]:
    return [(one.name, one.errors, one.findings, one.outputs) for one in [*record.assets, record.library]]


EACH = {"loud": 3, "judge": 3, "put": 3, "join": 1}
ONE_ASSET = {"take": 1, "loud": 1, "judge": 1, "put": 1, "join": 1}
AFFECTED = [
    (("file", "b", "good day"), ONE_ASSET),
    (("file", "b", "hello b"), {}),  # saved as it was
    (("touched", "b"), {}),
    (("comment", 1), {}),
    (("side file", "a", "and more"), ONE_ASSET),
    (("file", "d", "one more"), ONE_ASSET),
    (("removed", "c"), {"join": 1}),
    (("renamed", "a", "d"), {"take": 1, "put": 1, "join": 1}),  # the words are known already, under another name
    (("setting", "times: 3"), EACH),
    (("option", 3), EACH),
    (("source", "take", 2), {"take": 3}),  # gives the same values: no further
    (("source", "helper", 2), {"loud": 3}),
    (("source", "mark", 2), {"loud": 3}),
    (("source", "judge", 2), {"judge": 3}),
    (("source", "put", 2), {"put": 3}),
    (("source", "join", 2), {"join": 1}),
    (("wiring", 0, True), {"put": 3}),
    (("wiring", 1, True), {"judge": 3, "put": 3}),
    (("wiring", 2, True), {"join": 1}),
    (("wiring", 3, True), EACH),
    (("wiring", 4, True), {"put": 3}),
]


@pytest.mark.parametrize(("change", "affected"), AFFECTED, ids=lambda one: " ".join(map(str, one)))
def test_an_edit_makes_exactly_these_nodes_run_again(project, change, affected):
    project.build()

    edit(project, *change)
    project.build()
    assert Counter(project.calls) == affected

    project.build()
    assert project.calls == []


@settings(max_examples=25, deadline=None, derandomize=True)
@given(edits=st.lists(EDITS, min_size=1, max_size=5))
@example(
    edits=[("file", "a", "rude words"), ("renamed", "a", "d"), ("side file", "d", "and more"), ("renamed", "d", "b")]
)
@example(edits=[("source", "mark", 3), ("wiring", 3, True), ("source", "mark", 1), ("wiring", 3, False)])
def test_after_any_edit_exactly_what_is_affected_runs_again(make_project, edits):
    with tempfile.TemporaryDirectory() as folder, tempfile.TemporaryDirectory() as scratch:
        project = make_project(Path(folder))
        project.build()
        called = set(project.seen)
        for turn, change in enumerate(edits):
            edit(project, *change)
            record = project.build(tidy=True)
            calls = Counter(project.seen)
            outputs = {path.name: path.read_text() for path in (project.folder / "made").iterdir()}
            from_scratch = project.build(store=Path(scratch) / str(turn))
            note(f"{change}: {sorted(calls)}")

            needed = set(project.seen)
            versions = source_versions(project)
            assert all(call.split(" ", 1)[1].startswith(f"({versions[call.split()[0]]},") for call in needed)
            faulted = {
                call for call in needed if "'bug" in call and call.startswith("take")
            }  # is tried again each time
            assert calls == Counter(needed - (called - faulted))
            assert told(record) == told(from_scratch)
            assert outputs == {path.name: path.read_text() for path in (project.folder / "made").iterdir()}
            called |= needed
