"""The statements of an OBJ file as arrays, in two passes over its bytes: one counts, one fills."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.formats.scan import as_text, as_words, read_integer, read_number, skip_line, skip_space, skip_word
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

V, VT, VN, F, WORDS = 0, 1, 2, 3, 4  # kinds of statement; WORDS: o g s usemtl mtllib
LOST = -2_000_000_000  # an index that points nowhere


class Statements(NamedTuple):
    """What stands in the file."""

    points: Array  # (n, 3) float32
    colours: Array  # (n, 3) float32; (0, 3) unless every point has one
    uvs: Array  # (n, 2) float32
    normals: Array  # (n, 3) float32
    starts: Array  # (faces + 1,) int32
    corners: Array  # (corners, 3) int32: rows of points, UVs and normals; -1 for none
    words: list[tuple[int, str, str]]  # faces before it, keyword, what follows
    skipped: int  # lines, curves and the like, which were passed over


def read_statements(file: InputFile) -> Statements:
    """Read a file. Raises InputError naming the line of the first number or index that can't be used."""
    text = as_text(file.bytes())
    counts = _count(text)
    v, vt, vn, faces, corners, words, skipped = (int(count) for count in counts)
    points, uvs, normals = np.zeros((v, 3), np.float32), np.zeros((vt, 2), np.float32), np.zeros((vn, 3), np.float32)
    colours = np.zeros((v, 3), np.float32)
    starts, index = np.zeros(faces + 1, np.int32), np.full((corners, 3), -1, np.int32)
    where = np.zeros((words, 2), np.int64)
    coloured, bad = _fill(text, points, colours, uvs, normals, starts, index, where)
    if bad >= 0:
        line = text[bad : skip_line(text, bad)].tobytes().decode("utf-8", "replace").strip()
        raise InputError(file, f"line {_line(text, bad)}", f"{line[:60]!r} can't be read", "export the file again")
    _check(file, text, points, index, (v, vt, vn))
    named = [(int(face), *_words(text, int(at))) for face, at in where]
    return Statements(points, colours if coloured == v else colours[:0], uvs, normals, starts, index, named, skipped)


def _line(text: Array, at: int) -> int:
    return int(np.count_nonzero(text[:at] == 10)) + 1


def _words(text: Array, at: int) -> tuple[str, str]:
    line = as_words(text[at : skip_line(text, at)].tobytes()).replace("\\\r\n", " ").replace("\\\n", " ")
    keyword, *rest = line.split(None, 1)
    return keyword, rest[0].strip() if rest else ""


def _check(file: InputFile, text: Array, points: Array, index: Array, counts: tuple[int, int, int]) -> None:
    finite = np.isfinite(points).all(axis=1)
    if not finite.all():
        row = int(np.argmin(finite))
        place = f"line {_line(text, _statement(text, V, row))}"
        raise InputError(file, place, f"point {row + 1} is {points[row].tolist()}", "export the file again")
    for column, (what, count) in enumerate(zip(("point", "UV", "normal"), counts, strict=True)):
        rows = index[:, column]
        wrong = (rows >= count) | (rows < -1)
        if wrong.any():
            corner = int(np.argmax(wrong))
            place = f"line {_line(text, _statement(text, F, _face_of(text, corner)))}"
            shown = int(rows[corner]) + 1 if rows[corner] >= 0 else "0 or below the first"
            raise InputError(file, place, f"{what} index {shown}, but the file has {count}", "export the file again")


@njit(cache=True, nogil=True)
def _kind(text: Array, i: int) -> int:
    """The kind of statement that begins at i, -1 for those that are passed over, -2 for comments and empty lines."""
    c, d = text[i], text[i + 1] if i + 1 < len(text) else 10
    if c == 118:  # v
        if d <= 32:
            return V
        after = text[i + 2] if i + 2 < len(text) else 10
        if after <= 32:
            if d == 116:
                return VT
            if d == 110:
                return VN
        return -1
    if c == 102 and d <= 32:
        return F
    if (c == 111 or c == 103 or c == 115) and d <= 32:
        return WORDS
    if (c == 117 and d == 115) or (c == 109 and d == 116):  # usemtl, mtllib
        return WORDS
    if c == 35 or c == 10:
        return -2
    return -1


@njit(cache=True, nogil=True)
def _corner_count(text: Array, i: int) -> int:
    count = 0
    while True:
        i = skip_space(text, i)
        if text[i] == 10 or text[i] == 35:
            return count
        i = skip_word(text, i)
        count += 1


