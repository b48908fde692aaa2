"""Documents whose animations, skins or nodes can't be: each is named, none brings a traceback or a hang."""

from __future__ import annotations

import pytest
from moving_strip import strip
from tangentry.nodes.check import check
from tangentry.pipeline.errors import InputError


def animation(document):
    return document["animations"][0]


MISHAPS = {
    "animation 0, channel 0: node 9 does not exist": lambda d: animation(d)["channels"][0]["target"].update(node=9),
    "animation 0, channel 0: sampler 4 does not exist": lambda d: animation(d)["channels"][0].update(sampler=4),
    'interpolation "SMOOTH" is none of': lambda d: animation(d)["samplers"][0].update(interpolation="SMOOTH"),
    "its times do not grow": lambda d: animation(d)["samplers"][0].update(input=0),
    "numbers for 2 keys of rotation": lambda d: animation(d)["channels"][0]["target"].update(path="rotation"),
    "node 0: skin 7 or a joint of it does not exist": lambda d: d["nodes"][0].update(skin=7),
    "skin 0 or a joint of it": lambda d: d["skins"][0].update(joints=[1, 2, 30]),
    "2 inverse bind matrices for 3 joints": lambda d: d["skins"][0].update(joints=[1, 2, 0]),
    "joint 1, but the skin has 1": lambda d: d["skins"][0].update(joints=[2]),
    "its child 2 is a child of node 0, too": lambda d: d["nodes"][0].update(children=[2]),
    "some are their own descendants": lambda d: d["nodes"][2].update(children=[1]),
    "its child 40 does not exist": lambda d: d["nodes"][2].update(children=[40]),
    "node 1, translation: 2 numbers, not 3": lambda d: d["nodes"][1].update(translation=[1, 2]),
}


@pytest.mark.parametrize("told", MISHAPS)
def test_what_can_not_be_played_is_named(tmp_path, told):
    with pytest.raises(InputError, match=told):
        check(strip(tmp_path, "joint", change=MISHAPS[told]), animations=2)


def test_a_motion_to_infinity_is_left_out_of_account(tmp_path):
    found = check(strip(tmp_path, "joint", change=lambda d: d["nodes"][1].update(scale=[1e200] * 3)), animations=3)

    assert not [item for item in found.items if item.id.startswith("motion")]


def test_a_long_chain_of_nodes_is_followed_to_its_end(tmp_path):
    def chained(document):
        length = 3000
        document["nodes"] += [{"children": [len(document["nodes"]) + k + 1]} for k in range(length)]
        document["nodes"].append({"children": [1]})

    assert check(strip(tmp_path, "joint", change=chained), animations=2).facts["skew growth in motion"] == 45.0
