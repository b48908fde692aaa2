"""Worker processes, builds at the same time, interrupts: the same results, and nothing lost."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections import Counter
from typing import Any

import pytest
from tangentry.pipeline.errors import TangentryError

SLOW = '''
import hashlib, multiprocessing, os, signal, time

from text import Text, note

TRAP = "nowhere"
if os.path.exists(TRAP) and multiprocessing.parent_process():
    if not open(TRAP).read():
        os.remove(TRAP)
    os.kill(os.getpid(), signal.SIGKILL)


def slow(text: Text, *, seconds: float = 0.0, computes: bool = False, dies_with: str = "", log: str = "calls") -> Text:
    """The same, later.

    computes   for a minute without letting Python in
    dies_with  a file that kills the process once
    """
    note(log, "slow", text.words)
    if dies_with and os.path.exists(dies_with):
        os.remove(dies_with)
        os.kill(os.getpid(), signal.SIGKILL)
    time.sleep(seconds)
    if computes:
        hashlib.pbkdf2_hmac("sha256", b"", b"", 100_000_000)
    return text
'''


def with_slow(project: Any, settings: str) -> None:
    project.write("kinds/slow.py", SLOW)
    project.edit("graph.yaml", "text: raw,", "text: late,")
    project.edit(
        "graph.yaml", "  said:", f"  late:    {{node: slow, text: raw, log: {project.log}, {settings}}}\n  said:"
    )


def start_build(project: Any, *words: str) -> subprocess.Popen[str]:
    command = [sys.executable, "-m", "tangentry.pipeline.cli", "build", str(project.graph), *words]
    return subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, start_new_session=True)


def timeless(data: Any) -> Any:
    """A record without how long things took."""
    if isinstance(data, dict):
        return {name: timeless(one) for name, one in data.items() if name != "seconds"}
    return [timeless(one) for one in data] if isinstance(data, list) else data


def test_workers_make_and_tell_what_one_process_makes_and_tells(project):
    for name, words in {"b": "rude", "d": "broken", "e": "bug", "f": "six"}.items():
        project.write(f"props/{name}.txt", words)
    alone = project.build(store=project.folder / "one")
    made = {path.name: path.read_bytes() for path in (project.folder / "made").iterdir()}
    for path in (project.folder / "made").iterdir():
        path.unlink()

    many = project.build(workers=3, store=project.folder / "many")

    assert timeless(many.plain()) == timeless(alone.plain())
    assert {path.name: path.read_bytes() for path in (project.folder / "made").iterdir()} == made


def test_a_killed_worker_costs_its_step_alone_and_the_next_build_resumes(project):
    trap = project.write("trap", "")
    with_slow(project, f'dies_with: "{trap}"')

    first = project.build(workers=2)
    calls = Counter(project.calls)
    second = project.build(workers=2)

    failed = [asset for asset in first.assets if asset.state == "failed"]
    assert len(failed) == 1 and failed[0].errors == [
        'node "late": its worker process ended by signal 9 while it ran (killed, or out of memory)'
    ]
    assert [step["state"] for step in failed[0].steps] == ["ran", "failed", "blocked", "blocked", "blocked"]
    assert calls == {"take": 3, "slow": 3, "loud": 2, "judge": 2, "put": 2, "join": 1}
    assert second.sound and Counter(project.calls) == {"slow": 1, "loud": 1, "judge": 1, "put": 1, "join": 1}


def test_a_worker_killed_while_it_runs_no_step_costs_nothing(project):
    with_slow(project, "seconds: 0")
    project.edit("kinds/slow.py", '"nowhere"', repr(str(project.write("trap", ""))))

    assert project.build(workers=2).sound and not (project.folder / "trap").exists()


def test_workers_that_never_begin_end_the_build_in_one_message(project):
    with_slow(project, "seconds: 0")
    project.edit("kinds/slow.py", '"nowhere"', repr(str(project.write("trap", "stays"))))

    with pytest.raises(TangentryError, match=r"worker processes end by signal 9 before they begin props/\w.txt"):
        project.build(workers=2)


@pytest.mark.parametrize("workers", ["1", "2"])
@pytest.mark.parametrize("settings", ["seconds: 3600", "computes: true"])
def test_an_interrupt_ends_the_build_at_once_and_the_next_one_goes_on(project, workers, settings):
    with_slow(project, settings)
    with start_build(project, "--workers", workers) as build:
        while not project.log.exists() or "slow" not in project.calls:
            assert build.poll() is None
            time.sleep(0.02)
        os.killpg(build.pid, signal.SIGINT)  # as a terminal does: to every process of the build
        _, told = build.communicate(timeout=50)

    assert build.returncode == 130 and told.count("\n") == 2 and "the next build goes on from there" in told
    taken = project.calls.count("take")
    project.edit("graph.yaml", settings, "seconds: 0")
    assert project.build().sound and not list(project.folder.rglob("*.unfinished"))
    assert project.calls.count("take") == 3 - taken


@pytest.mark.parametrize("workers", ["1", "2"])
def test_a_killed_build_leaves_everything_whole_and_the_next_one_goes_on(project, workers):
    with_slow(project, "seconds: 0.1")
    with start_build(project, "--workers", workers) as build:
        while not (project.folder / "made").exists():
            assert build.poll() is None
            time.sleep(0.01)
        build.kill()
        build.communicate()
    project.write("props/a.txt", "other words, so that what was put in place is put there anew\n")

    record = project.build()

    assert record.sound and record.count("reused") > 0 and project.read("made/a.out").startswith("OTHER")


def test_two_builds_at_once_are_safe_and_share_the_work(project):
    with_slow(project, "seconds: 0.1")

    both = [start_build(project), start_build(project, "--workers", "2")]
    told = [one.communicate(timeout=60) for one in both]

    assert [one.returncode for one in both] == [0, 0], told
    assert Counter(project.calls) == {"take": 3, "slow": 3, "loud": 3, "judge": 3, "put": 3, "join": 1}
    assert project.build().count("ran") == 0
