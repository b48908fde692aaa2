"""Worker processes: the same results, and one that dies costs its step alone."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time

SLOW = '''
import os, signal, time

from text import Text


def slow(text: Text, *, seconds: float = 0.0, dies_with: str = "") -> Text:
    """The same, later.

    dies_with  a file that kills the process once
    """
    if dies_with and os.path.exists(dies_with):
        os.remove(dies_with)
        os.kill(os.getpid(), signal.SIGKILL)
    time.sleep(seconds)
    return text
'''


def with_slow(project, line: str) -> None:
    project.write("kinds/slow.py", SLOW)
    project.edit("graph.yaml", "text: raw,", "text: late,")
    project.edit("graph.yaml", "  said:", f"  late:    {line}\n  said:")


def test_workers_make_what_one_process_makes(project):
    project.build(workers=2, store=project.folder / "two")
    many = project.read("made/all.out")
    (project.folder / "made/all.out").unlink()

    record = project.build(store=project.folder / "one", overwrite=True)

    assert project.read("made/all.out") == many and record.sound


def test_a_killed_worker_costs_its_step_alone_and_the_next_build_resumes(project):
    trap = project.write("trap", "")
    with_slow(project, f'{{node: slow, text: raw, dies_with: "{trap}"}}')

    first = project.build(workers=2)
    second = project.build(workers=2)

    failed = [asset for asset in first.assets if asset.state == "failed"]
    assert len(failed) == 1 and failed[0].errors == [
        'node "late": its worker process ended by signal 9 while it ran (killed, or out of memory)'
    ]
    assert first.count("failed") == 1 and second.sound and second.states["made"] == 1


def test_an_interrupt_ends_within_two_seconds_and_the_next_build_goes_on(project):
    with_slow(project, "{node: slow, text: raw, seconds: 1.5}")
    build = subprocess.Popen(
        [sys.executable, "-m", "tangentry.pipeline.cli", "build", str(project.graph)],
        stderr=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )
    deadline = time.monotonic() + 20
    while time.monotonic() < deadline and not (project.log.exists() and "take" in project.calls):
        time.sleep(0.02)
    time.sleep(0.2)
    began = time.monotonic()
    build.send_signal(signal.SIGINT)
    _, told = build.communicate(timeout=10)

    assert time.monotonic() - began < 2 and build.returncode == 130 and "Traceback" not in told
    assert project.build().sound and not list(project.folder.rglob("*.unfinished"))
    assert project.calls.count("take") == 2


def test_two_builds_at_once_are_safe(project):
    with_slow(project, "{node: slow, text: raw, seconds: 0.2}")
    words = [sys.executable, "-m", "tangentry.pipeline.cli", "build", str(project.graph)]
    both = [
        subprocess.Popen(words, stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True, env={**os.environ})
        for _ in range(2)
    ]
    told = [one.communicate(timeout=60)[0] for one in both]

    assert [one.returncode for one in both] == [0, 0], told
    assert project.build().count("ran") == 0
