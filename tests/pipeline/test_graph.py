"""Graph files: what is taken, and what is refused in one clear line each."""

from __future__ import annotations

from pathlib import Path

import jsonschema
import pytest
import yaml
from tangentry.pipeline.errors import GraphError
from tangentry.pipeline.graph import option_from_text, read_graph
from tangentry.pipeline.kinds import Kinds
from tangentry.pipeline.library import find_members, unfold
from tangentry.pipeline.plan import all_steps, lay_out
from tangentry.pipeline.schema import graph_schema
from tangentry.pipeline.yaml import read_yaml, scalar

SHIPPED = sorted((Path(__file__).parents[2] / "graphs").glob("**/*.yaml"))

HEAD = "tangentry: 1\nkinds: kinds\nlibrary: props/*.txt\n"
RAW = "per_asset:\n  raw: {node: take, file: '{file}'}\n"

REFUSED = {
    "an unknown key": (HEAD + "colour: red\n" + RAW, ':4:1: unknown key "colour"; a graph file has'),
    "a near key": (HEAD + "per_assets: {}\n" + RAW, 'Did you mean "per_asset"?'),
    "no version": ("kinds: kinds\n" + RAW, "begin with `tangentry: 1`"),
    "another version": (HEAD.replace("1", "2") + RAW, ":1:12: version 2 of the format; this program reads version 1"),
    "an unknown kind": (HEAD + RAW + "  x: {node: laod}\n", ':6:13: there is no node kind "laod"'),
    "an unknown setting": (
        HEAD + RAW + "  x: {node: loud, text: raw, tims: 2}\n",
        ':6:30: node "x" has no input or setting "tims"; loud takes text, other, times, log. Did you mean "times"?',
    ),
    "a wrong type": (
        HEAD + RAW + "  x: {node: loud, text: raw, times: often}\n",
        ':6:37: setting "times" of node "x" expects a whole number; found "often"',
    ),
    "a fraction": (HEAD + RAW + "  x: {node: loud, text: raw, times: 1.5}\n", "expects a whole number; found 1.5"),
    "a boolean": (HEAD + RAW + "  x: {node: loud, text: raw, times: true}\n", "expects a whole number; found true"),
    "a wrong choice": (
        HEAD + "per_asset:\n  raw: {node: take, file: a, if_missing: skp}\n",
        'expects "fail" or "skip"; found "skp". Did you mean "skip"?',
    ),
    "a missing reference": (
        HEAD + RAW + "  x: {node: loud, text: rwa}\n",
        ':6:25: there is no node "rwa" for input "text" of "x". Did you mean "raw"?',
    ),
    "a missing input": (HEAD + RAW + "  x: {node: loud}\n", ':6:3: node "x" lacks the input "text", which loud needs'),
    "a missing setting": (HEAD + RAW + "  x: {node: put, text: raw}\n", 'lacks the setting "file", which put needs'),
    "a wrong flow type": (
        HEAD + RAW + "  v: {node: judge, text: raw}\n  x: {node: loud, text: v}\n",
        'input "text" of node "x" takes Text; "v" gives Findings',
    ),
    "an unknown output": (
        HEAD + RAW + "  x: {node: loud, text: raw.best}\n",
        'node "raw" has no output "best"; it gives one value, named "raw"',
    ),
    "a cycle": (
        HEAD + "per_asset:\n  a: {node: loud, text: b}\n  b: {node: loud, text: a}\n",
        "waits for itself: a -> b -> a",
    ),
    "a duplicate key": (HEAD + RAW + "  raw: {node: take, file: b}\n", ':6:3: "raw" is given twice; first at line 5'),
    "an unfilled placeholder": (
        HEAD + "per_asset:\n  raw: {node: take, file: '{fil}'}\n",
        '"{fil}" has nothing to fill it; there are file, stem, folder, below. Did you mean "file"?',
    ),
    "an asset's field without a library": ("tangentry: 1\nkinds: kinds\n" + RAW, "it runs for no one asset"),
    "an asset's field for the whole library": (
        HEAD + RAW + "whole_library:\n  j: {node: join, texts: raw, file: '{stem}.out'}\n",
        "it runs for no one asset",
    ),
    "many for one": (
        HEAD + RAW + "whole_library:\n  x: {node: loud, text: raw}\n",
        'takes one value; "raw" is one per asset',
    ),
    "one for many": (HEAD + RAW + "  j: {node: join, texts: raw, file: a.out}\n", "takes the values of all assets"),
    "an alias": (HEAD + "about: &a words\n" + RAW, 'an anchor ("&a")'),
    "a tag": (HEAD + "about: !!python/name:os.system ''\n" + RAW, "a tag (tag:yaml.org,2002:python/name:os.system)"),
    "broken YAML": (HEAD + "per_asset: {raw: [\n", "not YAML"),
    "an empty file": ("", "the file is empty"),
    "a list": ("- a\n", "a graph file is a mapping"),
    "no nodes": (HEAD, "the graph has no nodes"),
    "an input that is no name": (
        HEAD + RAW + "  x: {node: loud, text: [raw]}\n",
        'input "text" of node "x" names another node',
    ),
    "a node that is no mapping": (HEAD + RAW + "  x: loud\n", 'node "x" is a mapping that begins with `node: KIND`'),
    "a node without a kind": (HEAD + RAW + "  x: {text: raw}\n", "does not say its kind"),
    "a bad name": (HEAD + RAW + "  x.y: {node: loud, text: raw}\n", "a node's name is made of"),
    "deep nesting": (HEAD + "options: {a: " + "[" * 60 + "]" * 60 + "}\n", "nested deeper than"),
    "a huge value": (HEAD + "about: '" + "k" * 1_000_000 + "'\n", "1000000 characters in one value"),
    "a huge key": (HEAD + "'" + "k" * 1_000_000 + "': 1\n", "not YAML"),
    "too many nodes": (
        HEAD + RAW + "".join(f"  n{k}: {{node: loud, text: raw}}\n" for k in range(20_001)),
        "more than 20000 entries",
    ),
    "a kinds folder that is not there": (
        "tangentry: 1\nkinds: nowhere\n" + RAW,
        "there is no such folder of node kinds",
    ),
    "outputs in an outermost graph": (
        HEAD + RAW + "outputs: raw\n",
        "`outputs` belongs to a graph that is used as a node",
    ),
}


