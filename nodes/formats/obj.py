"""Wavefront OBJ, with its index streams kept apart (Advanced Visualizer manual, appendix B)."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from tangentry.nodes.formats.corner_streams import corners_of, grouped, sound_normals, sound_uvs, used_rows
from tangentry.nodes.formats.obj_materials import Materials
from tangentry.nodes.formats.obj_scan import Statements, read_statements
from tangentry.nodes.model import Asset, Part
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile


def read_obj(file: InputFile) -> Asset:
    """The asset in an OBJ file: one part for each object and material, in the order they appear; v grows upward.

    Polygons stay polygons, groups (`g`) divide nothing. Faces without UVs in a part that has some get (0, 0), faces
    without normals their own; both are noted, as are material libraries and images that are not there. Raises
    InputError naming the line of whatever can't be used.
    """
    found = read_statements(file)
    if len(found.starts) < 2:
        what = "there are lines or points, but no faces in it" if found.skipped else "there are no faces in it"
        raise InputError(file, "", what, "export the mesh with its faces")
    materials = Materials(file)
    owner, keys, smoothing = _owners(found, materials, file.stem)
    notes = [f"{found.skipped} lines, curves or other statements passed over"] if found.skipped else []
    parts = []
    for row, faces in grouped(owner):
        parts.append(_part(found, faces, *keys[row], smoothing, notes))
    return Asset(
        file.path, tuple(parts), materials.all(), tuple(materials.images), False, None, (*notes, *materials.notes)
    )


def _owners(found: Statements, materials: Materials, stem: str) -> tuple[Array, list[tuple[str, int]], Array | None]:
    """The part of each face, each part's object (the file's stem before any) and material, and smoothing groups."""
    faces = len(found.starts) - 1
    owner, smoothing = np.zeros(faces, np.int32), np.zeros(faces, np.int32)
    keys: dict[tuple[str, int], int] = {}
    name, material, smooth, group, begun = stem, -1, False, 0, 0
    for at, keyword, rest in [*found.words, (faces, "", "")]:
        if at > begun:
            owner[begun:at] = keys.setdefault((name, material), len(keys))
            smoothing[begun:at] = group
            begun = at
        if keyword == "o":
            name = rest or stem
        elif keyword == "usemtl":
            material = materials.row(rest)
        elif keyword == "mtllib":
            _libraries(rest, materials)
        elif keyword == "s":
            smooth, group = True, _group(rest)
    return owner, list(keys), smoothing if smooth else None


def _group(words: str) -> int:
    """A smoothing group; 0 for `off` and whatever else is no number."""
    word = words.split()[0] if words else ""
    return int(word) if word.isdecimal() and len(word) < 10 else 0


def _libraries(names: str, materials: Materials) -> None:
    """`mtllib` names several files, or one with spaces in its name."""
    one_by_one = names.split()
    if len(one_by_one) > 1 and all(name.lower().endswith(".mtl") for name in one_by_one):
        for name in one_by_one:
            materials.library(name)
    else:
        materials.library(names)


def _part(found: Statements, faces: Array, name: str, material: int, smoothing: Array | None, notes: list[str]) -> Part:
    starts, corners = found.starts, found.corners
    if len(faces) < len(starts) - 1:
        starts, taken = corners_of(starts, faces)
        corners = corners[:, taken]
    points = used_rows(found.points, corners[0])
    colours = (used_rows(found.colours, corners[0]),) if len(found.colours) else ()
    groups = None if smoothing is None else smoothing[faces]
    uvs = sound_uvs(found.uvs, corners[1], name, notes)
    part = Part(name, material, starts, points, None, (uvs,) if uvs else (), colours, groups)
    return replace(part, normals=sound_normals(found.normals, corners[2], part, notes))
