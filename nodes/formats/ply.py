"""PLY files, ascii and binary, with any order of properties."""

from __future__ import annotations

from dataclasses import replace
from pathlib import PurePosixPath

import numpy as np
from tangentry.nodes.formats.corner_streams import grouped, sound_normals, sound_uvs, used_rows, with_faces
from tangentry.nodes.formats.ply_scan import AGAIN, NOTHING, Columns, read_elements, read_header
from tangentry.nodes.formats.scan import shown
from tangentry.nodes.formats.side_images import image_beside
from tangentry.nodes.geometry.corners import distinct_values
from tangentry.nodes.model import Asset, Frames, Image, MapUse, Material, Part, Stream
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

UV_NAMES = (("s", "t"), ("u", "v"), ("texture_u", "texture_v"))
MORE_UVS = [(f"s{k}", f"t{k}") for k in range(1, 8)]  # as `write_ply` names further sets
NORMAL, TANGENT = ("nx", "ny", "nz"), ("tx", "ty", "tz", "side")
COLOUR = ("red", "green", "blue", "alpha")
PASSED_OVER = -2  # owner of faces of fewer than three corners; -1: no material
CORNERS, UVS, IMAGE = ("vertex_indices", "vertex_index"), "texcoord", "texnumber"


def read_ply(file: InputFile) -> Asset:
    """The asset in a PLY file: polygons, or strips as triangles; v grows upward.

    UVs may stand per vertex (s t, u v; further sets s1 t1 ...) or per corner, in each face's list `texcoord`; colours
    per vertex or face; tangents as `write_ply` writes them. One part, or one for each image of the comments
    `TextureFile` if faces have a `texnumber`. What is passed over is noted. Raises InputError naming the header's line,
    or element and row, that can't be used.
    """
    content = file.bytes()
    header = read_header(file, content)
    read = read_elements(file, content, header)
    vertex, face = read.get("vertex", NOTHING), read.get("face", NOTHING)
    points = _points(file, vertex)
    notes: list[str] = []
    sizes, index = _faces(file, face, read.get("tristrips", NOTHING), len(points), notes)
    keep = sizes >= 3
    if not keep.any():
        raise InputError(file, "", "there are no faces in it", "export the mesh with its faces")
    images = tuple(_image(file, name, notes) for name in header.textures)
    whole = _part(file.stem, vertex, face, points, sizes, index, notes)
    owner = _owner(file, face, sizes, len(images))
    owned = grouped(np.where(keep, owner, PASSED_OVER))
    parts = [
        replace(whole if len(faces) == len(sizes) else with_faces(whole, faces), material=material)
        for material, faces in owned
        if material != PASSED_OVER
    ]
    _tell_the_rest(read, notes)
    materials = tuple(
        Material(PurePosixPath(image.name).stem, (MapUse("colour", k),)) for k, image in enumerate(images)
    )
    return Asset(file.path, tuple(parts), materials, images, False, None, tuple(notes))


def _points(file: InputFile, vertex: Columns) -> Array:
    if not vertex.has("x", "y", "z"):
        found = ", ".join(shown(name) for name in vertex.scalars) or "no properties"
        raise InputError(file, "element vertex", f"it has {found}, but not x, y and z", AGAIN)
    points = vertex.table("x", "y", "z")
    finite = np.isfinite(points).all(axis=1)
    if not finite.all():
        row = int(np.argmin(finite))
        raise InputError(file, f"vertex {row}", f"its position is {points[row].tolist()}", AGAIN)
    return points