@pytest.mark.parametrize("case", REFUSED)
def test_a_wrong_graph_is_refused_in_one_clear_line(project, case):
    text, told = REFUSED[case]
    project.write("graph.yaml", text)

    with pytest.raises(GraphError) as caught:
        read_graph(project.graph)

    matching = [line for line in caught.value.problems if told in line]
    assert matching, caught.value.problems
    assert matching[0].startswith(str(project.graph)) and len(matching[0]) < 1000 and "\n" not in matching[0]


BEYOND_A_SCHEMA = {
    # what only following references, folders and placeholders can tell
    "a missing reference", "a wrong flow type", "an unknown output", "a cycle", "an unfilled placeholder",
    "an asset's field without a library", "an asset's field for the whole library", "many for one", "one for many",
    "a kinds folder that is not there", "outputs in an outermost graph",
    # what no parser hands on to a schema
    "a duplicate key", "an alias", "a tag", "broken YAML", "a huge key", "deep nesting",
}  # fmt: skip


@pytest.mark.parametrize("case", sorted(set(REFUSED) - BEYOND_A_SCHEMA))
def test_the_schema_rejects_what_reading_refuses(project, case):
    project.write("bad.yaml", REFUSED[case][0])
    schema = graph_schema(Kinds(project.folder / "kinds"))

    assert not jsonschema.Draft202012Validator(schema).is_valid(yaml.safe_load(project.read("bad.yaml")))


@pytest.mark.parametrize("path", SHIPPED, ids=lambda path: path.name)
def test_the_schema_takes_every_shipped_graph(path):
    schema = graph_schema(Kinds())

    jsonschema.Draft202012Validator.check_schema(schema)
    jsonschema.Draft202012Validator(schema).validate(read_yaml(path.read_bytes(), str(path)).plain())


def test_the_schema_takes_the_test_project_too(project):
    schema = graph_schema(Kinds(project.folder / "kinds"))

    jsonschema.Draft202012Validator(schema).validate(read_yaml(project.graph.read_bytes(), "graph.yaml").plain())


def test_all_errors_of_a_file_are_told_at_once(project):
    project.write(
        "graph.yaml", HEAD + RAW + "  x: {node: loud, text: nobody, times: x, loud: 1}\n  y: {node: lod}\ncolour: 1\n"
    )

    with pytest.raises(GraphError) as caught:
        read_graph(project.graph)

    assert len(caught.value.problems) == 5


def test_scalars_follow_the_core_schema():
    """YAML 1.2.2, 10.3.2: tag resolution of the core schema, its own examples and the traps of YAML 1.1."""
    known = {
        "1e-8": 1e-8,
        "no": "no",
        "yes": "yes",
        "012": 12,
        "0o14": 12,
        "0xC": 12,
        "1:30": "1:30",
        "~": None,
        "": None,
        "true": True,
        ".inf": float("inf"),
        "-.5": -0.5,
        "1.": 1.0,
        "+12e03": 12000.0,
        "1_000": "1_000",
        "0.1.2": "0.1.2",
    }

    assert {text: scalar(text) for text in known} == known


