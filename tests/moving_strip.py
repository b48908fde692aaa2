"""A flat strip that its file's animations move, for tests of meshes in motion."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from gltf_files import Making
from shapes import grid_part
from tangentry.nodes.load import load
from tangentry.nodes.model import Asset

CELLS = 8


def strip(folder: Path, moves: str, way: str = "LINEAR", change: Any = None) -> Asset:
    """A unit square in the x-y plane, u along x, whose point x is carried x times as far as its right end.

    moves    "joint": a skin's joint is carried along; "weights": a morph target is; "node": the whole square is
    change   called with the document before it is written

    The right end goes up by 1 within a second: y' = y + x t, so that after a second T = (1, 1) and B = (0, 1).
    """
    making = Making()
    part = grid_part(CELLS, CELLS)
    points, uvs = part.points.values, part.uvs[0].values
    corners = part.points.index.reshape(-1, 4)[:, [0, 1, 2, 0, 2, 3]]
    primitive = {
        "attributes": {
            "POSITION": making.accessor(points, "f4", "VEC3", bounds=True),
            "NORMAL": making.accessor(np.tile([0, 0, 1], (len(points), 1)), "f4", "VEC3"),
            "TEXCOORD_0": making.accessor(uvs * [1, -1] + [0, 1], "f4", "VEC2"),
            "JOINTS_0": making.accessor(np.tile([0, 1, 0, 0], (len(points), 1)), "u1", "VEC4"),
            "WEIGHTS_0": making.accessor(points[:, :1] * [-1, 1, 0, 0] + [1, 0, 0, 0], "f4", "VEC4"),
        },
        "indices": making.accessor(corners, "u2", "SCALAR"),
        "targets": [{"POSITION": making.accessor(points[:, :1] * [0, 1, 0], "f4", "VEC3", bounds=True)}],
    }
    node = {"joint": 2, "weights": 0, "node": 0}[moves]
    path = "weights" if moves == "weights" else "translation"
    rest = [3.0, 0.0, 0.0] if moves == "joint" else [0.0, 0.0, 0.0]
    values = np.array([[0.0], [1.0]]) if path == "weights" else np.array([rest, np.add(rest, [0.0, 1.0, 0.0])])
    if way == "CUBICSPLINE":  # straight: each tangent is what is gained within the second
        gained = np.tile(values[1] - values[0], (2, 1))
        values = np.stack([gained, values, gained], axis=1)
    kind = "SCALAR" if path == "weights" else "VEC3"
    bound = [np.linalg.inv(_carried(5.0)), np.linalg.inv(_carried(8.0))]
    making.json |= {
        "meshes": [{"name": "strip", "primitives": [primitive]}],
        "nodes": [
            {"mesh": 0} | ({"skin": 0} if moves == "joint" else {}),
            {"name": "root", "translation": [5, 0, 0], "children": [2]},
            {"name": "end", "translation": [3, 0, 0]},
        ],
        "skins": [
            {"joints": [1, 2], "inverseBindMatrices": making.accessor([m.T.copy() for m in bound], "f4", "MAT4")}
        ],
        "animations": [
            {
                "name": "lift",
                "samplers": [
                    {
                        "input": making.accessor([0, 1], "f4", "SCALAR", bounds=True),
                        "output": making.accessor(values, "f4", kind),
                        "interpolation": way,
                    }
                ],
                "channels": [{"sampler": 0, "target": {"node": node, "path": path}}],
            }
        ],
    }
    if change is not None:
        change(making.json)
    return load(str(making.write(folder / "strip.glb")))


def _carried(x: float) -> np.ndarray:
    matrix = np.eye(4)
    matrix[0, 3] = x
    return matrix
