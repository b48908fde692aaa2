"""The house itself: which way the arrows run, what lies where, what ships."""

from __future__ import annotations

import ast
import re
import shutil
import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
TOP = {"README.md", "DEVELOPERS.md", "pyproject.toml", "pipeline", "nodes", "graphs", "tests", "LICENSE"}
SOURCES = sorted([*ROOT.glob("pipeline/**/*.py"), *ROOT.glob("nodes/**/*.py")])
KINDS = sorted(path for path in ROOT.glob("nodes/*.py") if path.stem != "__init__")


def name_of(path: Path) -> str:
    return ".".join(("tangentry", *path.relative_to(ROOT).with_suffix("").parts)).removesuffix(".__init__")


def imports(path: Path) -> set[str]:
    """Modules of this project that a file imports, at any depth."""
    found: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.ImportFrom) and (node.module or "").startswith("tangentry"):
            found |= {f"{node.module}.{alias.name}" for alias in node.names} | {str(node.module)}
        elif isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names if alias.name.startswith("tangentry")}
    return found & {name_of(path) for path in SOURCES}


def tracked() -> list[str]:
    return subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=True).stdout.splitlines()


def test_the_top_level_holds_nothing_else():
    assert {path.split("/")[0] for path in tracked() if not path.startswith(".")} == TOP


def test_the_pipeline_knows_no_mesh():
    assert not [
        path
        for path in SOURCES
        if "pipeline" in path.parts
        for one in imports(path)
        if one.startswith("tangentry.nodes")
    ]


def test_nodes_know_of_the_pipeline_only_what_a_value_is():
    allowed = {"tangentry.pipeline.flow", "tangentry.pipeline.errors", "tangentry.pipeline"}
    used = {
        one
        for path in SOURCES
        if "nodes" in path.parts
        for one in imports(path)
        if one.startswith("tangentry.pipeline")
    }

    assert used <= allowed


def test_no_import_runs_in_a_circle():
    import networkx as nx

    arrows = nx.DiGraph(
        (name_of(path), one)
        for path in SOURCES
        for one in imports(path)
        if one != name_of(path) and "__init__" not in path.name
    )

    assert list(nx.simple_cycles(arrows)) == []


@pytest.mark.parametrize("kind", KINDS, ids=lambda path: path.stem)
def test_every_kind_has_its_test(kind):
    assert (ROOT / "tests" / "nodes" / f"test_{kind.stem}.py").is_file()


@pytest.mark.parametrize("path", SOURCES, ids=name_of)
def test_everything_public_is_documented(path):
    tree = ast.parse(path.read_text())
    public = [
        node
        for node in ast.walk(tree)
        if isinstance(node, (ast.FunctionDef, ast.ClassDef)) and not node.name.startswith("_")
    ]
    bare = [node.name for node in public if not ast.get_docstring(node) and not _inner(tree, node)]

    assert ast.get_docstring(tree) and not bare


def _inner(tree: ast.Module, node: ast.AST) -> bool:
    """Is it inside a private class, or inside a function?"""
    for outer in ast.walk(tree):
        private = isinstance(outer, ast.ClassDef) and outer.name.startswith("_")
        if (private or isinstance(outer, ast.FunctionDef)) and outer is not node and node in ast.walk(outer):
            return True
    return False


PICKLERS = {"pickle", "_pickle", "cPickle", "cloudpickle", "dill", "joblib", "marshal", "shelve"}


@pytest.mark.parametrize("path", SOURCES, ids=name_of)
def test_nothing_is_pickled(path):
    for node in ast.walk(ast.parse(path.read_text())):
        names = [alias.name for alias in node.names] if isinstance(node, (ast.Import, ast.ImportFrom)) else []
        names += [node.module or ""] if isinstance(node, ast.ImportFrom) else []
        assert not PICKLERS & {name.split(".")[0] for name in names}
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Attribute):
            called, words = node.func.attr, {word.arg: ast.unparse(word.value) for word in node.keywords}
            owner = ast.unparse(node.func.value)
            if owner in ("np", "numpy") and called in ("load", "save", "savez", "savez_compressed"):
                assert words.get("allow_pickle") == "False", f"{owner}.{called}, line {node.lineno}"


def test_listing_kinds_imports_nothing_heavy():
    code = (
        "import sys; from tangentry.pipeline.cli import main; main(['nodes']); "
        "print(sorted(sys.modules), file=sys.stderr)"
    )
    told = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stderr

    assert not {"numba", "trimesh", "scipy", "imagecodecs", "networkx", "PIL"} & set(re.findall(r"'(\w+)'", told))


def test_the_readmes_test_command_is_the_one_that_runs_in_ci():
    blocks = re.findall(r"```sh\n(.*?)\n```", (ROOT / "README.md").read_text(), re.S)

    assert blocks[1] in (ROOT / ".ci" / "run").read_text()


def test_the_wheel_holds_the_tree_and_nothing_else(tmp_path):
    # From a copy: what an earlier build left in build/lib would ship again and hide a file that is no longer listed.
    for path in tracked():
        if (ROOT / path).is_file() and not path.startswith("."):
            (tmp_path / "tree" / path).parent.mkdir(parents=True, exist_ok=True)
            shutil.copy(ROOT / path, tmp_path / "tree" / path)
    words = ["wheel", "-q", "--no-deps", "--no-build-isolation", "-w", str(tmp_path), str(tmp_path / "tree")]
    subprocess.run([sys.executable, "-m", "pip", *words], check=True, capture_output=True)
    shipped = {name for name in zipfile.ZipFile(next(tmp_path.glob("*.whl"))).namelist() if ".dist-info/" not in name}

    assert shipped == {
        f"tangentry/{path}" for path in tracked() if path.split("/")[0] in ("pipeline", "nodes", "graphs")
    }
