"""A graph file as a node of another."""

from __future__ import annotations

import pytest
from tangentry.pipeline.errors import GraphError
from tangentry.pipeline.graph import read_graph

INNER = """\
tangentry: 1
inputs: [words]
options: {times: 1}
per_asset:
  once:  {node: loud, text: words, times: "{times}", log: LOG}
  twice: {node: loud, text: once, times: 2, log: LOG}
  well:  {node: judge, text: twice, log: LOG}
outputs: {said: twice, verdict: well}
"""


def nested(project, inner: str = INNER) -> None:
    project.write("inner.yaml", inner.replace("LOG", str(project.log)))
    lines = [line for line in project.read("graph.yaml").splitlines() if not line.startswith(("  said", "  verdict"))]
    lines.insert(7, "  both:    {node: ./inner.yaml, words: raw, times: 3}")
    project.write("graph.yaml", "\n".join(lines) + "\n")
    project.edit("graph.yaml", "text: said, unless_faulty: verdict", "text: both, unless_faulty: both.verdict")
    project.edit("graph.yaml", "texts: said", "texts: both.said")


def test_a_graph_is_used_as_a_node_with_inputs_options_and_outputs(project):
    nested(project)

    record = project.build()

    assert record.sound and project.read("made/a.out") == "HELLO A\n" * 6
    assert project.calls.count("loud") == 6 and project.calls.count("judge") == 3


def test_its_nodes_are_cached_like_any_other(project):
    nested(project)
    project.build()
    assert project.build().count("ran") == 0

    project.edit("inner.yaml", "times: 2,", "times: 1,")

    project.build()
    assert project.calls == sorted(["loud", "judge", "put"] * 3 + ["join"])


def test_graphs_nest(project):
    nested(project)
    project.write(
        "outer.yaml",
        "tangentry: 1\ninputs: {text: Text}\nper_asset:\n  in: {node: ./inner.yaml, words: text}\n"
        "outputs: {said: in.said, verdict: in.verdict}\n",
    )
    project.edit("graph.yaml", "{node: ./inner.yaml, words: raw, times: 3}", "{node: ./outer.yaml, text: raw}")

    assert project.build().sound and list(read_graph(project.graph).per_asset)[1] == "both/in/once"


def test_errors_name_both_files(project):
    nested(project, INNER.replace("times: 2,", "tims: 2,"))

    with pytest.raises(GraphError) as caught:
        read_graph(project.graph)

    assert len(caught.value.problems) == 1
    assert (
        "inner.yaml:6:35:" in caught.value.problems[0] and f"(used at {project.graph}:8:19)" in caught.value.problems[0]
    )


@pytest.mark.parametrize(
    ("change", "told"),
    [
        (("words: raw, times: 3", "wrds: raw"), 'has no input or option "wrds"'),
        (("words: raw, times: 3", "times: 3"), 'input "words" of this graph is not filled'),
        (("./inner.yaml", "./nowhere.yaml"), "can't be read: No such file"),
        (("text: both,", "text: both.sung,"), 'there is no node "both.sung"'),
    ],
)
def test_a_wrong_use_is_refused(project, change, told):
    nested(project)
    project.edit("graph.yaml", *change)

    with pytest.raises(GraphError) as caught:
        read_graph(project.graph)

    assert any(told in line for line in caught.value.problems), caught.value.problems


def test_a_graph_that_uses_itself_is_refused(project):
    nested(project, INNER.replace("{node: loud, text: words", "{node: ./inner.yaml, words: words"))

    with pytest.raises(GraphError, match="uses itself"):
        read_graph(project.graph)
