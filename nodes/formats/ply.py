"""PLY, ascii and binary, in any order of properties (Turk, "The PLY Polygon File Format", 1994)."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from tangentry.nodes.formats.gltf_reading import sniff
from tangentry.nodes.formats.vertices import vertices_of
from tangentry.nodes.model import Asset, Image, MapUse, Material, Part, Stream
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

TYPES = {
    **dict.fromkeys(("char", "int8"), "i1"),
    **dict.fromkeys(("uchar", "uint8"), "u1"),
    **dict.fromkeys(("short", "int16"), "i2"),
    **dict.fromkeys(("ushort", "uint16"), "u2"),
    **dict.fromkeys(("int", "int32"), "i4"),
    **dict.fromkeys(("uint", "uint32"), "u4"),
    **dict.fromkeys(("float", "float32"), "f4"),
    **dict.fromkeys(("double", "float64"), "f8"),
}
ORDERS = {"ascii": "", "binary_little_endian": "<", "binary_big_endian": ">"}
UV_NAMES = (("s", "t"), ("u", "v"), ("texture_u", "texture_v"))
MOST = 2**31 - 1
AGAIN = "export the file again"


class Property(NamedTuple):
    """A property of an element: its type, and for a list the type of its length."""

    name: str
    kind: str
    length: str  # "" where it is no list


class Element(NamedTuple):
    """An element of the header."""

    name: str
    count: int
    properties: list[Property]


Columns = dict[
    str, Array
]  # scalar properties (count,) by name; lists as name -> flat values, and name + "#" -> lengths


def read_ply(file: InputFile) -> Asset:
    """The asset in a PLY file: one part, polygons kept; UVs per vertex (s t, u v) or per corner (texcoord); v upward.

    Raises InputError naming the header line, element and row that can't be used.
    """
    content = file.bytes()
    order, elements, textures, body = _header(file, content)
    read = (
        _read_ascii(file, content[body:], elements)
        if order == ""
        else _read_binary(file, content[body:], elements, order)
    )
    if "tristrips" in read:
        raise InputError(file, "element tristrips", "triangle strips are not read", "export with faces")
    vertex, face = read.get("vertex", {}), read.get("face", {})
    name = next((one for one in ("vertex_indices", "vertex_index") if one in face), "")
    if not name or not len(face[name + "#"]):
        raise InputError(file, "", "there are no faces in it", "export the mesh with its faces")
    return _asset(file, vertex, face, name, textures)


def _header(file: InputFile, content: Array) -> tuple[str, list[Element], list[str], int]:
    head = content[: 1 << 20].tobytes()
    if not head:
        raise InputError(file, "", "the file is empty", AGAIN)
    if not head.startswith(b"ply"):
        raise InputError(file, "line 1", f"{head[:12]!r}, but a PLY file begins with `ply`", AGAIN)
    end = head.find(b"end_header")
    if end < 0:
        raise InputError(file, "header", "it has no end_header: the file is cut off", AGAIN)
    body = head.find(b"\n", end) + 1 or head.find(b"\r", end) + 1 or len(head)
    order, elements, textures = None, [], []  # type: str | None, list[Element], list[str]
    for number, line in enumerate(head[:end].decode("utf-8", "replace").splitlines(), 1):
        words = line.split()
        try:
            if words[:1] == ["format"]:
                order = ORDERS[words[1]]
            elif words[:1] == ["element"]:
                elements.append(Element(words[1], int(words[2]), []))
                if not 0 <= elements[-1].count <= MOST:
                    raise ValueError
            elif words[:2] == ["property", "list"]:
                elements[-1].properties.append(Property(words[4], TYPES[words[3]], TYPES[words[2]]))
            elif words[:1] == ["property"]:
                elements[-1].properties.append(Property(words[2], TYPES[words[1]], ""))
            elif words[:2] == ["comment", "TextureFile"]:
                textures.append(line.split(None, 2)[2].strip())
        except (IndexError, KeyError, ValueError):
            raise InputError(file, f"header line {number}", f"{line.strip()[:60]!r} can't be read", AGAIN) from None
    if order is None:
        raise InputError(file, "header", "it does not say its format", AGAIN)
    return order, elements, textures, body


def _read_binary(file: InputFile, body: Array, elements: list[Element], order: str) -> dict[str, Columns]:
    read: dict[str, Columns] = {}
    at = 0
    for element in elements:
        if not any(one.length for one in element.properties):
            kinds = np.dtype([(f"{k}", order + one.kind) for k, one in enumerate(element.properties)])
            size = kinds.itemsize * element.count
            if at + size > len(body):
                raise InputError(
                    file,
                    f"element {element.name}",
                    f"{element.count} announced, {(len(body) - at) // max(kinds.itemsize, 1)} there",
                    AGAIN,
                )
            rows = body[at : at + size].view(kinds) if size else np.zeros(0, kinds)
            read[element.name] = {one.name: rows[f"{k}"] for k, one in enumerate(element.properties)}
            at += size
        else:
            read[element.name], at = _binary_lists(file, body, at, element, order)
    return read


def _binary_lists(file: InputFile, body: Array, at: int, element: Element, order: str) -> tuple[Columns, int]:
    """Rows with lists: all at once where every row is as long as the first, else one after another."""
    alike = _alike(body, at, element, order)
    if alike is not None:
        return alike
    out: dict[str, list[Array]] = {one.name: [] for one in element.properties}
    lengths: dict[str, list[int]] = {one.name: [] for one in element.properties if one.length}
    data = body.tobytes()
    for row in range(element.count):
        for one in element.properties:
            count = 1
            if one.length:
                kind = np.dtype(order + one.length)
                if at + kind.itemsize > len(data):
                    raise InputError(file, f"{element.name} {row}", "the file is cut off here", AGAIN)
                count = int(np.frombuffer(data, kind, 1, at)[0])
                at += kind.itemsize
                lengths[one.name].append(count)
            kind = np.dtype(order + one.kind)
            if count < 0 or at + kind.itemsize * count > len(data):
                raise InputError(
                    file, f"{element.name} {row}", f"a list of {count} does not fit: the file is cut off", AGAIN
                )
            out[one.name].append(np.frombuffer(data, kind, count, at))
            at += kind.itemsize * count
    columns: Columns = {name: np.concatenate(values) if values else np.zeros(0) for name, values in out.items()}
    return {**columns, **{name + "#": np.array(values, np.int64) for name, values in lengths.items()}}, at


def _alike(body: Array, at: int, element: Element, order: str) -> tuple[Columns, int] | None:
    """Rows that are all of one layout, read as one table; None where they are not."""
    fields: list[tuple[str, str, tuple[int, ...]]] = []
    counts: dict[str, int] = {}
    here = at
    for one in element.properties:
        count = 1
        if one.length:
            kind = np.dtype(order + one.length)
            if not element.count or here + kind.itemsize > len(body):
                return None
            count = int(body[here : here + kind.itemsize].copy().view(kind)[0])
            counts[one.name] = count
            fields.append((one.name + "#", order + one.length, ()))
            here += kind.itemsize
        if not 0 <= count <= 4096:
            return None
        fields.append((one.name, order + one.kind, (count,)))
        here += np.dtype(one.kind).itemsize * count
    table = np.dtype(fields)
    end = at + table.itemsize * element.count
    if end > len(body):
        return None
    rows = body[at:end].view(table)
    if any((rows[name + "#"] != count).any() for name, count in counts.items()):
        return None
    columns: Columns = {one.name: rows[one.name].reshape(-1) for one in element.properties}
    return {**columns, **{name + "#": np.full(element.count, count, np.int64) for name, count in counts.items()}}, end


def _read_ascii(file: InputFile, body: Array, elements: list[Element]) -> dict[str, Columns]:
    try:
        words = np.array(body.tobytes().split(), dtype="S32").astype(np.float64)
    except ValueError as error:
        raise InputError(file, "", f"something that is no number: {error}", AGAIN) from None
    read: dict[str, Columns] = {}
    at = 0
    for element in elements:
        width = len(element.properties)
        if not any(one.length for one in element.properties):
            if at + width * element.count > len(words):
                raise InputError(
                    file,
                    f"element {element.name}",
                    f"{element.count} announced, {(len(words) - at) // max(width, 1)} there",
                    AGAIN,
                )
            rows = words[at : at + width * element.count].reshape(element.count, width)
            read[element.name] = {one.name: rows[:, k] for k, one in enumerate(element.properties)}
            at += width * element.count
        else:
            read[element.name], at = _ascii_lists(file, words, at, element)
    return read


def _ascii_lists(file: InputFile, words: Array, at: int, element: Element) -> tuple[Columns, int]:
    out: dict[str, list[Array]] = {one.name: [] for one in element.properties}
    lengths: dict[str, list[int]] = {one.name: [] for one in element.properties if one.length}
    for row in range(element.count):
        for one in element.properties:
            count = 1
            if one.length:
                count = int(words[at]) if at < len(words) and 0 <= words[at] <= MOST else -1
                at += 1
                lengths[one.name].append(count)
            if count < 0 or at + count > len(words):
                raise InputError(
                    file, f"{element.name} {row}", f"a list of {count} does not fit: the file is cut off", AGAIN
                )
            out[one.name].append(words[at : at + count])
            at += count
    columns: Columns = {name: np.concatenate(values) if values else np.zeros(0) for name, values in out.items()}
    return {**columns, **{name + "#": np.array(values, np.int64) for name, values in lengths.items()}}, at


def _asset(file: InputFile, vertex: Columns, face: Columns, name: str, textures: list[str]) -> Asset:
    if not all(axis in vertex for axis in "xyz"):
        raise InputError(
            file, "element vertex", f"it has {', '.join(vertex) or 'no properties'}, but not x, y and z", AGAIN
        )
    points = _table(vertex, ("x", "y", "z"))
    finite = np.isfinite(points).all(axis=1)
    if not finite.all():
        row = int(np.argmin(finite))
        raise InputError(file, f"vertex {row}", f"its position is {points[row].tolist()}", AGAIN)
    index, sizes = face[name].astype(np.int64), face[name + "#"]
    if index.size and (index.min() < 0 or index.max() >= len(points)):
        corner = int(np.argmax((index < 0) | (index >= len(points))))
        row = int(np.searchsorted(np.cumsum(sizes), corner, side="right"))
        raise InputError(
            file, f"face {row}", f"vertex index {int(index[corner])}, but the file has {len(points)} vertices", AGAIN
        )
    at = index.astype(np.int32)
    notes = []
    if (sizes < 3).any():
        notes.append(f"{int((sizes < 3).sum())} faces of fewer than three corners")
    starts = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int32)
    normals = (
        Stream(_table(vertex, ("nx", "ny", "nz")), at) if all(one in vertex for one in ("nx", "ny", "nz")) else None
    )
    part = Part(
        file.stem,
        0 if textures else -1,
        starts,
        Stream(points, at),
        normals,
        _uvs(vertex, face, at),
        _colours(vertex, at),
    )
    images = []
    for texture in textures:
        beside = file.beside(texture.replace("\\", "/").split("/")[-1])
        there = beside.exists
        content = beside.bytes() if there else np.zeros(0, np.uint8)
        images.append(Image(beside.name, sniff(content), content))
        notes += [] if there else [f"image {texture} is not there"]
    materials = (Material(file.stem, (MapUse("colour", 0),)),) if textures else ()
    return Asset(file.path, (part,), materials, tuple(images), False, None, tuple(notes))


def _table(columns: Columns, names: tuple[str, ...]) -> Array:
    return np.stack([columns[name] for name in names], axis=1).astype(np.float32)


def _uvs(vertex: Columns, face: Columns, at: Array) -> tuple[Stream, ...]:
    if "texcoord" in face and len(face["texcoord"]) == 2 * len(at):
        values = np.ascontiguousarray(face["texcoord"].reshape(-1, 2), np.float32)
        from tangentry.nodes.geometry.corners import distinct_values

        label, first = distinct_values(values)
        return (Stream(values[first], label),)
    for names in UV_NAMES:
        if all(name in vertex for name in names):
            return (Stream(_table(vertex, names), at),)
    return ()


def _colours(vertex: Columns, at: Array) -> tuple[Stream, ...]:
    names = tuple(name for name in ("red", "green", "blue", "alpha") if name in vertex)
    if len(names) < 3 or names[:3] != ("red", "green", "blue"):
        return ()
    values = _table(vertex, names)
    whole = vertex["red"].dtype.kind in "iu" or values.max(initial=0) > 1
    return (Stream(values / np.float32(255) if whole else values, at),)


def write_ply(asset: Asset) -> Array:
    """A binary PLY file, (size,) uint8: a vertex for each corner that differs; nx ny nz, s t, tx ty tz side where the asset has them."""
    found = [vertices_of(part) for part in asset.parts]
    has_normals = all(one.normals is not None for one in found)
    has_uvs = all(one.uvs for one in found)
    has_frames = all(one.tangents is not None for one in found)
    names = [
        *"xyz",
        *(("nx", "ny", "nz") if has_normals else ()),
        *("st" if has_uvs else ()),
        *(("tx", "ty", "tz", "side") if has_frames else ()),
    ]
    tables, faces, before = [], [], 0
    for one in found:
        columns = [one.points]
        if has_normals and one.normals is not None:
            columns.append(one.normals)
        if has_uvs:
            columns.append(one.uvs[0] * (1, -1) + (0, 1) if asset.v_down else one.uvs[0])
        if has_frames and one.tangents is not None:
            columns.append(one.tangents)
        tables.append(np.concatenate(columns, axis=1).astype("<f4"))
        rows = np.zeros(len(one.triangles), [("count", "u1"), ("corners", "<i4", 3)])
        rows["count"], rows["corners"] = 3, one.triangles + before
        faces.append(rows)
        before += len(one.points)
    header = ["ply", "format binary_little_endian 1.0", "comment tangentry", f"element vertex {before}"]
    header += [f"property float {name}" for name in names]
    header += [f"element face {sum(map(len, faces))}", "property list uchar int vertex_indices", "end_header"]
    parts = [np.frombuffer(("\n".join(header) + "\n").encode(), np.uint8)]
    parts += [table.view(np.uint8).reshape(-1) for table in tables] + [
        rows.view(np.uint8).reshape(-1) for rows in faces
    ]
    return np.concatenate(parts)
