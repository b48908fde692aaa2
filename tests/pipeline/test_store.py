"""The store: what is kept, read back, spoilt, set aside and trimmed."""

from __future__ import annotations

import os
import time
from pathlib import Path

import numpy as np
import pytest
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

    owner = numbers
    while not isinstance(owner, np.memmap):
        owner = owner.base
    assert not numbers.flags.writeable


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


def test_arrays_of_python_objects_are_refused(tmp_path):
    with pytest.raises(TypeError, match="Python objects"):
        Store(tmp_path).keep(Leaf(np.array([object()])))


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


def test_verify_finds_every_damaged_object(tmp_path):
    store = Store(tmp_path)
    store.keep(tree())
    store.keep_result("ab" * 32, Result({"": None}, {}))
    spoilt = [next((tmp_path / room).glob("*/*")) for room in ("arrays", "values", "results")]
    for path in spoilt:
        path.write_bytes(b"spoilt")

    assert sorted(store.verify()) == sorted(spoilt) and store.verify() == []


def test_trim_removes_old_results_and_what_only_they_needed(tmp_path):
    store = Store(tmp_path)
    for key, words in (("aa" * 32, "old"), ("bb" * 32, "new")):
        store.keep_result(key, Result({"": store.keep(Leaf(np.full(5000, ord(words[0])), words))}, {}))
    before = time.time() - 10 * 86400
    for path in tmp_path.glob("*/*/*"):
        os.utime(path, (before, before))
    store.touch("bb" * 32)

    store.trim(keep_days=5)

    assert store.results("aa" * 32) == []
    kept = store.results("bb" * 32)[0].outputs[""]
    assert store.fetch(kept, Leaf).name == "new" and store.size()["arrays"][0] == 1


def test_trim_leaves_alone_what_was_used_within_the_hour(tmp_path):
    store = Store(tmp_path)
    store.keep_result("aa" * 32, Result({"": store.keep(tree())}, {}))

    assert store.trim(keep_days=0, max_size=0) == (0, 0)


def test_a_build_makes_again_what_the_store_lost(project):
    project.build()
    for path in (project.folder / ".tangentry/arrays").glob("*/*"):
        path.unlink()
    (project.folder / "made/a.out").unlink()

    record = project.build()

    assert record.sound and project.read("made/a.out") == "HELLO A\nHELLO A\n"


def test_a_store_that_cannot_be_written_ends_in_one_message(project, monkeypatch):
    def full(path: Path, *_: object) -> None:
        raise WriteError(path, OSError(28, "No space left on device"))

    monkeypatch.setattr("tangentry.pipeline.store.write_whole", full)

    with pytest.raises(StoreError, match=r"can't be written \(No space left on device\); free some space"):
        project.build()
