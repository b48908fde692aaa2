"""Pictures of graphs: everything in its place, nothing behind anything."""

from __future__ import annotations

import itertools
import random
import re
from collections import defaultdict
from xml.etree import ElementTree

import pytest
from tangentry.pipeline.arrange import BOX, WAYPOINT, arrange
from tangentry.pipeline.build import read_last_record
from tangentry.pipeline.draw import WIDE, draw
from tangentry.pipeline.graph import read_graph

SVG = "{http://www.w3.org/2000/svg}"


@pytest.mark.parametrize("seed", range(20))
def test_boxes_and_lines_keep_apart_and_lines_run_to_the_right(seed):
    rng = random.Random(seed)
    names = [f"n{number}" for number in range(rng.randint(1, 30))]
    inputs = {name: rng.sample(names[:number], min(number, rng.randint(0, 3))) for number, name in enumerate(names)}
    last = frozenset(names[len(names) * 4 // 5 :])

    arranged = arrange(inputs, last)

    assert all(arranged.column[end] == arranged.column[start] + 1 for start, end in arranged.joints)
    assert all(arranged.column[one] > arranged.column[other] for one in last for other in set(names) - last)
    spots = defaultdict(list)
    for spot, column in arranged.column.items():
        spots[column].append((arranged.place[spot], BOX if isinstance(spot, str) else WAYPOINT))
    for column in spots.values():
        column.sort()
        for (above, high), (below, low) in itertools.pairwise(column):
            assert below - above > (high + low) / 2


def test_every_input_is_joined_to_its_node(project):
    graph = read_graph(project.graph)
    inputs = {"a": [], "b": ["a"], "c": ["b"], "d": ["c", "a"]}
    follow = defaultdict(set)
    for start, end in arrange(inputs).joints:
        follow[start].add(end)

    assert follow["a"] == {"b", ("a", 1)} and follow["a", 1] == {("a", 2)} and follow["a", 2] == {"d"}
    assert (
        draw(graph).count("<path") == len(graph.per_asset) + 1 + 3
    )  # a line each but for raw, one more to done; a rule


def test_draw_shows_every_node_with_its_kind_and_state(project):
    project.write("props/b.txt", "rude\n")
    project.write("props/c.txt", "broken\n")
    project.build()
    graph = read_graph(project.graph)

    picture = ElementTree.fromstring(draw(graph, read_last_record(graph)))

    told = {group[0].text: group[4].text for group in picture.iter(f"{SVG}g")}
    assert told == {
        "raw: take (1 failed, 2 ran)": "1 failed, 2 ran",
        "said: loud (1 blocked, 2 ran)": "1 blocked, 2 ran",
        "verdict: judge (1 blocked, 1 faulty, 1 ran)": "1 blocked, 1 faulty, 1 ran",
        "done: put (1 blocked, 2 ran)": "1 blocked, 2 ran",
        "all: join (1 ran)": "1 ran",
    }


def test_words_stay_in_their_boxes(project):
    long = "a_name_that_is_much_too_long_for_any_box"
    project.edit("graph.yaml", "  said:", f"  {long}: {{node: loud, text: raw}}\n  said:")
    graph = read_graph(project.graph)

    picture = ElementTree.fromstring(draw(graph))

    widest = max(
        len(text.text or "") * float(text.get("font-size", "0")) * 0.55  # of an em, the mean width of a letter
        for group in picture.iter(f"{SVG}g")
        for text in group.iter(f"{SVG}text")
    )
    assert widest < WIDE and f"{long}: loud" in [title.text for title in picture.iter(f"{SVG}title")]


def test_what_stands_in_a_graph_file_is_text_in_the_picture(project):
    project.edit("graph.yaml", "about: words", "about: '<script>alert(1)</script> & more'")

    assert not re.search("<script", draw(read_graph(project.graph)))
