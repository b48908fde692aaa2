"""The ready-made graphs, built once for all tests into folders of their own."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any, NamedTuple

import pytest
from tangentry.pipeline.cli import main

GRAPHS = Path(__file__).parents[2] / "graphs"


class Built(NamedTuple):
    """What a build left behind."""

    exit: int
    record: dict[str, Any]
    out: Path

    @property
    def assets(self) -> dict[str, dict[str, Any]]:
        """The record's assets by the last part of their names."""
        return {Path(one["name"]).name: one for one in self.record["assets"]}


def build(graph: Path, folder: Path, *words: str) -> Built:
    """Build a graph into `folder`/out, its store beside that."""
    record = folder / "record.json"
    places = ["--set", f"out={folder / 'out'}", "--store", str(folder / "store"), "--record", str(record)]
    exit = main(["build", str(graph), *places, *words])
    return Built(exit, json.loads(record.read_text()), folder / "out")


@pytest.fixture(scope="session", name="build")
def _build() -> Callable[..., Built]:
    """build(graph, folder, further words...) -> exit code, record, folder of results."""
    return build


@pytest.fixture(scope="session")
def graphs() -> Path:
    """The folder of ready-made graphs."""
    return GRAPHS


@pytest.fixture(scope="session")
def demo(tmp_path_factory: pytest.TempPathFactory) -> Built:
    """The ferry terminal, built."""
    return build(GRAPHS / "ferry_terminal" / "ferry_terminal.yaml", tmp_path_factory.mktemp("demo"))


@pytest.fixture(scope="session")
def sent_back(tmp_path_factory: pytest.TempPathFactory) -> Built:
    """The flawed props, built."""
    return build(GRAPHS / "ferry_terminal" / "sent_back.yaml", tmp_path_factory.mktemp("sent_back"))
