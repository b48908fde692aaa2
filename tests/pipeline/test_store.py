"""The store: what is kept, read back, spoilt, set aside and trimmed."""

from __future__ import annotations

import mmap
import os
import subprocess
import sys
import time
from collections.abc import Iterable
from pathlib import Path

import numpy as np
import pytest
from tangentry.pipeline.arrays import digest_array
from tangentry.pipeline.flow import Array, flow_value
from tangentry.pipeline.store import Damaged, Result, Store, StoreError
from tangentry.pipeline.writing import WriteError


@flow_value
class Leaf:
    numbers: Array
    name: str = ""
    share: float = 0.5


@flow_value
class Tree:
    leaves: tuple[Leaf, ...]
    best: Leaf | None
    notes: dict[str, float | str]


def tree() -> Tree:
    leaf = Leaf(np.arange(12, dtype=np.float32).reshape(3, 4), "läf", float("inf"))
    return Tree((leaf, Leaf(np.zeros((0, 3), np.int16))), leaf, {"a": 1.5, "b": "words", "c": 2})


def test_a_value_comes_back_as_it_went_in(tmp_path):
    store = Store(tmp_path)

    back = store.fetch(store.keep(tree()), Tree)

    assert [leaf.numbers.tolist() for leaf in back.leaves] == [leaf.numbers.tolist() for leaf in tree().leaves]
    assert back.leaves[1].numbers.shape == (0, 3) and back.leaves[1].numbers.dtype == np.int16
    assert (back.best.name, back.best.share, back.notes) == ("läf", float("inf"), tree().notes)


def test_a_value_read_back_is_mapped_from_its_file_and_read_only(tmp_path):
    store = Store(tmp_path)

    numbers = store.fetch(store.keep(tree()), Tree).best.numbers

    assert isinstance(numbers.base, mmap.mmap) and not numbers.flags.writeable


@pytest.mark.parametrize(
    "array",
    [np.array(3.0), np.zeros((0, 3), ">i2"), np.array(["äb", "c"]), np.array([True]), np.zeros((2, 0, 3)),
     np.asfortranarray(np.arange(6.0).reshape(2, 3)), np.arange(10)[::2], np.array(["2020-01-01"], "M8[D]")],
    ids=lambda array: f"{array.dtype}{array.shape}",
)  # fmt: skip
def test_any_array_comes_back_and_numpy_reads_its_file_too(tmp_path, array):
    digest = Store(tmp_path)._keep_array(array)

    back = Store(tmp_path).fetch_array(digest)
    by_numpy = np.load(tmp_path / "arrays" / digest[:2] / f"{digest}.npy", allow_pickle=False)

    for one in (back, by_numpy):
        assert one.dtype == array.dtype and one.shape == array.shape and (one == array).all()


def test_an_array_passed_on_is_neither_hashed_nor_written_again(tmp_path):
    store = Store(tmp_path)
    ballast = np.arange(100_000)
    store.keep(Leaf(ballast, "one"))
    hashed, written = store.digest.hashed, store.written

    store.keep(Leaf(ballast, "two"))

    assert (store.digest.hashed, store.written) == (hashed, written)


def test_an_array_read_from_the_store_and_passed_on_is_not_hashed_again(tmp_path):
    digest = Store(tmp_path).keep(Leaf(np.arange(100_000), "one"))
    store = Store(tmp_path)
    leaf = store.fetch(digest, Leaf)

    store.keep(Leaf(leaf.numbers, "two"))

    assert (store.digest.hashed, store.written) == (0, 0)


def test_arrays_of_python_objects_or_of_records_are_refused(tmp_path):
    for array in (np.array([object()]), np.zeros(2, [("x", "f4"), ("y", "f4")])):
        with pytest.raises(TypeError, match="can't flow along an edge"):
            Store(tmp_path).keep(Leaf(array))


@pytest.mark.parametrize("room", ["arrays", "values"])
@pytest.mark.parametrize("harm", ["truncated", "flipped", "gone", "emptied"])
def test_a_damaged_object_is_noticed_and_set_aside(tmp_path, room, harm):
    digest = Store(tmp_path).keep(tree())
    path = max((tmp_path / room).glob("*/*"), key=lambda path: path.stat().st_size)
    content = bytearray(path.read_bytes())
    content[-20] ^= 1
    {
        "truncated": lambda: path.write_bytes(content[:-9]),
        "flipped": lambda: path.write_bytes(content),
        "gone": path.unlink,
        "emptied": lambda: path.write_bytes(b""),
    }[harm]()

    with pytest.raises(Damaged):
        Store(tmp_path).fetch(digest, Tree)
    assert not path.exists()


def test_verify_finds_every_damaged_object_wherever_it_is_damaged(tmp_path):
    store = Store(tmp_path)
    store.keep(tree())
    store.keep_result("ab" * 32, Result({"": None}, {}, files=[("a", "b")]))
    objects = [path for room in ("arrays", "values", "results") for path in (tmp_path / room).glob("*/*")]
    assert store.verify() == [] and len(objects) == 4

    for path in objects:
        content = path.read_bytes()
        for place in range(len(content)):
            spoilt = bytearray(content)
            spoilt[place] ^= 1 << place % 8
            path.write_bytes(spoilt)
            assert store.verify() == [path], (path, place)
            path.write_bytes(content)