def _faces(file: InputFile, face: Columns, strips: Columns, points: int, notes: list[str]) -> tuple[Array, Array]:
    """How many corners each face has, and the vertex of each corner."""
    name = next((one for one in CORNERS if one in face.lists), "")
    values, sizes = face.lists[name] if name else (np.zeros(0), np.zeros(0, np.int64))
    strip = next((strips.lists[one] for one in CORNERS if one in strips.lists), None)
    if strip is not None and not len(sizes):
        values = _unstripped(*strip)
        sizes = np.full(len(values) // 3, 3)
    wrong = ~((values >= 0) & (values < points) & (values == np.floor(values)))
    if wrong.any():
        corner = int(np.argmax(wrong))
        row = int(np.searchsorted(np.cumsum(sizes), corner, side="right"))
        found = f"vertex index {values[corner]:.10g}, but the file has {points} vertices"
        raise InputError(file, f"face {row}", found, AGAIN)
    few = int((sizes < 3).sum())
    notes += [f"{few} faces of fewer than three corners passed over"] if few else []
    return sizes, values.astype(np.int32)


def _unstripped(values: Array, lengths: Array) -> Array:
    """The triangles of strips, corner by corner; -1 begins a strip anew, every second triangle is turned over."""
    ends = np.cumsum(lengths)
    joined = np.insert(values, ends[:-1], -1)
    at = np.arange(len(joined))
    begun = np.maximum.accumulate(np.where(joined == -1, at + 1, 0))
    a, b, c = joined[:-2], joined[1:-1], joined[2:]
    odd = (at[:-2] - begun[:-2]) % 2 == 1
    triangles = np.stack([np.where(odd, b, a), np.where(odd, a, b), c], axis=1)
    stitch = (a == b) | (b == c) | (c == a) | (triangles == -1).any(axis=1)
    return triangles[~stitch].ravel()


def _image(file: InputFile, texture: str, notes: list[str]) -> Image:
    beside = file.beside(texture.replace("\\", "/").split("/")[-1])
    return image_beside(file, beside, texture, "", notes)


def _owner(file: InputFile, face: Columns, sizes: Array, images: int) -> Array:
    """(faces,) int64: the material of each face."""
    if images and face.has(IMAGE) and len(face.scalars[IMAGE]) == len(sizes):
        numbers = face.scalars[IMAGE]
        wrong = ~((numbers >= -1) & (numbers < images))
        if wrong.any():
            row = int(np.argmax(wrong))
            found = f"{IMAGE} {numbers[row]:g}, but the file names {images} images"
            raise InputError(file, f"face {row}", found, AGAIN)
        return numbers.astype(np.int64)
    return np.full(len(sizes), 0 if images else -1)


def _part(
    name: str, vertex: Columns, face: Columns, points: Array, sizes: Array, index: Array, notes: list[str]
) -> Part:
    starts = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int32)
    part = Part(name, -1, starts, used_rows(points, index))
    part = replace(
        part, uvs=_uvs(vertex, face, sizes, index, name, notes), colours=_colours(vertex, face, index, sizes)
    )
    if vertex.has(*NORMAL):
        part = replace(part, normals=sound_normals(vertex.table(*NORMAL), index, part, notes))
    return replace(part, frames=_frames(vertex, index, part, notes))


def _uvs(vertex: Columns, face: Columns, sizes: Array, index: Array, name: str, notes: list[str]) -> tuple[Stream, ...]:
    found: list[Stream | None] = []
    values, lengths = face.lists.get(UVS, (np.zeros(0), np.zeros(0, np.int64)))
    if len(lengths) == len(sizes) and len(values):
        full = lengths == 2 * sizes
        own = np.repeat(full, sizes)
        with np.errstate(over="ignore"):
            uvs = values[np.repeat(full, lengths)].reshape(-1, 2).astype(np.float32)
        label, first = distinct_values(uvs)
        row = np.full(len(index), -1, np.int32)
        row[own] = label
        found.append(sound_uvs(uvs[first], row, name, notes))
    else:
        names = next((names for names in UV_NAMES if vertex.has(*names)), None)
        found += [sound_uvs(vertex.table(*names), index, name, notes)] if names else []
    found += [sound_uvs(vertex.table(*names), index, name, notes) for names in MORE_UVS if vertex.has(*names)]
    return tuple(one for one in found if one is not None)


def _colours(vertex: Columns, face: Columns, at: Array, sizes: Array) -> tuple[Stream, ...]:
    """Colours of the vertices, or else of the faces; 0 to 1."""
    for columns, index in ((vertex, at), (face, np.repeat(np.arange(len(sizes)), sizes))):
        names = COLOUR if columns.has(*COLOUR) else COLOUR[:3]
        if columns.has(*names):
            values = columns.table(*names)
            return (used_rows(values / np.float32(255) if names[0] in columns.whole else values, index),)
    return ()


def _frames(vertex: Columns, at: Array, part: Part, notes: list[str]) -> Frames | None:
    if part.normals is None or not vertex.has(*TANGENT):
        return None
    stored = used_rows(vertex.table(*TANGENT), at)
    side = stored.values[:, 3]
    if not (np.abs(side) == 1).all():  # as `write_ply` leaves parts without frames
        notes.append("not every vertex has a tangent with a side of 1 or -1: they are all passed over")
        return None
    none = np.zeros(len(side), bool)
    tangents = np.ascontiguousarray(stored.values[:, :3])
    return Frames(tangents, None, side.astype(np.int8), none, stored.index, len(part.uvs[:1]) - 1, "stored")


def _tell_the_rest(read: dict[str, Columns], notes: list[str]) -> None:
    """Note what is passed over."""
    known = {"x", "y", "z", UVS, IMAGE, *CORNERS, *NORMAL, *TANGENT, *COLOUR}
    known |= {name for names in (*UV_NAMES, *MORE_UVS) for name in names}
    for element, columns in read.items():
        if element not in ("vertex", "face", "tristrips"):
            notes.append(f"element {shown(element)} is passed over")
            continue
        rest = [shown(name) for name in (*columns.scalars, *columns.lists) if name not in known]
        if rest:
            notes.append(f"element {element}: {', '.join(rest)} passed over")
