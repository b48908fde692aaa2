"""STL, binary and ascii: triangles and nothing else (3D Systems, "StereoLithography Interface Specification", 1989)."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.formats.scan import (
    MOST_FLOAT,
    ONE,
    as_text,
    as_words,
    read_number,
    signed,
    skip_line,
    skip_space,
    skip_word,
)
from tangentry.nodes.geometry.corners import distinct_values
from tangentry.nodes.model import Asset, Part, Stream
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

HEAD, ROW = 84, np.dtype([("normal", "<f4", 3), ("points", "<f4", (3, 3)), ("more", "<u2")])
VERTEX, OUTER, ENDLOOP, SOLID = (np.frombuffer(word, np.uint8) for word in (b"vertex", b"outer", b"endloop", b"solid"))
AGAIN = "export the file again"


def read_stl(file: InputFile) -> Asset:
    """The asset in an STL file: a part for each solid, its equal points joined; it has no UVs, so no frames either.

    The file's normals only repeat what its points say and are left out. Raises InputError naming the triangle, or the
    line, that can't be used.
    """
    content = file.bytes()
    announced = int(content[80:HEAD].copy().view("<u4")[0]) if len(content) >= HEAD else -1
    is_text = content[:5].tobytes().lower() == b"solid"
    if HEAD + ROW.itemsize * announced == len(content) or not is_text:
        names, first, points = _binary(file, content, announced)
    else:
        names, first, points = _ascii(file, as_text(content))
    if not len(points):
        raise InputError(file, "", "there are no faces in it", "export the mesh with its faces")
    ends = [*first[1:], len(points)]
    parts = [_part(name, points[a:b]) for name, a, b in zip(names, first, ends, strict=True) if b > a]
    return Asset(file.path, tuple(parts), notes=("STL holds no UVs: there is nothing that frames could follow",))


def _part(name: str, points: Array) -> Part:
    rows = np.ascontiguousarray(points.reshape(-1, 3))
    label, first = distinct_values(rows)
    return Part(name, -1, np.arange(len(points) + 1, dtype=np.int32) * 3, Stream(rows[first], label))


def _binary(file: InputFile, content: Array, announced: int) -> tuple[list[str], list[int], Array]:
    there = max(len(content) - HEAD, 0) // ROW.itemsize
    if announced < 0 or there < announced:
        found = f"{max(announced, 0)} triangles announced, {there} there: cut off, or no STL file"
        raise InputError(file, f"triangle {there}", found, AGAIN)
    points = content[HEAD : HEAD + ROW.itemsize * announced].view(ROW)["points"]
    finite = np.isfinite(points).all(axis=(1, 2))
    if not finite.all():
        row = int(np.argmin(finite))
        raise InputError(file, f"triangle {row}", f"its points are {points[row].tolist()}", AGAIN)
    return [file.stem], [0], points


def _ascii(file: InputFile, text: Array) -> tuple[list[str], list[int], Array]:
    vertices, solids, bad = _walk(text, np.zeros((0, 3), np.float32), np.zeros((0, 2), np.int64), False)
    points, where = np.zeros((vertices, 3), np.float32), np.zeros((solids, 2), np.int64)
    if bad < 0:
        *_, bad = _walk(text, points, where, True)
    if bad >= 0:
        line = as_words(text[bad : skip_line(text, bad)].tobytes()).strip()
        number = int(np.count_nonzero(text[:bad] == 10)) + 1
        raise InputError(file, f"line {number}", f"{line[:60]!r} ends no loop of three finite points", AGAIN)
    names = [as_words(text[at : skip_line(text, at)].tobytes()).strip()[5:].strip() or file.stem for _, at in where]
    return names, [int(before) // 3 for before, _ in where], points.reshape(-1, 3, 3)


@njit(cache=True, nogil=True)
def _starts(text: Array, i: np.uint64, word: Array) -> bool:
    for letter in word:  # none of them is a newline, which ends every text
        if text[i] | 32 != letter:
            return False
        i += ONE
    return True


@njit(cache=True, nogil=True)
def _walk(text: Array, points: Array, where: Array, take: bool) -> tuple[int, int, int]:
    """Count or take vertices and solids; gives both counts, and the offset of the first bad line or -1."""
    vertices = solids = corners = 0
    i = line = np.uint64(0)
    while i < np.uint64(len(text)):
        line = i = skip_space(text, i)
        if _starts(text, i, VERTEX):
            i = skip_word(text, i)
            for axis in range(3):
                i = skip_space(text, i)
                value, after = read_number(text, i)
                if after == i or not abs(value) <= MOST_FLOAT:
                    return vertices, solids, signed(line)
                if take:
                    points[vertices, axis] = value
                i = after
            vertices += 1
            corners += 1
        elif _starts(text, i, OUTER):
            if corners != 0:
                return vertices, solids, signed(line)
        elif _starts(text, i, ENDLOOP):
            if corners != 3:
                return vertices, solids, signed(line)
            corners = 0
        elif _starts(text, i, SOLID):
            if take:
                where[solids, 0], where[solids, 1] = vertices, line
            solids += 1
        i = skip_line(text, i)
    return vertices, solids, signed(line) if corners else -1
