"""Streams of a part from what a file holds: only rows in use, and something sound at every corner."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numba import njit
from tangentry.nodes.geometry.normals import build_normals
from tangentry.nodes.model import Frames, Part, Stream
from tangentry.pipeline.flow import Array

MANY = 4  # rows for each corner, beyond which most are of other parts
UNIT = 1e-6  # printed with few digits, a unit normal is a unit normal still


def used_rows(values: Array, index: Array) -> Stream:
    """The rows that corners use, in the file's order."""
    return Stream(*_used_rows(values, index))


def sound_uvs(values: Array, index: Array, name: str, notes: list[str]) -> Stream | None:
    """UVs from (rows, 2) values at (corners,) rows, -1 for none; where a corner has none, (0, 0), and a note of it.

    None where no corner has any.
    """
    values, index = _used_rows(values, index)
    if not len(values):
        return None
    finite = np.isfinite(values).all(axis=1)
    bare = _bare(index, finite)
    if bare is None:
        return Stream(values, index)
    notes.append(f'{np.count_nonzero(bare)} corners of part "{name}" have no UVs and are given (0, 0)')
    rows = np.concatenate([np.where(finite[:, None], values, 0), np.zeros((1, 2))]).astype(np.float32)
    return used_rows(rows, np.where(bare, len(values), index))


def sound_normals(values: Array, index: Array, part: Part, notes: list[str]) -> Stream | None:
    """Unit normals from (rows, 3) values at (corners,) rows, -1 for none; where a corner has none, that of its face.

    None where no corner has any.
    """
    values, index = _used_rows(values, index)
    unit, sound = _unit(values)
    bare = _bare(index, sound)
    if bare is None:
        return Stream(unit, index)
    if bare.all():
        return None
    count = np.count_nonzero(bare)
    notes.append(f'{count} corners of part "{part.name}" have no normals and are given those of their faces')
    own = build_normals(part, "face")
    return used_rows(np.concatenate([unit, own.values]), np.where(bare, own.index + len(unit), index))


def with_faces(part: Part, faces: Array) -> Part:
    """The part with these of its faces alone, (n,) int, and the rows they use."""
    starts, corner = corners_of(part.starts, faces)

    def taken(stream: Stream) -> Stream:
        return used_rows(stream.values, stream.index[corner])

    frames = part.frames
    if frames is not None:
        row, index = np.unique(frames.index[corner], return_inverse=True)
        columns = frames.tangents[row], None, frames.sides[row], frames.fallback[row], index.astype(np.int32)
        frames = Frames(*columns, frames.uv, frames.method)
    return replace(
        part,
        starts=starts,
        points=taken(part.points),
        normals=taken(part.normals) if part.normals is not None else None,
        uvs=tuple(taken(uv) for uv in part.uvs),
        colours=tuple(taken(colour) for colour in part.colours),
        smoothing=part.smoothing[faces] if part.smoothing is not None else None,
        frames=frames,
    )


def corners_of(starts: Array, faces: Array) -> tuple[Array, Array]:
    """Some faces as a mesh of their own: where each begins, (n + 1,) int32, and which corners they have."""
    sizes = starts[faces + 1] - starts[faces]
    begun = np.concatenate([[0], np.cumsum(sizes)]).astype(np.int32)
    return begun, np.repeat(starts[faces] - begun[:-1], sizes) + np.arange(begun[-1])


def grouped(owner: Array) -> list[tuple[int, Array]]:
    """Each owner of faces, in order, and its faces: owner (faces,) int."""
    order = np.argsort(owner, kind="stable")
    owners, first = np.unique(owner[order], return_index=True)
    return list(zip(owners.tolist(), np.split(order, first[1:]), strict=True))


def _used_rows(values: Array, index: Array) -> tuple[Array, Array]:
    """The rows in use, and where each corner's went; -1 stays. Takes no time for the others where they are many."""
    index = np.ascontiguousarray(index, np.int32)
    if len(values) > MANY * len(index):
        row, at = np.unique(index, return_inverse=True)
        none = int(row[0] < 0) if len(row) else 0
        return values[row[none:]], (at - none).astype(np.int32)
    used = _used(index, len(values))
    if used.all():
        return values, index
    place = np.cumsum(used, dtype=np.int32) - 1
    return values[used], np.where(index < 0, np.int32(-1), place[index])


def _bare(index: Array, sound: Array) -> Array | None:
    """(corners,) bool: those whose row is -1 or not sound; None where there are none."""
    if sound.all() and index.min(initial=0) >= 0:
        return None
    bare: Array = (index < 0) | ~np.append(sound, False)[index]
    return bare


@njit(cache=True, nogil=True)
def _used(index: Array, rows: int) -> Array:
    """(rows,) bool: is there a corner with it?"""
    used = np.zeros(rows, np.bool_)
    for corner in range(len(index)):
        if index[corner] >= 0:
            used[index[corner]] = True
    return used


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
