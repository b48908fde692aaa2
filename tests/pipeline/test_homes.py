"""Where kinds come from: an installed plug-in package, a project's own folder, two projects in one process."""

from __future__ import annotations

import subprocess
import sys

import pytest
from tangentry.pipeline.cli import main
from tangentry.pipeline.errors import GraphError
from tangentry.pipeline.graph import read_graph
from tangentry.pipeline.kinds import Kinds

PLUGIN = {
    "harbour/__init__.py": "",
    "harbour/sounds.py": "def horn(words: str) -> str:\n    return words + 'TOOT'\n",
    "harbour/nodes/__init__.py": "",
    "harbour/nodes/foghorn.py": '''
from tangentry.pipeline.flow import Files, InputFile, OutFile, OutputFile


def foghorn(file: InputFile | str, *, made: OutputFile | str, times: int = 1) -> Files:
    """The words of a file, and a signal.

    times  how often it sounds
    """
    import numpy as np

    from harbour.sounds import horn

    words = horn(InputFile.of(file).bytes().tobytes().decode() * times)
    return Files((OutFile(made, np.frombuffer(words.encode(), np.uint8)),))
''',
    "harbour-1.0.dist-info/METADATA": "Metadata-Version: 2.1\nName: harbour\nVersion: 1.0\n",
    "harbour-1.0.dist-info/entry_points.txt": "[tangentry.nodes]\nharbour = harbour.nodes\n",
}
USES_IT = """\
tangentry: 1
library: props/*.txt
per_asset:
  done: {node: foghorn, file: "{file}", made: "made/{stem}.out"}
"""


@pytest.fixture
def plugin(project, tmp_path_factory, monkeypatch):
    """A package as pip would install it, in a folder on the path."""
    site = tmp_path_factory.mktemp("site")
    for name, content in PLUGIN.items():
        (site / name).parent.mkdir(parents=True, exist_ok=True)
        (site / name).write_text(content)
    monkeypatch.syspath_prepend(str(site))
    monkeypatch.setenv("PYTHONPATH", str(site))  # for worker processes
    yield site
    for name in [name for name in sys.modules if name.startswith("harbour")]:
        del sys.modules[name]


def test_an_installed_packages_kinds_are_found_through_its_entry_point(project, plugin, capsys):
    project.write("graph.yaml", USES_IT)

    assert project.build(workers=2).sound and project.read("made/a.out") == "hello a\nTOOT"
    assert main(["nodes", "foghorn"]) == 0 and "how often it sounds" in capsys.readouterr().out


def test_a_plugins_source_may_lie_anywhere_in_its_package(project, plugin):
    project.write("graph.yaml", USES_IT)
    project.build()

    (plugin / "harbour/sounds.py").write_text("def horn(words: str) -> str:\n    return words + 'HONK'\n")

    assert project.build().count("ran") == 3 and project.read("made/a.out") == "hello a\nHONK"


def test_a_kind_defined_twice_is_refused(project, plugin):
    project.write("kinds/foghorn.py", "def foghorn(): ...\n")

    with pytest.raises(GraphError, match=r'foghorn.py: kind "foghorn" is also defined in .*harbour'):
        Kinds(project.folder / "kinds")


def test_an_entry_point_that_names_no_package_is_told_in_one_line(plugin):
    (plugin / "harbour-1.0.dist-info/entry_points.txt").write_text("[tangentry.nodes]\nharbour = pier.nodes\n")

    with pytest.raises(GraphError, match=r'the entry point for "pier.nodes" .* names no package'):
        Kinds()


def test_two_projects_in_one_process_keep_their_modules_apart(make_project, tmp_path):
    one, other = make_project(tmp_path / "one"), make_project(tmp_path / "other")
    other.edit("kinds/helper.py", "words.upper()", "words.title()")
    other.edit("kinds/deep/mark.py", "return words", "return words + '!'")
    graphs = [read_graph(project.graph) for project in (one, other)]
    for project in (one, other, one):
        project.write("props/b.txt", "good day\n" if project.folder.name == "one" else "good night\n")

        project.build()

    assert len(graphs) == 2
    assert one.read("made/a.out") == "HELLO A\nHELLO A\n" and other.read("made/a.out") == "Hello A\nHello A\n!"


def test_a_kind_named_like_a_module_of_the_standard_library_harms_nothing(project):
    project.write("kinds/copy.py", project.read("kinds/loud.py").replace("def loud(", "def copy("))
    project.edit("graph.yaml", "node: loud", "node: copy")
    words = [sys.executable, "-m", "tangentry.pipeline.cli", "build", str(project.graph)]

    done = subprocess.run(words, capture_output=True, text=True, check=False)

    assert done.returncode == 0, done.stderr


def test_a_kinds_folder_may_import_its_neighbours_either_way(project):
    project.edit("kinds/loud.py", "import helper\n", "from . import helper\n")
    project.build()
    project.edit("kinds/helper.py", "upper()", "title()")

    assert project.build().count("ran") == 3 * 3 + 1 and project.read("made/a.out") == "Hello A\nHello A\n"


def test_what_newer_source_made_is_not_kept_under_the_key_of_the_older(project):
    mark = project.folder / "kinds/deep/mark.py"
    saved = f"with open({str(mark)!r}, 'a') as file:\n        file.write('#')\n    from deep import mark"
    project.edit("kinds/loud.py", "from deep import mark", saved)  # as somebody does while a build runs
    before = mark.read_text()
    project.build()

    mark.write_text(before)
    project.build()

    assert project.calls == ["loud"] * 3
