"""Clocks that jump, and files from the future: what is built is always what the files say."""

from __future__ import annotations

import os
import time
from typing import Any

import pytest
from tangentry.pipeline.cli import main
from tangentry.pipeline.ledger import Ledger
from tangentry.pipeline.store import Result, Store

DAY = 86_400.0


@pytest.fixture
def clock(monkeypatch: Any) -> Any:
    """Sets this process's clock so many days off."""
    true, true_ns = time.time, time.time_ns

    def jump(days: float) -> None:
        monkeypatch.setattr(time, "time", lambda: true() + days * DAY)
        monkeypatch.setattr(time, "time_ns", lambda: true_ns() + int(days * DAY * 1e9))

    return jump


@pytest.mark.parametrize("days", [-4000, -1, 1, 4000])
def test_a_clock_that_jumps_between_builds_costs_nothing(project, clock, days):
    project.build()

    clock(days)
    assert project.build().sound and project.calls == []
    project.write("props/b.txt", "good day\n")
    assert project.build().count("ran") == 5 and project.read("made/b.out") == "GOOD DAY\n" * 2


@pytest.mark.parametrize("days", [-4000, -0.001, 0.001, 4000])
def test_files_of_any_age_are_read_anew_when_they_change(project, days):
    prop = project.folder / "props/b.txt"
    for words in ("hello b\n", "good day\n", "good eve\n"):
        prop.write_text(words)
        os.utime(prop, (time.time() + days * DAY,) * 2)
        project.build()

        assert project.read("made/b.out") == words.upper() * 2


def test_a_change_that_leaves_size_and_time_alone_is_seen_while_the_time_is_fresh(tmp_path):
    file = tmp_path / "file"
    ledger = Ledger(tmp_path / "store")
    file.write_text("one")
    stat = file.stat()
    before = ledger.digest_of(file)

    file.write_text("two")
    os.utime(file, ns=(stat.st_atime_ns, stat.st_mtime_ns))  # what a coarse clock does: two saves in one tick

    assert ledger.digest_of(file) != before
    ledger.close()


def test_a_digest_is_remembered_only_once_the_time_has_settled(tmp_path):
    file = tmp_path / "file"
    file.write_text("one")
    os.utime(file, (time.time() - 60,) * 2)
    ledger = Ledger(tmp_path / "store")
    for _ in range(3):
        ledger.digest_of(file)
    settled = ledger.hashed
    os.utime(file)  # now: may change again within the same tick
    for _ in range(3):
        ledger.digest_of(file)
    ledger.close()

    assert (settled, ledger.hashed) == (1, 4)


@pytest.mark.parametrize("days", [-4000, -1, 1, 4000])
def test_a_sealed_build_notices_changes_whatever_the_clock_says(project, clock, capsys, days):
    main(["build", str(project.graph)])
    project.settle()
    main(["build", str(project.graph)])
    assert list((project.folder / ".tangentry/seals").iterdir())

    clock(days)
    project.write("props/b.txt", "hello B\n")  # as long as it was
    capsys.readouterr()

    assert main(["build", str(project.graph)]) == 0
    assert capsys.readouterr().out.splitlines()[-1].startswith("3 assets: 1 made, 2 unchanged")


@pytest.mark.parametrize("days", [-4000, 4000])
def test_trimming_under_a_wrong_clock_spares_what_a_build_under_way_uses(tmp_path, clock, days):
    store = Store(tmp_path)
    clock(days)
    with Store(tmp_path).running.one_more():
        store.keep_result("ab" * 32, Result({"": None}, {}))
        clock(0)
        # The lock on the mark of a build is a process's own; what another process sees is tested beside the store.
        store.touch("ab" * 32)
        store.trim(keep_days=0, max_size=0)

    assert store.results("ab" * 32)
