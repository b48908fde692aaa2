"""The elements of a PLY file as columns, from ascii or binary rows (Turk, "The PLY Polygon File Format", 1994)."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.formats.scan import NEWLINE, SPACE, as_text, as_words, read_number, shown, signed, skip_space
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
CODES = {"i1": 0, "u1": 1, "i2": 2, "u2": 3, "i4": 4, "u4": 5, "f4": 6, "f8": 7}
SIZES = np.array([1, 1, 2, 2, 4, 4, 4, 8])
ORDERS = {"ascii": "", "binary_little_endian": "<", "binary_big_endian": ">"}
MOST = 2**31 - 1  # rows of an element, and values of its lists: what int32 numbers
MOST_HEADER = 1 << 16  # bytes
MOST_ALIKE = 1 << 10  # values of a list in rows that are read as one table
AGAIN = "export the file again"


class Property(NamedTuple):
    """A property of an element: its type, and for a list the type of its length."""

    name: str
    kind: str
    length: str  # "" where it is no list


class Element(NamedTuple):
    """An element of the header."""

    name: str
    rows: int
    properties: list[Property]


class Header(NamedTuple):
    """What stands before the data."""

    order: str  # "" for ascii, "<" or ">"
    elements: list[Element]
    textures: list[str]  # names of the comments `TextureFile`
    size: int  # bytes


class Columns(NamedTuple):
    """The rows of one element."""

    scalars: dict[str, Array]  # (count,) by name
    lists: dict[str, tuple[Array, Array]]  # (values,) one after another, and (count,) int64 lengths, by name
    whole: frozenset[str]  # names of the properties of whole numbers

    def has(self, *names: str) -> bool:
        """Are there such scalars?"""
        return all(name in self.scalars for name in names)

    def table(self, *names: str) -> Array:
        """(count, names) float32."""
        with np.errstate(over="ignore"):  # beyond float32 is infinite, and told as such
            return np.stack([self.scalars[name].astype(np.float32) for name in names], axis=1)


NOTHING = Columns({}, {}, frozenset())


def read_header(file: InputFile, content: Array) -> Header:
    """The header of a file. Raises InputError naming the line that can't be used."""
    head = content[:MOST_HEADER].tobytes()
    if head[:3] != b"ply" or head[3:4] not in (b"\n", b"\r", b" "):
        raise InputError(file, "line 1", f"{head[:12]!r}, but a PLY file begins with `ply`", AGAIN)
    end = head.find(b"end_header")
    if end < 0:
        raise InputError(file, "header", "it has no end_header: the file is cut off, or no PLY file", AGAIN)
    after = end + len(b"end_header")
    after += 2 if head[after : after + 2] == b"\r\n" else 1
    order, elements, textures = None, [], []  # type: str | None, list[Element], list[str]
    for number, line in enumerate(as_words(head[:end]).splitlines(), 1):
        words = line.split()
        try:
            if words[:1] == ["format"]:
                order = ORDERS[words[1]]
            elif words[:1] == ["element"]:
                elements.append(Element(words[1], _count(words[2]), []))
            elif words[:1] == ["property"]:
                listed = words[1] == "list"
                one = Property(words[-1], TYPES[words[-2]], TYPES[words[2]] if listed else "")
                if len(words) != (5 if listed else 3) or one.name in {each.name for each in elements[-1].properties}:
                    raise ValueError
                elements[-1].properties.append(one)
            elif words[:2] == ["comment", "TextureFile"]:
                textures.append(line.split(None, 2)[2].strip())
        except (IndexError, KeyError, ValueError):
            raise InputError(file, f"line {number}", f"{shown(line.strip())!r} can't be read", AGAIN) from None
    if order is None:
        raise InputError(file, "header", "it does not say its format", AGAIN)
    return Header(order, elements, textures, after)


def _count(word: str) -> int:
    count = int(word)
    if not 0 <= count <= MOST:
        raise ValueError
    return count


def read_elements(file: InputFile, content: Array, header: Header) -> dict[str, Columns]:
    """The columns of every element. Raises InputError naming element and row where the data ends or is no number."""
    data, at = content[header.size :], 0
    if header.order == "":
        data = as_text(data)
    read: dict[str, Columns] = {}
    for element in header.elements:
        if not element.properties or not element.rows:
            read[element.name] = _empty(element)
        else:
            table = _table(file, data, at, element, header.order) if header.order else None
            read[element.name], at = table or _rows(file, data, at, element, header.order)
    return read


def _whole(element: Element) -> frozenset[str]:
    return frozenset(one.name for one in element.properties if one.kind[0] != "f")


def _empty(element: Element) -> Columns:
    none = np.zeros(0)
    scalars = {one.name: none for one in element.properties if not one.length}
    lists = {one.name: (none, np.zeros(0, np.int64)) for one in element.properties if one.length}
    return Columns(scalars, lists, _whole(element))


