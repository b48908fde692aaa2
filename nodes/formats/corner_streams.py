"""Streams of a part from what a file holds: only rows in use, and something sound at every corner."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.geometry.normals import build_normals
from tangentry.nodes.model import Part, Stream
from tangentry.pipeline.flow import Array

UNIT = 1e-6  # printed with few digits, a unit normal is a unit normal still


def used_rows(values: Array, index: Array) -> Stream:
    """The rows that corners use, in the file's order."""
    index = np.ascontiguousarray(index, np.int32)
    used, _ = _used(index, len(values))
    if used.all():
        return Stream(values, index)
    row = np.cumsum(used, dtype=np.int32) - 1
    return Stream(values[used], row[index])


def sound_uvs(values: Array, index: Array, name: str, notes: list[str]) -> Stream | None:
    """UVs from (rows, 2) values at (corners,) rows, -1 for none; where a corner has none, (0, 0), and a note of it.

    None where no corner has any.
    """
    finite = np.isfinite(values).all(axis=1)
    bare = _bare(index, finite)
    if bare is None:
        return used_rows(values, index)
    if (index < 0).all():
        return None
    notes.append(f'{np.count_nonzero(bare)} corners of part "{name}" have no UVs and are given (0, 0)')
    rows = np.concatenate([np.where(finite[:, None], values, 0), np.zeros((1, 2))]).astype(np.float32)
    return used_rows(rows, np.where(bare, len(values), index))


def sound_normals(values: Array, index: Array, part: Part, notes: list[str]) -> Stream | None:
    """Unit normals from (rows, 3) values at (corners,) rows, -1 for none; where a corner has none, that of its face.

    None where no corner has any.
    """
    unit, sound = _unit(values)
    bare = _bare(index, sound)
    if bare is None:
        return used_rows(unit, index)
    if bare.all():
        return None
    count = np.count_nonzero(bare)
    notes.append(f'{count} corners of part "{part.name}" have no normals and are given those of their faces')
    own = build_normals(part, "face")
    return used_rows(np.concatenate([unit, own.values]), np.where(bare, own.index + len(unit), index))


def _bare(index: Array, sound: Array) -> Array | None:
    """(corners,) bool: those whose row is -1 or not sound; None where there are none."""
    _, none = _used(np.ascontiguousarray(index, np.int32), len(sound))
    if not none and sound.all():
        return None
    bare: Array = (index < 0) | ~np.append(sound, False)[index]
    return bare if bare.any() else None


@njit(cache=True, nogil=True)
def _used(index: Array, rows: int) -> tuple[Array, int]:
    """(rows,) bool: is there a corner with it; and how many corners have none."""
    used = np.zeros(rows, np.bool_)
    none = 0
    for corner in range(len(index)):
        if index[corner] < 0:
            none += 1
        else:
            used[index[corner]] = True
    return used, none


@njit(cache=True, nogil=True)
def _unit(values: Array) -> tuple[Array, Array]:
    """(rows, 3) float32 unit vectors, and (rows,) bool: could they be made so? Those that could not are 0."""
    out = np.zeros((len(values), 3), np.float32)
    sound = np.zeros(len(values), np.bool_)
    for row in range(len(values)):
        x, y, z = np.float64(values[row, 0]), np.float64(values[row, 1]), np.float64(values[row, 2])
        length = np.sqrt(x * x + y * y + z * z)
        if 0 < length < np.inf:
            sound[row] = True
            scale = 1.0 if abs(length - 1) < UNIT else 1 / length
            out[row, 0], out[row, 1], out[row, 2] = x * scale, y * scale, z * scale
    return out, sound
