"""Where an animation of a glTF document takes the points of its meshes (specification, 3.5, 3.7 and 3.11)."""

from __future__ import annotations

import json
from collections.abc import Iterator
from typing import Any, NamedTuple

import numpy as np
from tangentry.nodes.formats.gltf_accessors import Accessors
from tangentry.nodes.formats.gltf_animation import Animation, animations_of, value_at
from tangentry.nodes.formats.gltf_container import EXPORT_AGAIN
from tangentry.nodes.model import Asset, Document, Part, Stream
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

PLAIN = {"translation": (0.0, 0.0, 0.0), "rotation": (0.0, 0.0, 0.0, 1.0), "scale": (1.0, 1.0, 1.0)}


class Moment(NamedTuple):
    """One sample of an animation."""

    animation: str
    time: float  # seconds
    number: int  # of the sample, from 1
    world: Array  # (nodes, 4, 4) float64: from each node's space to the scene's
    weights: dict[int, Array]  # of the nodes whose morph weights are animated


class Motion:
    """What moves in an asset that came from a glTF document."""

    def __init__(self, asset: Asset, document: Document) -> None:
        self.file = InputFile.of(asset.name)
        self.json: dict[str, Any] = json.loads(document.text)
        self.accessors = Accessors(self.file, self.json, list(document.buffers))
        self.nodes: list[dict[str, Any]] = self.json.get("nodes", [])
        self.animations = animations_of(self.json, self.accessors)
        self._levels = _levels(self.file, self.nodes)
        self._still = np.stack([self._local(n, node) for n, node in enumerate(self.nodes)]) if self.nodes else None

    def moments(self, animation: Animation, samples: int) -> Iterator[Moment]:
        """So many moments of an animation, evenly from its first key to its last."""
        for number, time in enumerate(np.linspace(*animation.span, samples), start=1):
            moving: dict[int, dict[str, Array]] = {}
            for channel in animation.channels:
                moving.setdefault(channel.node, {})[channel.path] = value_at(channel, time)
            world = np.array(self._still)
            for n, values in moving.items():
                if values.keys() & PLAIN.keys():
                    world[n] = _matrix(*(values.get(path, self.nodes[n].get(path, PLAIN[path])) for path in PLAIN))
            for children, parents in self._levels:
                world[children] = world[parents] @ world[children]
            weights = {n: values["weights"] for n, values in moving.items() if "weights" in values}
            yield Moment(animation.name, float(time), number, world, weights)

    def places(self, part: Part, animation: Animation) -> list[int]:
        """The nodes that show a part and that an animation moves."""
        touched = {channel.node for channel in animation.channels}
        for children, parents in self._levels:
            touched |= {int(c) for c, p in zip(children, parents, strict=True) if int(p) in touched}
        return [
            n
            for n, node in enumerate(self.nodes)
            if part.place
            and node.get("mesh") == part.place[0]
            and (n in touched or not touched.isdisjoint(self._joints(n, node)))
        ]

    def moved(self, part: Part, node: int, moment: Moment) -> Stream:
        """The part's points where a node shows them at a moment, by source vertex."""
        assert part.source is not None
        points = np.zeros((int(part.source.max(initial=-1)) + 1, 3))
        points[part.source] = part.points.values[part.points.index]
        points = points + self._displacement(part, node, moment, len(points))
        if "skin" in self.nodes[node]:
            matrix = self._blended(part, self.nodes[node], moment, len(points))
            points = np.einsum("vij,vj->vi", matrix[:, :, :3], points) + matrix[:, :, 3]
        else:
            points = points @ moment.world[node, :3, :3].T + moment.world[node, :3, 3]
        return Stream(points.astype(np.float32), part.source)

    def _displacement(self, part: Part, node: int, moment: Moment, vertices: int) -> Array | float:
        resting = self.nodes[node].get("weights", self.json["meshes"][part.place[0]].get("weights", ()))
        weights = moment.weights.get(node, np.asarray(resting, np.float64))
        total: Array | float = 0.0
        for weight, morph in zip(weights, part.morphs, strict=False):
            if weight != 0 and morph.points is not None:
                total = total + weight * morph.points[:vertices].astype(np.float64)
        return total

    def _joints(self, number: int, node: dict[str, Any]) -> list[int]:
        skins = self.json.get("skins", [])
        if "skin" not in node:
            return []
        joints: list[int] = skins[node["skin"]].get("joints", []) if node["skin"] < len(skins) else []
        if not joints or max(joints) >= len(self.nodes):
            raise InputError(
                self.file, f"node {number}", f"skin {node['skin']} or a joint of it does not exist", EXPORT_AGAIN
            )
        return joints

    def _blended(self, part: Part, node: dict[str, Any], moment: Moment, vertices: int) -> Array:
        """(vertices, 3, 4): each vertex's mean of its joints' matrices (3.7.3.3)."""
        skin = self.json["skins"][node["skin"]]
        joints: list[int] = skin["joints"]
        place = f"mesh {part.place[0]} primitive {part.place[1]}"
        bound = np.broadcast_to(np.eye(4), (len(joints), 4, 4))
        if "inverseBindMatrices" in skin:
            stored = self.accessors.values(skin["inverseBindMatrices"], f"skin {node['skin']}, inverseBindMatrices")
            if stored.shape[1] != 16 or len(stored) < len(joints):
                found = f"{len(stored)} inverse bind matrices for {len(joints)} joints"
                raise InputError(self.file, f"skin {node['skin']}", found, EXPORT_AGAIN)
            bound = stored[: len(joints)].reshape(-1, 4, 4).transpose(0, 2, 1)
        matrices = (moment.world[joints] @ bound)[:, :3]
        attributes: dict[str, int] = self.json["meshes"][part.place[0]]["primitives"][part.place[1]]["attributes"]
        blended, weight = np.zeros((vertices, 3, 4)), np.zeros(vertices)
        number = 0
        while f"JOINTS_{number}" in attributes and f"WEIGHTS_{number}" in attributes:
            which = self.accessors.raw(attributes[f"JOINTS_{number}"], f"{place}, JOINTS_{number}")[:vertices]
            share = self.accessors.values(attributes[f"WEIGHTS_{number}"], f"{place}, WEIGHTS_{number}")[:vertices]
            if which.shape != (vertices, 4) or share.shape != which.shape or which.dtype.kind != "u":
                raise InputError(self.file, f"{place}, JOINTS_{number}", "they do not fit its vertices", EXPORT_AGAIN)
            if int(which[share != 0].max(initial=0)) >= len(joints):
                found = f"joint {int(which[share != 0].max())}, but the skin has {len(joints)}"
                raise InputError(self.file, f"{place}, JOINTS_{number}", found, EXPORT_AGAIN)
            for k in range(4):
                blended += share[:, k, None, None] * matrices[np.minimum(which[:, k], len(joints) - 1)]
                weight += share[:, k]
            number += 1
        return blended / np.where(weight != 0, weight, 1)[:, None, None]

    def _local(self, number: int, node: dict[str, Any]) -> Array:
        sizes = {"matrix": 16, "translation": 3, "rotation": 4, "scale": 3}
        for name, size in sizes.items():
            if name in node and len(node[name]) != size:
                raise InputError(
                    self.file, f"node {number}, {name}", f"{len(node[name])} numbers, not {size}", EXPORT_AGAIN
                )
        if "matrix" in node:
            return np.array(node["matrix"], np.float64).reshape(4, 4).T
        return _matrix(*(node.get(path, PLAIN[path]) for path in PLAIN))


