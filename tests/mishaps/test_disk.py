"""Full disks, read-only stores, spoilt memories: one clear message each, nothing lost, and the next build goes on."""

from __future__ import annotations

import os
import sqlite3
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from tangentry.pipeline.cli import main
from tangentry.pipeline.ledger import Ledger, Output
from tangentry.pipeline.store import Store
from tangentry.pipeline.writing import WriteError, write_whole

LIMITED = """
import resource, sys
resource.setrlimit(resource.RLIMIT_FSIZE, (int(sys.argv[1]),) * 2)
from tangentry.pipeline.cli import main
sys.exit(main(["build", *sys.argv[2:]]))
"""  # a limit on the size of files is as good as a full disk: writing fails, half way through


def build(*words: object, limit: int | None = None) -> subprocess.CompletedProcess[str]:
    command = ["-c", LIMITED, str(limit)] if limit else ["-m", "tangentry.pipeline.cli", "build"]
    return subprocess.run([sys.executable, *command, *map(str, words)], capture_output=True, text=True, check=False)


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """A disk of 200 kB."""
    place = tmp_path / "disk"
    place.mkdir()
    if subprocess.run(["mount", "-t", "tmpfs", "-o", "size=200k", "none", place], capture_output=True).returncode:
        pytest.skip("only who may mount can have a small disk")
    yield place
    subprocess.run(["umount", "-l", place], check=True)


@pytest.mark.parametrize("workers", [1, 2])
@pytest.mark.parametrize("limit", [100, 3_000, 21_000, 100_000])
def test_a_disk_that_fills_up_ends_the_build_in_one_message(project, limit, workers):
    project.edit("kinds/take.py", "20000", "200000")

    done = build(project.graph, "--workers", workers, limit=limit)

    assert done.returncode == 1 and done.stderr.count("\n") == 1, done.stderr
    assert "can't be written" in done.stderr and "free some space" in done.stderr
    assert not list(project.folder.rglob("*.unfinished")) and Store(project.folder / ".tangentry").verify() == []
    assert project.build().sound


def test_a_really_full_disk_ends_the_build_in_one_message_and_keeps_what_was_made(project, small_disk):
    for name in "defghijklmnop":
        project.write(f"props/{name}.txt", f"hello {name}\n")
    project.edit(
        "kinds/take.py", "np.arange(20000, dtype=np.uint8)", "np.full(20000, len(str(file)) + ord(words[6]), np.uint8)"
    )

    done = build(project.graph, "--store", small_disk)

    assert done.returncode == 1 and done.stderr.count("\n") == 1, done.stderr
    assert "the store can't be written (" in done.stderr and "free some space" in done.stderr
    assert Store(small_disk).verify() == []
    subprocess.run(["mount", "-o", "remount,size=20m", small_disk], check=True)
    assert project.build(store=small_disk).sound and project.calls.count("take") < 16


def test_a_full_disk_below_the_outputs_ends_the_build_and_keeps_the_old_files(project, small_disk):
    project.build({"out": str(small_disk)})
    kept = (small_disk / "a.out").read_text()
    (small_disk / "ballast").write_bytes(bytes(180_000))
    project.write("props/a.txt", "long words " * 5_000)

    done = build(project.graph, "--set", f"out={small_disk}")

    assert done.returncode == 1 and done.stderr.count("\n") == 1, done.stderr
    assert "a.out: can't be written: No space left on device" in done.stderr
    assert (small_disk / "a.out").read_text() == kept and not list(small_disk.glob(".*"))


def test_a_read_only_store_is_told_in_one_message(project, small_disk):
    project.build(store=small_disk)
    subprocess.run(["mount", "-o", "remount,ro", small_disk], check=True)
    project.write("props/a.txt", "new\n")

    for command in (["build"], ["build", "--workers", "2"]):
        words = [sys.executable, "-m", "tangentry.pipeline.cli", *command, project.graph, "--store", small_disk]
        done = subprocess.run(words, capture_output=True, text=True, check=False)
        assert done.returncode == 1 and done.stderr.count("\n") == 1, done.stderr
        assert "the store can't be written" in done.stderr and "name another with --store" in done.stderr
    assert project.build(store=project.folder / "another", overwrite=True).sound


def test_planning_needs_to_write_nothing(project, small_disk, capsys):
    project.build(store=small_disk)
    project.write("props/a.txt", "new\n")
    subprocess.run(["mount", "-o", "remount,ro", small_disk], check=True)

    assert main(["plan", str(project.graph), "--store", str(small_disk)]) == 0
    assert "file props/a.txt changed" in capsys.readouterr().out


@pytest.mark.parametrize("words", [["--store", "taken"], ["--record", "taken/record.json"]])
def test_a_place_that_is_a_file_is_told_in_one_message(project, words, monkeypatch, capsys):
    monkeypatch.chdir(project.folder)
    project.write("taken", "a file")

    assert main(["build", "graph.yaml", *words]) == 1
    told = capsys.readouterr().err
    assert told.count("\n") == 1 and "taken" in told and "written" in told


def test_a_picture_that_cannot_be_written_is_told_in_one_message(project, capsys):
    project.write("taken", "a file")

    assert main(["draw", str(project.graph), "-o", str(project.folder / "taken/graph.svg")]) == 1
    assert capsys.readouterr().err.endswith("taken/graph.svg: can't be written: File exists\n")


def test_what_was_there_stays_when_writing_fails(tmp_path):
    place = tmp_path / "file"
    place.write_text("old")

    def fail_half_way(file: Any) -> None:
        file.write(b"half")
        raise OSError(28, "No space left on device")

    with pytest.raises(WriteError, match="file: can't be written: No space left on device"):
        write_whole(place, fail_half_way)
    assert place.read_text() == "old" and os.listdir(tmp_path) == ["file"]


@pytest.mark.parametrize("place", range(0, 28_000, 3_500))
def test_a_spoilt_ledger_costs_reasons_never_results(project, place):
    project.build()
    ledger = project.folder / ".tangentry/ledger.sqlite"
    content = bytearray(ledger.read_bytes())
    content[place : place + 400] = os.urandom(400)
    ledger.write_bytes(content)

    record = project.build()

    assert record.sound and project.calls == [] and project.read("made/a.out") == "HELLO A\nHELLO A\n"


def test_a_ledger_that_is_gone_costs_reasons_never_results(project):
    project.build()
    (project.folder / ".tangentry/ledger.sqlite").unlink()
    project.write("props/a.txt", "new\n")

    record = project.build()

    assert project.calls == sorted(["take", "loud", "judge", "put", "join"])
    assert record.assets[0].errors == [
        "made/a.out: is there already and was not written by this graph; move it away, or build with --overwrite"
    ]  # who wrote it is not known any more, so it is left alone
    assert project.build(overwrite=True).sound and project.read("made/a.out") == "NEW\nNEW\n"


def test_a_ledger_that_another_program_holds_is_waited_for(tmp_path):
    ledger = Ledger(tmp_path)
    other = sqlite3.connect(tmp_path / "ledger.sqlite")
    other.execute("begin immediate")
    other.execute("insert into outputs values ('x', 'g', 'a', 'n', 'd')")
    other.commit()
    other.close()

    ledger.note_output("y", Output("g", "a", "n", "d"))

    assert set(ledger.outputs()) == {"x", "y"}
    ledger.close()
