"""The same plan on a cluster: a real scheduler, two worker processes, the store in a shared folder or behind a URL."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from tangentry.pipeline.errors import TangentryError
from tangentry.pipeline.remote import RemoteStore
from tangentry.pipeline.store import Damaged, Store

pytest.importorskip("fsspec")


class Machines:
    """A scheduler and its workers, each a process."""

    def __init__(self, folder: Path) -> None:
        self.note = folder / "scheduler.json"
        self.processes = [self.start("scheduler", "--host", "127.0.0.1", "--port", "0")]
        self.processes += [self.worker() for _ in range(2)]
        deadline = time.monotonic() + 60
        while not self.note.exists() and time.monotonic() < deadline:
            time.sleep(0.05)
        self.address = json.loads(self.note.read_text())["address"]

    def start(self, *words: str) -> subprocess.Popen[bytes]:
        command = [sys.executable, "-m", "dask", *words, "--no-dashboard", "--scheduler-file", str(self.note)]
        return subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)

    def worker(self) -> subprocess.Popen[bytes]:
        return self.start("worker", "--no-nanny", "--nthreads", "1", "--death-timeout", "60")


@pytest.fixture(scope="module")
def machines(tmp_path_factory) -> Iterator[Machines]:
    pytest.importorskip("distributed")
    machines = Machines(tmp_path_factory.mktemp("machines"))
    yield machines
    for process in machines.processes:
        process.kill()
        process.wait()


def made(project) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in (project.folder / "made").iterdir()}


def told(record) -> dict[str, Any]:
    """A record without what may differ from run to run: how long things took."""

    def timeless(data: Any) -> Any:
        if isinstance(data, dict):
            return {name: timeless(one) for name, one in data.items() if name != "seconds"}
        return [timeless(one) for one in data] if isinstance(data, list) else data

    plain: dict[str, Any] = timeless(record.plain())
    return plain


@pytest.mark.parametrize("store", ["shared folder", "url"])
def test_a_cluster_makes_what_one_process_makes_byte_for_byte(project, machines, store):
    place = project.folder / "shared" if store == "shared folder" else f"file://{project.folder}/shared"
    project.write("props/b.txt", "rude\n")
    project.write("props/d.txt", "broken\n")
    here = told(project.build(store=project.folder / "own"))
    alone = made(project)
    for path in (project.folder / "made").iterdir():
        path.unlink()

    (project.folder / ".tangentry").mkdir(exist_ok=True)
    there = told(project.build(store=place, cluster=machines.address))

    assert there == here and made(project) == alone
    assert Store(project.folder / "shared").size() == Store(project.folder / "own").size()
    shutil.rmtree(project.folder / ".tangentry")  # this machine's own copies of what lies behind the URL
    assert project.build(store=place, cluster=machines.address).count("ran") == 0


def test_a_worker_killed_mid_build_costs_nothing_that_was_kept(project, machines):
    trap = project.write("trap", "")
    project.write("kinds/slow.py", DEADLY)
    project.edit("graph.yaml", "text: raw,", "text: late,")
    project.edit("graph.yaml", "  said:", f'  late:    {{node: slow, text: raw, dies_with: "{trap}"}}\n  said:')

    record = project.build(cluster=machines.address)

    assert not trap.exists() and record.sound and project.read("made/all.out").count("HELLO") == 6
    assert project.calls.count("take") == 3  # what the dead worker had kept was not made again
    machines.processes.append(machines.worker())


DEADLY = '''
import os, signal

from text import Text


def slow(text: Text, *, dies_with: str = "") -> Text:
    """The same, unless a file is there: then it goes, and the process with it."""
    if os.path.exists(dies_with):
        os.remove(dies_with)
        os.kill(os.getpid(), signal.SIGKILL)
    return text
'''


def test_a_scheduler_that_does_not_answer_is_told_in_one_line(project, monkeypatch):
    pytest.importorskip("distributed")
    monkeypatch.setattr("tangentry.pipeline.cluster.REACH_SECONDS", 0.5)

    with pytest.raises(TangentryError, match=r"--cluster tcp://127.0.0.1:9: no scheduler answers there"):
        project.build(cluster="tcp://127.0.0.1:9")


def test_a_store_behind_a_url_gives_a_second_machine_what_the_first_made(project, tmp_path):
    url = f"memory://{tmp_path.name}"
    project.build(store=url)

    for local in (project.folder / ".tangentry").iterdir():
        local.rename(tmp_path / "away")  # a machine that has no copies yet

    assert project.build(store=url, overwrite=True).count("ran") == 0


def test_an_object_spoilt_behind_the_url_is_set_aside_there_and_sent_again(tmp_path):
    store = RemoteStore(tmp_path / "one", f"file://{tmp_path}/there")
    digest = store._keep_array(np.arange(5000))
    spoilt = next((tmp_path / "there/arrays").glob("*/*"))
    spoilt.write_bytes(b"spoilt")
    with pytest.raises(Damaged):
        RemoteStore(tmp_path / "two", store.url).fetch_array(digest)

    RemoteStore(tmp_path / "two", store.url)._keep_array(np.arange(5000))

    assert RemoteStore(tmp_path / "three", store.url).fetch_array(digest).sum() == np.arange(5000).sum()


def test_a_url_that_leads_nowhere_is_told_in_one_line(project):
    with pytest.raises(TangentryError) as caught:
        project.build(store="nowhere://x")

    assert "nowhere://x" in str(caught.value) and "\n" not in str(caught.value)