@njit(cache=True, nogil=True)
def _count(text: Array) -> tuple[int, int, int, int, int, int, int]:
    v = vt = vn = faces = corners = words = skipped = 0
    i = 0
    while i < len(text):
        i = skip_space(text, i)
        if i >= len(text):
            break
        kind = _kind(text, i)
        if kind == V:
            v += 1
        elif kind == VT:
            vt += 1
        elif kind == VN:
            vn += 1
        elif kind == F:
            size = _corner_count(text, i + 1)
            if size >= 3:
                faces += 1
                corners += size
            else:
                skipped += 1
        elif kind == WORDS:
            words += 1
        elif kind == -1:
            skipped += 1
        i = skip_line(text, i)
    return v, vt, vn, faces, corners, words, skipped


@njit(cache=True, nogil=True)
def _statement(text: Array, wanted: int, number: int) -> int:
    """The offset of the number-th statement of a kind."""
    i = 0
    seen = 0
    while i < len(text):
        i = skip_space(text, i)
        if i >= len(text):
            break
        if _kind(text, i) == wanted and (wanted != F or _corner_count(text, i + 1) >= 3):
            if seen == number:
                return i
            seen += 1
        i = skip_line(text, i)
    return 0


@njit(cache=True, nogil=True)
def _face_of(text: Array, corner: int) -> int:
    """Which face a corner is of."""
    i = 0
    face = 0
    before = 0
    while i < len(text):
        i = skip_space(text, i)
        if i >= len(text):
            break
        if _kind(text, i) == F:
            size = _corner_count(text, i + 1)
            if size >= 3:
                before += size
                if corner < before:
                    return face
                face += 1
        i = skip_line(text, i)
    return 0


@njit(cache=True, nogil=True)
def _numbers(text: Array, i: int, row: Array, most: int) -> int:
    """Read up to `most` numbers into a row; gives how many there were, -1 where something else stands there."""
    count = 0
    while True:
        i = skip_space(text, i)
        if text[i] == 10 or text[i] == 35:
            return count
        value, after = read_number(text, i)
        if after == i or text[after] > 32:
            return -1
        if count < most:
            row[count] = value
        count += 1
        i = after


@njit(cache=True, nogil=True)
def _absolute(index: int, count: int) -> int:
    """A row from 0: positive indices count from 1, negative ones back from the last statement before."""
    if index > 0:
        return index - 1 if index < 2_000_000_000 else 2_000_000_000
    return count + index if index < 0 and count + index >= 0 else LOST


@njit(cache=True, nogil=True)
def _corner(text: Array, i: int, row: Array, v: int, vt: int, vn: int) -> int:
    """Read v, v/vt, v//vn or v/vt/vn; gives the offset after it, -1 where something else stands there."""
    for column in range(3):
        value, after = read_integer(text, i)
        if after > i:
            row[column] = _absolute(value, v if column == 0 else vt if column == 1 else vn)
            i = after
        elif column == 0:
            return -1
        if text[i] != 47:
            break
        i += 1
    return i if text[i] <= 32 else -1


@njit(cache=True, nogil=True)
def _fill(
    text: Array, points: Array, colours: Array, uvs: Array, normals: Array, starts: Array, index: Array, where: Array
) -> tuple[int, int]:
    """Fill the arrays; gives how many points have colours, and the offset of the first bad statement or -1."""
    v = vt = vn = faces = corners = words = coloured = 0
    row = np.zeros(8)
    i = 0
    while i < len(text):
        i = skip_space(text, i)
        if i >= len(text):
            break
        kind = _kind(text, i)
        if kind == V:
            count = _numbers(text, i + 1, row, 8)
            if count < 3:
                return coloured, i
            points[v, 0], points[v, 1], points[v, 2] = row[0], row[1], row[2]
            if count == 6 or count == 7:
                first = count - 3
                colours[v, 0], colours[v, 1], colours[v, 2] = row[first], row[first + 1], row[first + 2]
                coloured += 1
            v += 1
        elif kind == VT:
            row[1] = 0.0
            count = _numbers(text, i + 2, row, 8)
            if count < 1:
                return coloured, i
            uvs[vt, 0], uvs[vt, 1] = row[0], row[1]
            vt += 1
        elif kind == VN:
            count = _numbers(text, i + 2, row, 8)
            if count < 3:
                return coloured, i
            normals[vn, 0], normals[vn, 1], normals[vn, 2] = row[0], row[1], row[2]
            vn += 1
        elif kind == F:
            if _corner_count(text, i + 1) >= 3:
                j = i + 1
                while True:
                    j = skip_space(text, j)
                    if text[j] == 10 or text[j] == 35:
                        break
                    j = _corner(text, j, index[corners], v, vt, vn)
                    if j < 0:
                        return coloured, i
                    corners += 1
                faces += 1
                starts[faces] = corners
        elif kind == WORDS:
            where[words, 0], where[words, 1] = faces, i
            words += 1
        i = skip_line(text, i)
    return coloured, -1
