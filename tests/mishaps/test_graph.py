"""Hostile and broken graph files and kinds: each ends in one clear message and exit code 2, or costs its step alone."""

from __future__ import annotations

from typing import Any

import pytest
from tangentry.pipeline.cli import main

HEAD = "tangentry: 1\nkinds: kinds\nlibrary: props/*.txt\n"
RAW = "per_asset:\n  raw: {node: take, file: '{file}'}\n"
LAUGHS = "lol0: &lol0 lol\n" + "".join(
    f"lol{level}: &lol{level} [{', '.join([f'*lol{level - 1}'] * 10)}]\n" for level in range(1, 10)
)


def told(project: Any, capsys: Any, code: int = 2) -> str:
    """What a build says to stderr; it says it in one line and makes nothing."""
    assert main(["build", str(project.graph)]) == code
    said = capsys.readouterr().err
    assert said.count("\n") == 1 and len(said) < 1000, said[:2000]
    assert not (project.folder / "made").exists()
    return str(said)


def test_a_million_laughs_bomb_is_refused_at_its_first_anchor(project, capsys):
    project.write("graph.yaml", LAUGHS + HEAD + RAW)

    assert 'graph.yaml:1:7: an anchor ("&lol0"); write the value out' in told(project, capsys)


def test_a_bomb_within_an_option_from_the_command_line_is_refused(project, capsys):
    assert main(["build", str(project.graph), "--set", "times=[&a [1], *a, *a]"]) == 2
    assert '--set:1:2: an anchor ("&a")' in capsys.readouterr().err


def test_a_hundred_thousand_nodes_are_refused(project, capsys):
    nodes = "".join(f"  n{number}: {{node: loud, text: raw}}\n" for number in range(100_000))
    project.write("graph.yaml", HEAD + RAW + nodes)

    assert "more than 20000 entries; use a library pattern, or several graphs" in told(project, capsys)


def test_graphs_as_nodes_that_multiply_are_refused(project, capsys):
    """A thousand nodes used a thousand times would be a million."""
    inner = "".join(f"  n{number}: {{node: loud, text: words}}\n" for number in range(1000))
    project.write("inner.yaml", f"tangentry: 1\ninputs: [words]\nper_asset:\n{inner}outputs: n0\n")
    outer = "".join(f"  m{number}: {{node: inner.yaml, words: raw}}\n" for number in range(1000))
    project.write("graph.yaml", HEAD + RAW + outer)

    assert "more than 20000 nodes; use a library pattern, or several graphs" in told(project, capsys)


def test_a_hundred_thousand_wrong_nodes_are_not_told_one_by_one(project, capsys):
    project.write("graph.yaml", HEAD + RAW + "".join(f"  n{number}: {{node: lood}}\n" for number in range(19_000)))

    assert main(["build", str(project.graph)]) == 2
    said = capsys.readouterr().err.splitlines()
    assert len(said) == 31 and said[-1] == "and 18970 more"


def test_a_chain_of_thousands_of_nodes_is_no_harm(project):
    chain = "".join(
        f"  n{number}: {{node: loud, text: {f'n{number - 1}' if number else 'raw'}}}\n" for number in range(3000)
    )
    project.write("graph.yaml", HEAD + RAW + chain)

    assert main(["plan", str(project.graph), "--asset", "a"]) == 0
    assert main(["draw", str(project.graph), "-o", str(project.folder / "graph.svg")]) == 0


@pytest.mark.parametrize("key", ["{key}: 1\n", "? {key}\n: 1\n", "per_asset:\n  ? {key}\n  : {{node: loud}}\n"])
@pytest.mark.parametrize("size", [5_000, 1_000_000])
def test_a_huge_key_is_refused(project, capsys, key, size):
    project.write("graph.yaml", HEAD + key.format(key="k" * size) + ("" if "per_asset" in key else RAW))

    assert "graph.yaml:" in told(project, capsys)


@pytest.mark.parametrize("out", ["../elsewhere", "/tmp", "made/../../x", "..", "link"])
def test_an_output_outside_the_graphs_folder_is_refused(project, capsys, tmp_path_factory, out):
    (project.folder / "link").symlink_to(tmp_path_factory.mktemp("elsewhere"))
    project.edit("graph.yaml", "out: made", f"out: {out}")

    assert "outside the folder of the graph file; write below it, or open the place" in told(project, capsys)


@pytest.mark.parametrize(
    ("body", "why"),
    [
        ("raise RuntimeError('boom')", "RuntimeError: boom"),
        ("import sys; sys.exit(0)", "SystemExit: 0"),
        ("import a_package_that_is_not_there", "No module named 'a_package_that_is_not_there'"),
        ("def (", "SyntaxError"),
        ("del loud", "has no attribute 'loud'"),
        ("raise KeyError('first line\\nsecond line')", "KeyError"),
    ],
)
def test_a_kind_whose_module_fails_on_import_is_told_with_its_file(project, capsys, body, why):
    project.write("kinds/loud.py", f"def loud(): ...\n{body}\n")

    said = told(project, capsys)
    assert "graph.yaml:" in said and "kinds/loud.py: can't be imported: " in said and why in said


@pytest.mark.parametrize(
    ("returned", "why"),
    [
        ("7", "returned int; its signature promises Text"),
        ("None", "returned NoneType; its signature promises Text"),
        ("Text(text.words, np.array([object()]))", "an array of object can't flow along an edge"),
        ("Text(text.words, object())", "a object can't flow along an edge"),
        ("exit()", "failed: SystemExit"),
        ("open('/nowhere/there')", "failed: FileNotFoundError"),
        ("[0] * 10**15", "failed: MemoryError"),
        ("loud(text, other)", "failed: RecursionError"),
    ],
)
@pytest.mark.parametrize("workers", [1, 2])
def test_a_node_that_returns_what_it_must_not_costs_its_step_alone(project, returned, why, workers):
    project.edit(
        "kinds/loud.py",
        "return replace(",
        f"import numpy as np\n    return {returned} if 'b' in text.words else replace(",
    )

    record = project.build(workers=workers)

    assert [asset.state for asset in record.assets] == ["made", "failed", "made"]
    assert why in record.assets[1].errors[0] and "\n" not in record.assets[1].errors[0]


@pytest.mark.parametrize("content", ["b'bytes'", "np.zeros(3)", "'text'", "None"])
def test_a_file_that_is_no_bytes_costs_its_step_alone(project, content):
    project.edit("kinds/put.py", "np.frombuffer(text.words.encode(), np.uint8)", content)

    record = project.build()

    assert {asset.state for asset in record.assets} == {"failed"} and (project.folder / "made/all.out").exists()


def test_a_library_of_names_that_are_no_text_is_refused(project, capsysbinary):
    (project.folder / "props" / b"caf\xe9.txt".decode("utf-8", "surrogateescape")).write_text("x")

    assert main(["build", str(project.graph)]) == 2
    assert b"is no text in UTF-8; rename the file" in capsysbinary.readouterr().err


def test_links_that_run_in_a_circle_end(project):
    (project.folder / "props/loop").symlink_to(project.folder / "props", target_is_directory=True)
    project.edit("graph.yaml", "props/*.txt", "props/**/*.txt")
    project.edit("graph.yaml", "{out}/{stem}.out", "{out}/{below}.out")

    assert [asset.name for asset in project.build().assets] == ["props/a.txt", "props/b.txt", "props/c.txt"]
