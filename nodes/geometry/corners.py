"""Which corners are one: rows of whole numbers told apart by hashing, in linear time."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.model import Stream
from tangentry.pipeline.flow import Array

BLOCK = 256  # rows whose slots are touched before they are needed: the table is larger than the cache
GOLDEN = np.uint64(0x9E3779B97F4A7C15)
MINUS_ZERO = np.int32(-(2**31))  # the bits of -0.0, which is 0.0


class Vertices(NamedTuple):
    """Corners that are one in some streams: streams[k].values[rows[k]][label] are the values at the corners."""

    label: Array  # (corners,) int32
    rows: tuple[Array, ...]  # (vertices,) int32 for each stream; a vertex may be without corners


def distinct_rows(*columns: Array) -> tuple[Array, Array]:
    """Labels of equal rows: (label, first) with label (rows,) int32 and first (distinct,) int32.

    columns   (rows,) int32 each, above the least int32

    Rows i and j are equal in every column just where label[i] == label[j]. Labels count up in order of first
    appearance; first[label[i]] is the first row equal to row i, so columns[k] == columns[k][first][label].

    >>> distinct_rows(np.array([7, 5, 7], np.int32), np.array([0, 0, 0], np.int32))
    (array([0, 1, 0], dtype=int32), array([0, 1], dtype=int32))
    """
    return _labelled(np.stack([np.asarray(column, np.int32) for column in columns], axis=1))


def distinct_values(*arrays: Array) -> tuple[Array, Array]:
    """Labels of rows of numbers that are equal bit for bit, 0.0 and -0.0 being one: as `distinct_rows`.

    arrays   one to three, (rows, width) float32 each
    """
    return _labelled(*(np.ascontiguousarray(array, np.float32).view(np.int32) for array in arrays))


def distinct_corners(*streams: Stream) -> Vertices:
    """Corners that have equal values in every one of up to three streams, whatever the indices say."""
    shared: list[list[Stream]] = []  # streams of one index array, whose rows can be told apart before corners are
    for stream in streams:
        for some in shared:
            if stream.index is some[0].index or np.array_equal(stream.index, some[0].index):
                some.append(stream)
                break
        else:
            shared.append([stream])
    columns = []
    for some in shared:
        label, first = distinct_values(*(one.values[: min(len(each.values) for each in some)] for one in some))
        columns.append(some[0].index if len(first) == len(label) else label[some[0].index])
    if len(shared) == 1:
        return Vertices(columns[0], (first,) * len(streams))
    label, corner = distinct_rows(*columns)
    return Vertices(label, tuple(stream.index[corner] for stream in streams))


def divided(vertices: Vertices, by: Array) -> Vertices:
    """Vertices told apart by another (corners,) int32 label, too."""
    if _follows(vertices.label, len(vertices.rows[0]), by):
        return vertices
    label, corner = distinct_rows(vertices.label, by)
    return Vertices(label, tuple(rows[vertices.label[corner]] for rows in vertices.rows))


@njit(cache=True, nogil=True)
def _follows(label: Array, count: int, by: Array) -> bool:
    """Do corners of one label always have one of the other kind, too?"""
    other = np.full(count, MINUS_ZERO, np.int32)
    for c in range(len(label)):
        if other[label[c]] == MINUS_ZERO:
            other[label[c]] = by[c]
        elif other[label[c]] != by[c]:
            return False
    return True


def _labelled(*tables: Array) -> tuple[Array, Array]:
    rows = len(tables[0])
    views = [*tables, *[np.empty((rows, 0), np.int32)] * (3 - len(tables))]
    for view in views:
        view.flags.writeable = False  # so that one compiled kernel serves all
    label, first = np.empty(rows, np.int32), np.empty(rows, np.int32)
    slots = np.full(1 << max(4, int(2 * rows - 1).bit_length()), -1, np.int32)
    count, _ = _label(*views, slots, label, first)
    return label, first[:count].copy()


@njit(cache=True, nogil=True)
def _bits(value: int) -> int:
    return 0 if value == MINUS_ZERO else value


@njit(cache=True, nogil=True)
def _mixed(key: np.uint64, table: Array, row: int) -> np.uint64:
    for k in range(table.shape[1]):
        key = (key + np.uint64(np.uint32(_bits(table[row, k])))) * GOLDEN
    return key


@njit(cache=True, nogil=True)
def _equal(table: Array, one: int, other: int) -> bool:
    for k in range(table.shape[1]):  # noqa: SIM110 (kernels know no generators)
        if _bits(table[one, k]) != _bits(table[other, k]):
            return False
    return True


@njit(cache=True, nogil=True)
def _label(a: Array, b: Array, c: Array, slots: Array, label: Array, first: Array) -> tuple[int, int]:
    """Write labels and first rows; gives how many there are, and of what was touched ahead, lest it be left out."""
    mask = np.uint64(len(slots) - 1)
    coming = np.zeros(BLOCK, np.uint64)
    count = touched = 0
    for block in range(0, len(a), BLOCK):
        end = min(block + BLOCK, len(a))
        for row in range(block, end):
            key = _mixed(_mixed(_mixed(np.uint64(0), a, row), b, row), c, row)
            coming[row - block] = ((key ^ (key >> np.uint64(32))) * GOLDEN >> np.uint64(20)) & mask
        for k in range(end - block):
            touched ^= slots[coming[k]]
        for row in range(block, end):
            slot = coming[row - block]
            while True:
                other = slots[slot]
                if other < 0:
                    slots[slot] = row
                    first[count] = row
                    label[row] = count
                    count += 1
                    break
                if _equal(a, row, other) and _equal(b, row, other) and _equal(c, row, other):
                    label[row] = label[other]
                    break
                slot = (slot + np.uint64(1)) & mask
    return count, touched