def test_trim_removes_old_results_and_what_only_they_needed(tmp_path):
    store = Store(tmp_path)
    for key, words in (("aa" * 32, "old"), ("bb" * 32, "new")):
        store.keep_result(key, Result({"": store.keep(Leaf(np.full(5000, ord(words[0])), words))}, {}))
    aged(tmp_path.glob("*/*/*"), days=10)
    store.touch("bb" * 32)

    store.trim(keep_days=5)

    assert store.results("aa" * 32) == []
    kept = store.results("bb" * 32)[0].outputs[""]
    assert store.fetch(kept, Leaf).name == "new" and store.size()["arrays"][0] == 1


def test_trim_leaves_alone_what_was_used_within_the_hour(tmp_path):
    store = Store(tmp_path)
    store.keep_result("aa" * 32, Result({"": store.keep(tree())}, {}))

    assert store.trim(keep_days=0, max_size=0) == (0, 0)


def aged(paths: Iterable[Path], days: float) -> None:
    """Let files have been used so long ago."""
    for path in paths:
        os.utime(path, (time.time() - days * 86400,) * 2)


def test_trim_leaves_alone_what_a_build_under_way_used_however_long_ago_it_began(tmp_path):
    store = Store(tmp_path)
    store.keep_result("aa" * 32, Result({"": store.keep(tree())}, {}))
    store.keep(Leaf(np.arange(5000), "made by the build, not yet named by a result"))
    before = store.size()

    with subprocess.Popen([sys.executable, "-c", BUILDING, tmp_path], stdin=-1, stdout=-1, text=True) as building:
        assert building.stdout is not None and building.stdout.readline() == "begun\n"
        aged(tmp_path.glob("running/*"), days=4)
        aged(tmp_path.glob("*/*/*"), days=3)
        assert store.trim(keep_days=0, max_size=0) == (0, 0) and store.size() == before
        building.kill()

    assert store.trim(keep_days=0, max_size=0)[0] == sum(count for count, _ in before.values())
    assert not list(tmp_path.glob("running/*"))


BUILDING = """
import sys
from tangentry.pipeline.store import Store
with Store(sys.argv[1]).running.one_more():
    print("begun", flush=True)
    sys.stdin.read()
"""


def test_what_a_build_under_way_keeps_again_counts_as_used_now(tmp_path):
    store = Store(tmp_path)
    digest = store.keep(tree())
    aged(tmp_path.glob("*/*/*"), days=3)

    store.keep(tree())
    store.trim(keep_days=0)

    assert Store(tmp_path).fetch(digest, Tree).best.name == "läf"


def test_trim_frees_until_so_much_is_left_the_oldest_first(tmp_path):
    store = Store(tmp_path)
    for number in range(16):
        value = store.keep(Leaf(np.full(2500, number, np.float32), f"{number}"))
        store.keep_result(f"{number:064x}", Result({"": value}, {}))
    aged(tmp_path.glob("*/*/*"), days=30)
    for path in (tmp_path / "results").glob("*/*"):
        aged([path], days=20 - int(path.stem, 16))

    store.trim(max_size=60_000)

    left = [number for number in range(16) if store.results(f"{number:064x}")]
    assert left == list(range(16 - len(left), 16)) and 0 < sum(size for _, size in store.size().values()) <= 60_000


def test_a_build_hashes_and_writes_an_array_that_its_nodes_pass_on_once(project, monkeypatch):
    hashed: list[int] = []

    def counting(array: Array) -> str:
        hashed.append(array.nbytes)
        return digest_array(array)

    monkeypatch.setattr("tangentry.pipeline.arrays.digest_array", counting)

    project.build(only="a")

    ballast = [path for path in (project.folder / ".tangentry/arrays").glob("*/*") if path.stat().st_size > 20_000]
    assert project.calls == ["join", "judge", "loud", "put", "take"]  # two of them give a value that holds the array
    assert hashed.count(20_000) == 1 and len(ballast) == 1


def test_a_build_makes_again_what_the_store_lost(project):
    project.build()
    for path in (project.folder / ".tangentry/arrays").glob("*/*"):
        path.unlink()
    (project.folder / "made/a.out").unlink()

    record = project.build()

    assert record.sound and project.read("made/a.out") == "HELLO A\nHELLO A\n"


def test_a_build_that_meets_a_damaged_object_sets_it_aside_and_makes_it_again(project):
    project.build()
    outputs = {path: path.read_text() for path in (project.folder / "made").iterdir()}
    store = project.folder / ".tangentry"
    objects = [path for room in ("arrays", "values", "results") for path in sorted((store / room).glob("*/*"))]
    for turn, path in enumerate(objects):
        content = bytearray(path.read_bytes())
        content[len(content) // 2] ^= 4
        path.write_bytes(content)
        for output in outputs:
            output.unlink()
        project.write("props/b.txt", f"other words {turn}\n")  # so that what takes all assets reads all values
        project.write("props/b.txt", "hello b\n" if turn % 2 else "good day b\n")

        assert project.build().sound
        assert {path: path.read_text() for path in outputs if path.name != "all.out" and path.stem != "b"} == {
            path: text for path, text in outputs.items() if path.name != "all.out" and path.stem != "b"
        }
    assert list((store / "aside").iterdir())


def test_a_store_that_cannot_be_written_ends_in_one_message(project, monkeypatch):
    def full(path: Path, *_: object) -> None:
        raise WriteError(path, OSError(28, "No space left on device"))

    monkeypatch.setattr("tangentry.pipeline.store.write_whole", full)

    with pytest.raises(StoreError, match=r"can't be written \(No space left on device\); free some space"):
        project.build()
