"""Streams of a part from what a file holds: only rows in use, and something sound at every corner."""

from __future__ import annotations

import numpy as np
from tangentry.nodes.geometry.normals import build_normals
from tangentry.nodes.model import Part, Stream
from tangentry.pipeline.flow import Array

UNIT = 1e-6  # printed with few digits, a unit normal is a unit normal still


def used_rows(values: Array, index: Array) -> Stream:
    """The rows that corners use, in the file's order."""
    used = np.zeros(len(values), bool)
    used[index] = True
    if used.all():
        return Stream(values, np.ascontiguousarray(index, np.int32))
    row = np.cumsum(used, dtype=np.int32) - 1
    return Stream(values[used], row[index])


def sound_uvs(values: Array, index: Array, name: str, notes: list[str]) -> Stream | None:
    """UVs from (rows, 2) values at (corners,) rows, -1 for none; where a corner has none, (0, 0), and a note of it.

    None where no corner has any.
    """
    bare = index < 0
    if not len(values) or bare.all():
        return None
    finite = np.isfinite(values).all(axis=1)
    bare = bare | ~finite[np.maximum(index, 0)]
    if not bare.any():
        return used_rows(values, index)
    notes.append(f'{np.count_nonzero(bare)} corners of part "{name}" have no UVs and are given (0, 0)')
    rows = np.concatenate([np.where(finite[:, None], values, 0), np.zeros((1, 2), np.float32)]).astype(np.float32)
    return used_rows(rows, np.where(bare, len(values), index))


def sound_normals(values: Array, index: Array, part: Part, notes: list[str]) -> Stream | None:
    """Unit normals from (rows, 3) values at (corners,) rows, -1 for none; where a corner has none, that of its face.

    None where no corner has any.
    """
    if not len(values):
        return None
    length = np.sqrt(np.einsum("ij,ij->i", values, values, dtype=np.float64))
    sound = np.isfinite(length) & (length > 0)
    bare = (index < 0) | ~sound[np.maximum(index, 0)]
    if bare.all():
        return None
    scaled = np.where(sound[:, None], values, 0) / np.where(sound, length, 1)[:, None]
    unit = np.where((np.abs(length - 1) < UNIT)[:, None], values, scaled).astype(np.float32)
    if not bare.any():
        return used_rows(unit, index)
    count = np.count_nonzero(bare)
    notes.append(f'{count} corners of part "{part.name}" have no normals and are given those of their faces')
    own = build_normals(part, "face")
    return used_rows(np.concatenate([unit, own.values]), np.where(bare, own.index + len(unit), index))