def _table(file: InputFile, data: Array, at: int, element: Element, order: str) -> tuple[Columns, int] | None:
    """Binary rows whose lists are all as long as those of the first: one size, one table. None where they are not."""
    fields: list[tuple[str, str, tuple[int, ...]]] = []
    lengths: dict[str, int] = {}
    here = at
    for k, one in enumerate(element.properties):
        if one.length:
            word = data[here : here + np.dtype(one.length).itemsize]
            lengths[one.name] = (
                int(word.view(order + one.length)[0]) if len(word) == np.dtype(one.length).itemsize else -1
            )
            if not 0 <= lengths[one.name] <= MOST_ALIKE:
                return None
            fields.append((f"{k} length", order + one.length, ()))
            here += len(word)
        fields.append((f"{k}", order + one.kind, (lengths.get(one.name, 1),) if one.length else ()))
        here += np.dtype(one.kind).itemsize * lengths.get(one.name, 1)
    row = np.dtype(fields)
    end = at + row.itemsize * element.rows
    if end > len(data):
        if lengths:
            return None
        there = (len(data) - at) // row.itemsize
        found = f"the file ends here, but announces {element.rows} of them"
        raise InputError(file, f"{element.name} {there}", found, AGAIN)
    rows = data[at:end].view(row)
    named = [(f"{k}", one.name) for k, one in enumerate(element.properties)]
    if any((rows[f"{k} length"] != lengths[name]).any() for k, name in named if name in lengths):
        return None
    lists = {name: (rows[k].reshape(-1), np.full(element.rows, lengths[name])) for k, name in named if name in lengths}
    scalars = {name: rows[k] for k, name in named if name not in lengths}
    return Columns(scalars, lists, _whole(element)), end


def _rows(file: InputFile, data: Array, at: int, element: Element, order: str) -> tuple[Columns, int]:
    """Rows with lists, or of text: walked twice, once to count and once to take."""
    layout = np.array(
        [[CODES[one.kind], CODES[one.length] if one.length else -1] for one in element.properties], np.int64
    )
    ascii, swap = order == "", order == ">"
    nothing = np.zeros((0, 0)), np.zeros(0), np.zeros((0, 0), np.int64), np.zeros(0, np.int64)
    totals = np.zeros(len(layout), np.int64)
    row, end = _walk(data, at, element.rows, layout, ascii, swap, False, totals, *nothing)
    if row < element.rows:
        found = "the file ends here" if end >= len(data) else "a list or value that can't be read"
        raise InputError(file, f"{element.name} {row}", f"{found}, but announces {element.rows} of them", AGAIN)
    if int(totals.sum()) > MOST:
        raise InputError(file, f"element {element.name}", f"its lists hold {int(totals.sum())} values", AGAIN)
    first = np.concatenate([[0], np.cumsum(totals)])
    columns = len(layout)
    scalars, lengths = np.empty((columns, element.rows)), np.empty((columns, element.rows), np.int64)
    values = np.empty(first[-1])
    _walk(data, at, element.rows, layout, ascii, swap, True, totals, scalars, values, lengths, first)
    named = dict(enumerate(element.properties))
    return (
        Columns(
            {one.name: scalars[k] for k, one in named.items() if not one.length},
            {one.name: (values[first[k] : first[k + 1]], lengths[k]) for k, one in named.items() if one.length},
            _whole(element),
        ),
        end,
    )


@njit(cache=True, nogil=True)
def _walk(
    data: Array,
    at: int,
    count: int,
    layout: Array,
    ascii: bool,
    swap: bool,
    take: bool,
    totals: Array,
    scalars: Array,
    values: Array,
    lengths: Array,
    first: Array,
) -> tuple[int, int]:
    """Walk over rows; gives how many there were and where that ended. Without `take`, list values are but counted."""
    whole = np.zeros(1, np.uint64)
    single, double = whole.view(np.float32), whole.view(np.float64)
    place = first.copy()
    for row in range(count):
        for k in range(len(layout)):
            size = 1
            if layout[k, 1] >= 0:
                length, at = _next(data, at, layout[k, 1], ascii, swap, whole, single, double)
                if at < 0 or not 0 <= length <= MOST:
                    return row, len(data) if at < 0 else 0
                size = int(length)
                if take:
                    lengths[k, row] = size
                else:
                    totals[k] += size
                    if size > len(data) - at:
                        return row, len(data)
            for _ in range(size):
                value, at = _next(data, at, layout[k, 0], ascii, swap, whole, single, double)
                if at < 0:
                    return row, len(data) if at == -1 else 0
                if take and layout[k, 1] >= 0:
                    values[place[k]] = value
                    place[k] += 1
                elif take:
                    scalars[k, row] = value
    return count, at


@njit(cache=True, nogil=True)
def _next(
    data: Array, at: int, code: int, ascii: bool, swap: bool, whole: Array, single: Array, double: Array
) -> tuple[float, int]:
    """The value at an offset and the offset after it; -1 where the data ends, -2 where something else stands there."""
    if ascii:
        while True:
            if at >= len(data):
                return 0.0, -1
            at = signed(skip_space(data, at))
            if data[at] != NEWLINE:
                break
            at += 1
        value, end = read_number(data, at)
        after = signed(end)
        return (value, after) if after > at and data[after] <= SPACE else (0.0, -2)
    size = SIZES[code]
    if at + size > len(data):
        return 0.0, -1
    bits = np.uint64(0)
    for k in range(size):
        bits |= np.uint64(data[at + k]) << np.uint64(8 * (size - 1 - k if swap else k))
    if code == 6:
        whole[0] = bits
        return np.float64(single[0]), at + size
    if code == 7:
        whole[0] = bits
        return double[0], at + size
    value = np.float64(bits)
    if code % 2 == 0 and bits >> np.uint64(8 * size - 1):
        value -= 2.0 ** (8 * size)
    return value, at + size
