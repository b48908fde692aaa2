"""An asset's own glTF document, edited: TANGENT where frames were solved, vertices split where they must be."""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Iterator
from typing import Any

import numpy as np
from tangentry.nodes.formats.gltf_accessors import Accessors
from tangentry.nodes.formats.gltf_builder import Builder, bounds
from tangentry.nodes.formats.vertices import label_of, tangent_rows
from tangentry.nodes.geometry.corners import distinct_rows
from tangentry.nodes.model import Asset, Part, Stream
from tangentry.pipeline.flow import Array, InputFile

TRIANGLES = 4


def edited_document(asset: Asset, vectors: str) -> Builder:
    """The document with what changed on the asset's parts since it was read."""
    assert asset.document is not None
    document = json.loads(asset.document.text)
    accessors = Accessors(InputFile(asset.name), document, list(asset.document.buffers))
    builder = Builder(vectors, document, [accessors.view(number, "") for number in range(len(accessors.views))])
    builder.images = list(asset.images)
    editing = _Editing(builder, accessors)
    for part in asset.parts:
        m, p = part.place
        editing.primitive(part, document["meshes"][m]["primitives"][p])
    editing.empty_unused()
    return builder


class _Editing:
    """Edits primitives one after another; counts who uses an accessor, so that only unshared ones are put in place."""

    def __init__(self, builder: Builder, accessors: Accessors) -> None:
        self.builder, self.accessors = builder, accessors
        self.uses = Counter(_mentions(builder.document))
        self.shared: dict[tuple[int, ...], tuple[int, Array, Array]] = {}

    def primitive(self, part: Part, primitive: dict[str, Any]) -> None:
        assert part.source is not None
        attributes: dict[str, int] = primitive["attributes"]
        new = self._changed(part, attributes)
        if not new:
            return
        vertices = self.accessors.entry(attributes["POSITION"], "POSITION")["count"]
        label, first = distinct_rows(part.source, *(label_of(stream) for stream in new.values()))
        source = part.source[first]
        if len(np.unique(source)) == len(source):
            for name, stream in new.items():
                self._whole(primitive, name, _scattered(stream, part.source, vertices, name), vertices)
            self._morph_tangents(part, primitive, part.source, np.arange(part.corner_count), vertices)
        else:
            self._split(part, primitive, new, label, first)

    def empty_unused(self) -> None:
        """Take the data of accessors that nothing uses any more; their numbers stay, lest others change."""
        for number, uses in self.uses.items():
            if uses == 0:
                for name in ("bufferView", "byteOffset", "sparse", "min", "max"):
                    self.builder.list("accessors")[number].pop(name, None)

    def _changed(self, part: Part, attributes: dict[str, int]) -> dict[str, Stream]:
        """The attributes whose values at some corner are no longer those of the document, as streams."""
        assert part.source is not None
        new: dict[str, Stream] = {}
        streams = {
            "POSITION": part.points,
            "NORMAL": part.normals,
            **{f"TEXCOORD_{n}": uv for n, uv in enumerate(part.uvs)},
        }
        for name, stream in streams.items():
            if stream is None:
                continue
            before = self.accessors.values(attributes[name], name) if name in attributes else None
            if before is None or not np.array_equal(before[part.source], stream.values[stream.index], equal_nan=True):
                new[name] = stream
        if part.normals is not None and self._to_pack(attributes.get("NORMAL")):
            new["NORMAL"] = part.normals
        if part.frames is not None and part.normals is not None:
            brought = part.frames.method == "stored" and "TANGENT" in attributes
            if not brought or self._to_pack(attributes["TANGENT"]):
                new["TANGENT"] = Stream(tangent_rows(part.frames), part.frames.index)
        return new

    def _to_pack(self, number: int | None) -> bool:
        """Is that an accessor of floats, where directions were asked for in fewer bits?"""
        return bool(self.builder.most) and number is not None and self.accessors.raw(number, "").dtype.kind == "f"

    def _whole(self, primitive: dict[str, Any], name: str, values: tuple[Array, Array], vertices: int) -> None:
        """Put an attribute of an unsplit primitive: shared with those that share the rest, where their values agree."""
        attributes = primitive["attributes"]
        rows, filled = values
        key = (hash(name), *sorted(number for other, number in attributes.items() if other != name))
        if key in self.shared:
            number, others, theirs = self.shared[key]
            both = filled & theirs
            if np.array_equal(others[both], rows[both]):
                others[filled] = rows[filled]
                theirs |= filled
                if attributes.get(name, number) != number:
                    self.uses[attributes[name]] -= 1
                attributes[name] = self._add(name, others, number)
                return
        attributes[name] = self._put(attributes.get(name), rows, name)
        self.shared[key] = (attributes[name], rows, filled)

    def _add(self, name: str, values: Array, replaces: int | None) -> int:
        if name in ("NORMAL", "TANGENT"):
            return self.builder.directions(values, replaces)
        return self.builder.accessor(values, replaces, **(bounds(values) if name == "POSITION" else {}))

    def _put(self, old: int | None, values: Array, name: str) -> int:
        """Add an accessor, in the place of the old one if nobody else uses that."""
        replaces = old if old is not None and self.uses[old] == 1 else None
        if old is not None and replaces is None:
            self.uses[old] -= 1
        number = self._add(name, values, replaces)
        self.uses[number] = 1
        return number

    def _split(self, part: Part, primitive: dict[str, Any], new: dict[str, Stream], label: Array, first: Array) -> None:
        """Write a primitive anew with more vertices: all attributes and morph targets follow their source vertex."""
        assert part.source is not None
        order = _source_order(part.source[first])
        place = np.empty(len(order), np.int32)
        place[order] = np.arange(len(order), dtype=np.int32)
        corner = first[order]
        source = part.source[corner]
        attributes = primitive["attributes"]
        for name, old in list(attributes.items()):
            if name not in new:
                attributes[name] = self._gathered(old, source, name)
        for name, stream in new.items():
            attributes[name] = self._put(attributes.get(name), stream.values[stream.index[corner]], name)
        for target in primitive.get("targets", ()):
            for name, old in list(target.items()):
                target[name] = self._gathered(old, source, name)
        self._morph_tangents(part, primitive, np.arange(len(corner)), corner, len(corner))
        old = primitive.get("indices")
        replaces = old if old is not None and self.uses[old] == 1 else None
        primitive["indices"] = self.builder.indices(place[label], len(corner), replaces)
        self.uses[primitive["indices"]] = 1
        if primitive.get("mode", TRIANGLES) != TRIANGLES:
            primitive["mode"] = TRIANGLES

    def _gathered(self, old: int, source: Array, name: str) -> int:
        """An accessor's elements by source vertex, as stored."""
        entry = self.accessors.entry(old, name)
        values = self.accessors.raw(old, name)[source]
        normalised = {"normalized": True} if entry.get("normalized") else {}
        replaces = old if self.uses[old] == 1 else None
        if replaces is None:
            self.uses[old] -= 1
        limits = bounds(values) if "min" in entry or name == "POSITION" else {}
        number = self.builder.accessor(values, replaces, **normalised, **limits)
        self.uses[number] = 1
        return number

    def _morph_tangents(
        self, part: Part, primitive: dict[str, Any], vertex: Array, corner: Array, vertices: int
    ) -> None:
        """TANGENT displacements for targets whose normals move; vertex[k] is shown by corner[k]."""
        if part.frames is None or part.frames.method == "stored":
            return
        for morph, target in zip(part.morphs, primitive.get("targets", ()), strict=True):
            if morph.tangents is None or morph.normals is None:
                target.pop("TANGENT", None)
                continue
            rows = np.zeros((vertices, 3), np.float32)
            rows[vertex] = morph.tangents[part.frames.index[corner]]
            target["TANGENT"] = self._put(target.get("TANGENT"), rows, "TANGENT displacement")