def test_every_value_knows_its_place():
    node = read_yaml("a: 1\nb: {c: [x, 'no']}\n", "f.yaml")

    assert str(node.value["b"].value["c"].value[1].mark) == "f.yaml:2:12" and str(node.keys["b"]) == "f.yaml:2:1"
    assert node.plain() == {"a": 1, "b": {"c": ["x", "no"]}}


def test_a_million_laughs_are_refused_at_once():
    text = "a: &a [x, x]\n" + "".join(
        f"{chr(98 + k)}: &{chr(98 + k)} [*{chr(97 + k)}, *{chr(97 + k)}]\n" for k in range(20)
    )

    with pytest.raises(GraphError, match="an anchor"):
        read_yaml(text, "f.yaml")


@pytest.mark.parametrize("content", [b"\x00\x01\x02", b"\xff\xfe\x00", b"\x80abc: 1", bytes(range(256))])
def test_binary_junk_is_refused(project, content):
    project.graph.write_bytes(content)

    with pytest.raises(GraphError):
        read_graph(project.graph)


def test_a_setting_that_is_one_option_keeps_its_type(project):
    assert read_graph(project.graph, {"times": 7}).per_asset["said"].settings["times"] == 7


def test_an_option_that_the_graph_does_not_have_is_refused(project):
    with pytest.raises(GraphError, match=r'--set tims: .* has no such option; it has out, times. Did you mean "times"'):
        read_graph(project.graph, {"tims": 7})


def test_options_from_the_command_line_are_scalars_or_lists():
    assert [option_from_text(text) for text in ("1.5", "[a, 2]", "**/*.{obj,ply}", "true")] == [
        1.5,
        ["a", 2],
        "**/*.{obj,ply}",
        True,
    ]


def test_alternatives_unfold():
    assert unfold("a.{obj,ply}") == ["a.obj", "a.ply"] and unfold("{stem}.obj") == ["{stem}.obj"]


def test_members_are_named_by_their_path_from_the_graph(project):
    project.write("props/deep/x.txt", "x")
    project.edit("graph.yaml", "props/*.txt", "props/**/*.txt")

    members = find_members(read_graph(project.graph))

    assert [(one.name, one.below) for one in members] == [
        ("props/a.txt", "a.txt"),
        ("props/b.txt", "b.txt"),
        ("props/c.txt", "c.txt"),
        ("props/deep/x.txt", "deep/x.txt"),
    ]
    assert members[3].fields == {"file": "props/deep/x.txt", "stem": "x", "folder": "props/deep", "below": "deep/x.txt"}


def test_a_library_without_members_is_an_error(project):
    project.edit("graph.yaml", "props/*.txt", "nothing/*.txt")

    with pytest.raises(GraphError, match=r"graph.yaml:3:10: no file matches nothing/\*\.txt"):
        find_members(read_graph(project.graph))


def test_two_steps_that_would_make_one_file_are_refused(project):
    project.write("props/deep/a.txt", "x")
    project.edit("graph.yaml", "props/*.txt", "props/**/*.txt")
    graph = read_graph(project.graph)

    with pytest.raises(GraphError, match=r"made/a.out would be made twice"):
        lay_out(graph, find_members(graph))


def test_outputs_stay_below_the_graph_unless_the_command_line_opens_a_place(project, tmp_path_factory):
    elsewhere = str(tmp_path_factory.mktemp("elsewhere"))
    project.edit("graph.yaml", "out: made", f"out: {elsewhere}")
    graph = read_graph(project.graph)
    with pytest.raises(GraphError, match="outside the folder of the graph file"):
        list(all_steps(graph, find_members(graph)))

    opened = read_graph(project.graph, {"out": elsewhere})

    assert len(list(all_steps(opened, find_members(opened)))) == 13


def test_a_graph_without_a_library_runs_once(project):
    project.write(
        "graph.yaml",
        f"tangentry: 1\nkinds: kinds\nper_asset:\n  raw: {{node: take, file: props/a.txt, log: {project.log}}}\n",
    )

    record = project.build()

    assert [asset.name for asset in record.assets] == ["graph.yaml"] and project.calls == ["take"]


def test_a_kind_whose_module_raises_on_import_ends_in_one_message(project):
    project.write("kinds/loud.py", "def loud(): ...\nraise RuntimeError('boom')\n")

    with pytest.raises(GraphError, match=r"loud.py: can't be imported: RuntimeError: boom"):
        read_graph(project.graph)


def test_a_kind_that_returns_the_wrong_type_fails_and_says_so(project):
    project.edit("kinds/loud.py", "return replace(text,", "return 7 or replace(text,")

    record = project.build()

    assert (
        'node "said" (loud) failed: NodeError: returned int; its signature promises Text' in record.assets[0].errors[0]
    )
