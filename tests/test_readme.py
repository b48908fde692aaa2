"""What README promises is so."""

from __future__ import annotations

import json
import re
import shlex
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from tangentry.pipeline.cli import main
from tangentry.pipeline.graph import read_graph

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text()


def blocks(language: str) -> list[str]:
    return re.findall(rf"```{language}\n(.*?)```", README, re.S)


def test_the_python_example_runs(tmp_path):
    (example,) = blocks("python")
    shutil.copytree(ROOT / "graphs", tmp_path / "graphs", ignore=shutil.ignore_patterns(".tangentry", "build*"))
    example = example.replace("/tmp/quay", "quay")
    run = subprocess.run([sys.executable, "-c", example], capture_output=True, text=True, check=True, cwd=tmp_path)
    told = run.stdout.splitlines()

    assert re.fullmatch(r"\d+ steps", told[0])
    assert "'made'" in told[1] and "'failed': 0" in told[1]
    assert re.fullmatch(r"\(\d+, 3\)", told[2])


def test_the_graph_file_builds(tmp_path, capsys):
    (graph,) = [block for block in blocks("yaml") if block.startswith("tangentry: 1")]
    (tmp_path / "props").mkdir()
    for prop in ("crate.obj", "bollard.obj"):
        (tmp_path / "props" / prop).write_bytes((ROOT / "graphs/ferry_terminal/props" / prop).read_bytes())
    (tmp_path / "quay.yaml").write_text(graph)

    assert main(["build", str(tmp_path / "quay.yaml")]) == 0
    assert {file.name for file in (tmp_path / "build").iterdir()} == {"crate.glb", "bollard.glb", "tally.csv"}


@pytest.mark.parametrize("command", re.findall(r"^\.venv/bin/tangentry (.*?)\s*(?:#.*|>.*)?$", README, re.M))
def test_every_command_is_understood(command, tmp_path, capsys, monkeypatch):
    """All but the names of files: each ends with what a file that is not there ends with, never with wrong usage."""
    monkeypatch.chdir(tmp_path)
    try:
        code = main(shlex.split(command))
    except SystemExit as stopped:
        code = stopped.code

    assert "usage:" not in capsys.readouterr().err
    assert code in (0, 1, 2)


def test_every_option_it_names_exists(capsys):
    told = ""
    for command in ("build", "plan", "draw", "nodes", "inspect", "store"):
        with pytest.raises(SystemExit):
            main([command, "--help"])
        told += capsys.readouterr().out
    named = set(re.findall(r"(?<![\w-])--[a-z][a-z-]+", README)) - {"--silent", "--prefix"}  # npm's

    assert len(named) >= 10 and {option for option in named if option not in told} == set()


def test_the_keys_of_the_record_are_those_in_the_table(tmp_path, capsys):
    main(["build", str(ROOT / "graphs/ferry_terminal/sent_back.yaml"), "--set", f"out={tmp_path}", "--store",
          str(tmp_path / "store"), "--record", str(tmp_path / "record.json")])  # fmt: skip
    record = json.loads((tmp_path / "record.json").read_text())
    table = README.split("| `tangentry_record`")[1].split("\n\n")[0]
    told = re.findall(r"^\| ((?:`\w+`,? ?)+)\|", "| `tangentry_record`" + table, re.M)
    finding = next(one["findings"][0] for one in record["assets"] if one["findings"])

    assert set(re.findall(r"`(\w+)`", " ".join(told))) == set(record)
    assert all(f"`{key}`" in README for key in [*record["assets"][0], *finding, *finding["where"][0]])


def test_the_files_it_names_are_there():
    for name in re.findall(r"`((?:graphs|build)?/?[\w/]+\.(?:yaml|md|html))`", README):
        near = [ROOT / name, ROOT / "graphs/ferry_terminal" / name]
        assert any(path.exists() for path in near) or name == "build/index.html"
    assert read_graph(ROOT / "graphs/anything.yaml")
