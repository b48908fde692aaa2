"""OBJ files, their material libraries, and a sidecar for what OBJ has no place for: the frames."""

from __future__ import annotations

import numpy as np
from tangentry.nodes.formats.side_images import images_beside
from tangentry.nodes.geometry.corners import distinct_rows
from tangentry.nodes.model import Asset, Frames, Material, Part, Stream
from tangentry.pipeline.flow import Array, OutFile

STATEMENTS = {
    "colour": "map_Kd",
    "normal": "norm",
    "height": "bump",
    "emissive": "map_Ke",
    "specular": "map_Ks",
    "gloss": "map_Ns",
    "opacity": "map_d",
    "ambient": "map_Ka",
    "roughness": "map_Pr",
    "metallic": "map_Pm",
}  # as obj_materials reads them
WORDS = {(False, False): " %d", (True, False): " %d/%d", (False, True): " %d//%d", (True, True): " %d/%d/%d"}
FRAMES_HEAD = """# The tangent frames of {stem}.obj.
# t  tangent x y z (unit), and the side: bitangent = cross(normal, tangent) * side, the way v grows upward
# b  bitangent x y z (unit) of the frame before it, where it is skewed: then it counts, not the cross product
# f  for each f statement of {stem}.obj, in its order: the frame of each corner, counted from 1; 0: none
"""


def write_obj(asset: Asset, stem: str) -> tuple[OutFile, ...]:
    """An OBJ file: positions with their colours, the first UV set, normals, smoothing groups; polygons kept.

    Beside it a material library, the images its materials name, and `stem.frames`: a text of the frames, by the faces
    and corners of the OBJ file (its head says how). v grows upward in it.
    """
    materials = _names([material.name for material in asset.materials])
    names, images = images_beside(asset.images, f"{stem}.obj", f"{stem}.mtl", f"{stem}.frames")
    used = {use.image for material in asset.materials for use in material.maps if use.role in STATEMENTS}
    coloured = any(part.colours for part in asset.parts)
    text = [f"mtllib {stem}.mtl\n"] if materials else []
    before, name = np.zeros(3, np.int64), None
    for part in asset.parts:
        if part.name != name:
            text.append(f"o {_plain(part.name) or stem}\n")
            name = part.name
        if part.material >= 0:
            text.append(f"usemtl {materials[part.material]}\n")
        points, colours = _points(part, coloured)
        streams = [points, part.uvs[0] if part.uvs else None, part.normals]
        text += [_rows("v", points.values if colours is None else np.concatenate([points.values, colours], axis=1))]
        text += [_rows("vt", _upward(part.uvs[0].values, asset.v_down)) if part.uvs else ""]
        text += [_rows("vn", part.normals.values) if part.normals else "", _faces(part, streams, before)]
        before += [len(stream.values) if stream is not None else 0 for stream in streams]
    files = [_file(f"{stem}.obj", "".join(text))]
    if materials:
        files.append(_file(f"{stem}.mtl", _library(asset, materials, names)))
    if any(part.frames for part in asset.parts):
        files.append(_file(f"{stem}.frames", FRAMES_HEAD.format(stem=stem) + _frames(asset)))
    placed = {names[image] for image in used}
    return (*files, *(image for image in images if image.name in placed))


def _upward(uvs: Array, v_down: bool) -> Array:
    return np.stack([uvs[:, 0], 1 - uvs[:, 1]], axis=1) if v_down else uvs


def _points(part: Part, coloured: bool) -> tuple[Stream, Array | None]:
    """The points, with colours beside them if there are any in the file: a point of two colours is written twice."""
    if not coloured:
        return part.points, None
    if not part.colours:
        return part.points, np.ones((len(part.points.values), 3), np.float32)
    colours = part.colours[0]
    index, corner = distinct_rows(part.points.index, colours.index)
    points = Stream(part.points.values[part.points.index[corner]], index)
    return points, colours.values[colours.index[corner], :3]


def _rows(keyword: str, values: Array) -> str:
    # 9 digits tell every float32 apart (IEEE 754-2019, 5.12.2); one format for all rows is quicker than one for each.
    line = keyword + " %.9g" * values.shape[1] + "\n"
    return (line * len(values)) % tuple(values.ravel().tolist())


def _faces(part: Part, streams: list[Stream | None], before: Array) -> str:
    word = WORDS[streams[1] is not None, streams[2] is not None]
    columns = [stream.index + before[k] + 1 for k, stream in enumerate(streams) if stream is not None]
    lines = [f"f{word * size}\n" for size in np.diff(part.starts).tolist()]
    if part.smoothing is not None:
        changes = np.flatnonzero(np.diff(part.smoothing, prepend=part.smoothing[:1] - 1))
        for f in changes.tolist():
            lines[f] = f"s {part.smoothing[f] or 'off'}\n" + lines[f]
    return "".join(lines) % tuple(np.stack(columns, axis=1).ravel().tolist())


def _frames(asset: Asset) -> str:
    text, before = [], 1
    for part in asset.parts:
        index = np.zeros(part.corner_count, np.int64)
        if part.frames is not None:
            text.append(_frame_rows(part.frames))
            index, before = part.frames.index + before, before + len(part.frames.sides)
        lines = [f"f{' %d' * size}\n" for size in np.diff(part.starts).tolist()]
        text.append("".join(lines) % tuple(index.tolist()))
    return "".join(text)


def _frame_rows(frames: Frames) -> str:
    columns, line = [frames.tangents, frames.sides[:, None]], "t %.9g %.9g %.9g %d\n"
    if frames.bitangents is not None:
        columns.append(frames.bitangents)
        line += "b %.9g %.9g %.9g\n"
    rows = np.concatenate(columns, axis=1)
    return (line * len(rows)) % tuple(rows.ravel().tolist())


def _library(asset: Asset, materials: list[str], images: list[str]) -> str:
    lines = []
    for name, material in zip(materials, asset.materials, strict=True):
        lines += [f"newmtl {name}", "Kd 1 1 1", *_maps(material, images)]
    return "\n".join(lines) + "\n"


def _maps(material: Material, images: list[str]) -> list[str]:
    return [
        f"{STATEMENTS[use.role]} {f'-bm {use.strength:g} ' if use.strength != 1 else ''}{images[use.image]}"
        for use in material.maps
        if use.role in STATEMENTS
    ]


def _names(names: list[str]) -> list[str]:
    """Names in one line each, none of them twice."""
    taken: dict[str, None] = {}
    for number, name in enumerate(names):
        plain = _plain(name) or f"material_{number}"
        while plain in taken:
            plain = f"{plain}_{number}"
        taken[plain] = None
    return list(taken)


def _plain(name: str) -> str:
    """A name in one line; a backslash at its end would continue that."""
    return " ".join("".join(one if one.isprintable() else " " for one in name).split()).rstrip("\\")


def _file(name: str, text: str) -> OutFile:
    return OutFile(name, np.frombuffer(text.encode(), np.uint8))
