"""Building again at every save."""

from __future__ import annotations

import subprocess
import sys
import threading
import time

import pytest
from tangentry.pipeline.watch import wait_for_saves

pytest.importorskip("watchfiles")


def saves(project, names, gap: float = 0.01):
    """A thread that saves files in a burst, again and again until it is told to stop: the watch may start late."""
    stop = threading.Event()

    def run() -> None:
        while not stop.wait(1.0):
            for name in names:
                project.write(name, f"words {time.time_ns()}\n")
                stop.wait(gap)

    thread = threading.Thread(target=run)
    thread.start()
    return stop, thread


def test_a_burst_of_saves_counts_as_one(project):
    names = [f"props/{name}.txt" for name in "abc"]
    stop, thread = saves(project, names)
    try:
        folder = project.folder / "props"
        saved = wait_for_saves(
            [folder, *(project.folder / name for name in names)], [], project.folder / "s", time.time()
        )
    finally:
        stop.set()
        thread.join()

    assert saved == [str(project.folder / name) for name in names]


def test_what_was_saved_while_a_build_ran_counts_as_the_next_burst(project):
    prop = project.folder / "props/a.txt"

    assert wait_for_saves([prop], [], project.folder / "s", prop.stat().st_mtime - 1) == [str(prop)]


def test_what_builds_write_themselves_is_no_save(project):
    prop, output, kept = (project.write(name, "x") for name in ("props/a.txt", "made/a.out", "s/ledger"))
    before = prop.stat().st_mtime - 1

    assert wait_for_saves([prop, output, kept], [output], project.folder / "s", before) == [str(prop)]


def test_watching_builds_again_at_a_save_and_ends_at_an_interrupt(project):
    words = [sys.executable, "-u", "-m", "tangentry.pipeline.cli", "build", str(project.graph), "--watch"]
    watching = subprocess.Popen(words, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    assert watching.stdout is not None
    told = [watching.stdout.readline() for _ in range(5)]
    project.write("props/b.txt", "good day\n")
    while not told[-1].startswith("3 assets: 1 made"):
        told.append(watching.stdout.readline())
        assert told[-1], told
    watching.send_signal(2)
    _, errors = watching.communicate(timeout=60)

    assert "saved: " in "".join(told) and "props/b.txt" in "".join(told)
    assert watching.returncode == 130 and "Traceback" not in errors and project.read("made/b.out") == "GOOD DAY\n" * 2