def _scattered(stream: Stream, source: Array, vertices: int, name: str) -> tuple[Array, Array]:
    """Values by source vertex, and which vertices have one; those that no corner uses get a valid stand-in."""
    rows = np.zeros((vertices, stream.values.shape[1]), np.float32)
    if name in ("TANGENT", "NORMAL"):
        rows[:, 0] = 1
        rows[:, 3:] = 1
    filled = np.zeros(vertices, bool)
    rows[source] = stream.values[stream.index]
    filled[source] = True
    return rows, filled


def _source_order(source: Array) -> Array:
    """An order of vertices that keeps the source's own, further copies of a vertex last."""
    _, copy = np.unique(source, return_index=True)
    is_copy = np.ones(len(source), bool)
    is_copy[copy] = False
    return np.lexsort((source, is_copy))


def _mentions(document: dict[str, Any]) -> Iterator[int]:
    """Every mention of an accessor by the specification's own objects."""
    for mesh in document.get("meshes", ()):
        for primitive in mesh.get("primitives", ()):
            yield from primitive.get("attributes", {}).values()
            yield from (primitive[name] for name in ("indices",) if name in primitive)
            for target in primitive.get("targets", ()):
                yield from target.values()
    for animation in document.get("animations", ()):
        for sampler in animation.get("samplers", ()):
            yield from (sampler[name] for name in ("input", "output") if name in sampler)
    for skin in document.get("skins", ()):
        yield from (skin[name] for name in ("inverseBindMatrices",) if name in skin)
    for node in document.get("nodes", ()):
        yield from node.get("extensions", {}).get("EXT_mesh_gpu_instancing", {}).get("attributes", {}).values()