def _matrix(translation: Any, rotation: Any, scale: Any) -> Array:
    """(4, 4): translation x rotation x scale, the rotation a quaternion x, y, z, w (3.5.3)."""
    x, y, z, w = np.asarray(rotation, np.float64) / max(float(np.linalg.norm(rotation)), 1e-30)
    turn = np.array(
        [
            [1 - 2 * (y * y + z * z), 2 * (x * y - z * w), 2 * (x * z + y * w)],
            [2 * (x * y + z * w), 1 - 2 * (x * x + z * z), 2 * (y * z - x * w)],
            [2 * (x * z - y * w), 2 * (y * z + x * w), 1 - 2 * (x * x + y * y)],
        ]
    )
    matrix = np.eye(4)
    matrix[:3, :3], matrix[:3, 3] = turn * np.asarray(scale, np.float64), translation
    return matrix


def _levels(file: InputFile, nodes: list[dict[str, Any]]) -> list[tuple[Array, Array]]:
    """(children, parents) of each level of the tree below its roots. Raises InputError where it is no tree."""
    parent = np.full(len(nodes), -1)
    for n, node in enumerate(nodes):
        for child in node.get("children", []):
            if child >= len(nodes) or parent[child] >= 0:
                found = "does not exist" if child >= len(nodes) else f"is a child of node {parent[child]}, too"
                raise InputError(file, f"node {n}", f"its child {child} {found}", EXPORT_AGAIN)
            parent[child] = n
    levels, front, reached = [], np.flatnonzero(parent < 0), 0
    while len(front):
        reached += len(front)
        below = [int(child) for n in front for child in nodes[n].get("children", [])]
        front = np.array(below, np.int64)
        if below:
            levels.append((front, parent[front]))
    if reached < len(nodes):
        raise InputError(file, "nodes", "some are their own descendants", EXPORT_AGAIN)
    return levels
