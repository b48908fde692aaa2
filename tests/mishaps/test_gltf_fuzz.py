"""glTF with several things wrong at once, chosen by a seed: an error of ours, or a value."""

from __future__ import annotations

import copy
import random
from typing import Any

import numpy as np
import pytest
from gltf_files import PIXEL, Making
from tangentry.nodes.export import export
from tangentry.nodes.frames import frames
from tangentry.nodes.inspect import inspect
from tangentry.nodes.load import load
from tangentry.nodes.split import split
from tangentry.pipeline.errors import InputError

WRONG = [-1, 0, 1, 3, 5, 255, 2**31, 10**25, 0.5, 1e30, True, None, "x", "", [], [0], {}, {"a": 1}, "../x", [0] * 4]


def folded() -> Making:
    """Two squares that share an edge, one mirrored in UV space, so that a split takes all they carry apart."""
    making, count = Making(), 6
    points = [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [2, 0, 0], [2, 1, 0]]
    part: dict[str, Any] = {
        "attributes": {
            "POSITION": making.accessor(points, "f4", "VEC3", bounds=True),
            "NORMAL": making.accessor([[0, 0, 1]] * count, "f4", "VEC3"),
            "TEXCOORD_0": making.accessor([[0, 1], [1, 1], [1, 0], [0, 0], [0, 1], [0, 0]], "f4", "VEC2"),
            "COLOR_0": making.accessor(np.arange(4 * count), "u1", "VEC4", normalized=True),
            "JOINTS_0": making.accessor(np.zeros((count, 4)), "u1", "VEC4"),
            "WEIGHTS_0": making.accessor([[1, 0, 0, 0]] * count, "f4", "VEC4"),
        },
        "indices": making.accessor([0, 1, 2, 0, 2, 3, 1, 4, 5, 1, 5, 2], "u1", "SCALAR"),
        "material": 0,
        "targets": [{"NORMAL": making.accessor([[0.5, 0, 0]] * count, "f4", "VEC3")}],
    }
    strip = {**part, "mode": 5, "indices": making.accessor([0, 1, 3, 2], "u2", "SCALAR")}
    making.json |= {
        "meshes": [{"primitives": [part, strip], "weights": [0]}],
        "materials": [{"name": "stone", "normalTexture": {"index": 0}}],
        "textures": [{"source": 0}],
        "images": [{"bufferView": making.view(PIXEL), "mimeType": "image/png"}],
        "nodes": [{"mesh": 0, "skin": 0}, {"scale": [1, -1, 1]}],
        "skins": [{"joints": [1], "inverseBindMatrices": making.accessor([np.eye(4)], "f4", "MAT4")}],
        "scenes": [{"nodes": [0, 1]}],
    }
    return copy.deepcopy(making)


def holders(data: Any) -> list[Any]:
    """Every object and list that holds something, at any depth."""
    members = list(data.values()) if isinstance(data, dict) else data if isinstance(data, list) else []
    return [*([data] if members else []), *(found for member in members for found in holders(member))]


def spoil(document: dict[str, Any], chance: random.Random) -> None:
    """Put a member to something wrong, or to what another member is; or take it away."""
    holder, other = chance.choice(holders(document)), chance.choice(holders(document))
    key, its = (
        chance.choice(list(one)) if isinstance(one, dict) else chance.randrange(len(one)) for one in (holder, other)
    )
    how = chance.random()
    if how < 0.6:
        holder[key] = copy.deepcopy(chance.choice(WRONG))
    elif how < 0.8:
        holder[key] = copy.deepcopy(other[its])
    else:
        del holder[key]


@pytest.mark.parametrize("seed", range(400))
@pytest.mark.filterwarnings("ignore::RuntimeWarning")  # values that are not numbers make others that are none
def test_whatever_is_wrong_ends_in_an_error_of_ours_or_a_value(tmp_path, seed):
    chance, making = random.Random(seed), folded()
    for _ in range(chance.choice([1, 2, 3])):
        spoil(making.json, chance)
    if seed % 3 == 0:
        data = bytearray(making.data)
        for _ in range(20):
            data[chance.randrange(len(data))] = chance.choice([0, 127, 128, 255])
        making.data = bytes(data)
    path = making.write(tmp_path / "a.glb")
    try:
        inspect(str(path))
        for name in ("b.glb", "b.gltf"):
            export(frames(split(load(str(path))), stored="replace"), file=name)
    except InputError as error:
        assert str(path) in str(error)
