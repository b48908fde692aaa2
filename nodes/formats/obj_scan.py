"""The statements of an OBJ file as arrays, in two walks over its bytes, on all cores: one counts, one fills."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.formats.scan import (
    HASH,
    MOST_FLOAT,
    NEWLINE,
    ONE,
    SPACE,
    as_text,
    as_words,
    read_integer,
    read_number,
    shown,
    signed,
    skip_line,
    skip_space,
    skip_word,
)
from tangentry.nodes.geometry.cores import core_count, in_threads
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

V, VT, VN, F, CORNER, WORDS, PASSED, EMPTY = range(8)  # kinds of line; WORDS: o g s usemtl mtllib; CORNER: of all F
SLASH = 47
FEWEST_BYTES = 1 << 20  # of a chunk
SHARES = 4  # chunks for each core: faces take longer than positions
MOST_CORNERS = 2**31 - 1
UNREAD, NOT_FINITE, OUT_OF_RANGE = -1, -2, 0  # what is wrong with a line; OUT_OF_RANGE + column: that index
AGAIN = "export the file again"


class Statements(NamedTuple):
    """What stands in the file."""

    points: Array  # (n, 3) float32
    colours: Array  # (n, 3) float32; (0, 3) unless every point has one
    uvs: Array  # (n, 2) float32
    normals: Array  # (n, 3) float32
    starts: Array  # (faces + 1,) int32
    corners: Array  # (3, corners) int32: rows of points, UVs and normals; -1 for none
    words: list[tuple[int, str, str]]  # faces before it, keyword, what follows
    skipped: int  # lines, curves and the like, which were passed over


def read_statements(file: InputFile) -> Statements:
    """Read a file. Raises InputError naming the line of the first number or index that can't be used."""
    text = as_text(file.bytes())
    cores = core_count()
    bounds = _bounds(text, max(1, min(SHARES * cores if cores > 1 else 1, len(text) // FEWEST_BYTES)))
    chunks = len(bounds) - 1
    counts = np.array(in_threads(lambda k: _count(text, bounds[k], bounds[k + 1]), chunks))
    total, before = counts.sum(axis=0), np.cumsum(counts, axis=0) - counts
    if total[CORNER] > MOST_CORNERS:
        raise InputError(
            file, "", f"{total[CORNER]:,} corners, more than the {MOST_CORNERS:,} that are read", "divide it"
        )
    points, colours = np.empty((total[V], 3), np.float32), np.empty((total[V], 3), np.float32)
    uvs, normals = np.empty((total[VT], 2), np.float32), np.empty((total[VN], 3), np.float32)
    starts, corners = np.zeros(total[F] + 1, np.int32), np.empty((3, total[CORNER]), np.int32)
    where = np.empty((total[WORDS], 2), np.int64)
    made = points, colours, uvs, normals, starts, corners, where
    done = in_threads(
        lambda k: _fill(text, (bounds[k], bounds[k + 1]), before[k], before[k] + counts[k], total, *made), chunks
    )
    for _, at, wrong, value in done:
        if at >= 0:
            raise _error(file, text, at, wrong, value, total)
    coloured = sum(one[0] for one in done) == total[V]
    named = [(int(face), *_words(text, int(at))) for face, at in where]
    return Statements(
        points, colours if coloured else colours[:0], uvs, normals, starts, corners, named, int(total[PASSED])
    )


def _bounds(text: Array, chunks: int) -> list[int]:
    """Where each chunk of a text begins, at a line's beginning, and where the last ends."""
    starts = [_line_start(text, len(text) * k // chunks) for k in range(1, chunks)]
    return [0, *starts, len(text)]


def _line_start(text: Array, i: int) -> int:
    return int(skip_line(text, i)) if i < len(text) else len(text)


def _error(file: InputFile, text: Array, at: int, wrong: int, value: int, total: Array) -> InputError:
    place = f"line {int(np.count_nonzero(text[:at] == NEWLINE)) + 1}"
    line = shown(as_words(text[at : skip_line(text, at)].tobytes()).strip())
    if wrong == UNREAD:
        return InputError(file, place, f"{line!r} can't be read", AGAIN)
    if wrong == NOT_FINITE:
        return InputError(file, place, f"{line!r} is no finite position", AGAIN)
    what, count = (("point", V), ("UV", VT), ("normal", VN))[wrong - OUT_OF_RANGE]
    return InputError(file, place, f"{what} index {value}, but the file has {total[count]}", AGAIN)


def _words(text: Array, at: int) -> tuple[str, str]:
    line = as_words(text[at : skip_line(text, at)].tobytes()).replace("\\\r\n", " ").replace("\\\n", " ")
    keyword, *rest = line.split(None, 1)
    return keyword, rest[0].strip() if rest else ""


@njit(cache=True, nogil=True)
def _kind(text: Array, i: np.uint64) -> int:
    """The kind of the line whose first word begins at i."""
    c = text[i]
    if c in (NEWLINE, HASH):
        return EMPTY
    d = text[i + ONE]  # a newline ends every text
    if c == 118:  # v
        if d <= SPACE:
            return V
        if text[i + ONE + ONE] <= SPACE:
            return VT if d == 116 else VN if d == 110 else PASSED
        return PASSED
    if c == 102 and d <= SPACE:
        return F
    if (c == 111 or c == 103 or c == 115) and d <= SPACE:
        return WORDS
    if (c == 117 and d == 115) or (c == 109 and d == 116):  # usemtl, mtllib
        return WORDS
    return PASSED


@njit(cache=True, nogil=True)
def _corner_count(text: Array, i: np.uint64) -> tuple[int, np.uint64]:
    """How many words follow in the line, and where that ends."""
    count = 0
    while True:
        i = skip_space(text, i)
        if text[i] == NEWLINE or text[i] == HASH:
            return count, i
        i = skip_word(text, i)
        count += 1


@njit(cache=True, nogil=True)
def _count(text: Array, begin: int, end: int) -> Array:
    """(8,) int64: how many lines of each kind there are; faces of fewer than three corners are passed over."""
    counts = np.zeros(8, np.int64)
    i = np.uint64(begin)
    while i < np.uint64(end):
        i = skip_space(text, i)
        kind = _kind(text, i)
        if kind == F:
            size, i = _corner_count(text, i + ONE)
            if size >= 3:
                counts[CORNER] += size
            else:
                kind = PASSED
        counts[kind] += 1
        i = skip_line(text, i)
    return counts


@njit(cache=True, nogil=True)
def _numbers(text: Array, i: np.uint64, row: Array) -> tuple[int, np.uint64]:
    """Read the numbers of a line into a row; gives how many there were, -1 where something else stands, and the end."""
    count = 0
    while True:
        i = skip_space(text, i)
        if text[i] == NEWLINE or text[i] == HASH:
            return count, i
        value, after = read_number(text, i)
        if after == i or text[after] > SPACE:
            return -1, i
        if count < len(row):
            row[count] = value
        count += 1
        i = after


@njit(cache=True, nogil=True)
def _row(value: int, seen: int, total: int) -> int:
    """The row of an index, or -1: positive ones count from 1, negative ones back from what was seen."""
    row = value - 1 if value > 0 else seen + value
    return row if value != 0 and row < total else -1


@njit(cache=True, nogil=True)
def _fill(
    text: Array,
    bounds: tuple[int, int],
    begin: Array,
    after: Array,
    total: Array,
    points: Array,
    colours: Array,
    uvs: Array,
    normals: Array,
    starts: Array,
    corners: Array,
    where: Array,
) -> tuple[int, int, int, int]:
    """Fill the arrays from rows `begin` to `after`; gives how many points have colours, and the first bad line if any.

    That is its offset or -1, what is wrong with it, and the value in question.
    """
    v, vt, vn, faces, corner, words = begin[V], begin[VT], begin[VN], begin[F], begin[CORNER], begin[WORDS]
    coloured = 0
    row = np.zeros(8)
    i = np.uint64(bounds[0])
    while i < np.uint64(bounds[1]):
        i = skip_space(text, i)
        kind = _kind(text, i)
        line = signed(i)
        if kind == V:
            count, i = _numbers(text, i + ONE, row)
            if count < 3:
                return coloured, line, UNREAD, 0
            if not (abs(row[0]) <= MOST_FLOAT and abs(row[1]) <= MOST_FLOAT and abs(row[2]) <= MOST_FLOAT):
                return coloured, line, NOT_FINITE, 0
            points[v, 0], points[v, 1], points[v, 2] = row[0], row[1], row[2]
            if count == 6 or count == 7:  # x y z r g b, or x y z w r g b
                colours[v, 0], colours[v, 1], colours[v, 2] = row[count - 3], row[count - 2], row[count - 1]
                coloured += 1
            v += 1
        elif kind == VT:
            row[1] = 0.0
            count, i = _numbers(text, i + ONE + ONE, row)
            if count < 1:
                return coloured, line, UNREAD, 0
            uvs[vt, 0], uvs[vt, 1] = row[0], row[1]
            vt += 1
        elif kind == VN:
            count, i = _numbers(text, i + ONE + ONE, row)
            if count < 3:
                return coloured, line, UNREAD, 0
            normals[vn, 0], normals[vn, 1], normals[vn, 2] = row[0], row[1], row[2]
            vn += 1
        elif kind == F:
            first = corner
            i = skip_space(text, i + ONE)
            while text[i] != NEWLINE and text[i] != HASH and corner < after[CORNER]:
                seen = (v, vt, vn)
                given = True
                for column in range(3):  # v, v/vt, v//vn or v/vt/vn
                    one = np.int64(-1)
                    if given:
                        value, end = read_integer(text, i)
                        if end == i and column == 0:
                            return coloured, line, UNREAD, 0
                        if end > i:
                            one = _row(value, seen[column], total[column])
                            if one < 0:
                                return coloured, line, OUT_OF_RANGE + column, value
                        given = text[end] == SLASH
                        i = end + ONE if given and column < 2 else end
                    corners[column, corner] = one
                if text[i] > SPACE:
                    return coloured, line, UNREAD, 0
                corner += 1
                i = skip_space(text, i)
            if corner - first >= 3:
                faces += 1
                starts[faces] = corner
            else:
                corner = first  # passed over; only such a one finds no room
        elif kind == WORDS:
            where[words, 0], where[words, 1] = faces, line
            words += 1
        i = skip_line(text, i)
    return coloured, -1, 0, 0
