"""Which corners are one: rows of whole numbers told apart by hashing, in linear time."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array

AHEAD = 12  # keys whose slot is touched before it is needed: the table is larger than the cache
GOLDEN = np.uint64(0x9E3779B97F4A7C15)


def distinct_rows(*columns: Array) -> tuple[Array, Array]:
    """Labels of equal rows: (label, first) with label (rows,) int32 and first (distinct,) int32.

    columns   (rows,) int32 each

    Rows i and j are equal in every column just where label[i] == label[j]. Labels count up in order of first
    appearance; first[label[i]] is the first row equal to row i, so columns[k] == columns[k][first][label].

    >>> distinct_rows(np.array([7, 5, 7], np.int32), np.array([0, 0, 0], np.int32))
    (array([0, 1, 0], dtype=int32), array([0, 1], dtype=int32))
    """
    table = np.ascontiguousarray(np.stack([np.asarray(column, np.int32) for column in columns], axis=1))
    label = np.empty(len(table), np.int32)
    first = np.empty(len(table), np.int32)
    slots = np.full(1 << max(4, int(2 * len(table)).bit_length()), -1, np.int32)
    count = _label(table, slots, label, first)
    return label, first[:count].copy()


def distinct_values(*arrays: Array) -> tuple[Array, Array]:
    """Labels of rows of numbers that are equal bit for bit, 0.0 and -0.0 being one: as `distinct_rows`.

    arrays   (rows, width) float32 each
    """
    planes = [
        np.ascontiguousarray(array[:, k] + np.float32(0)).view(np.int32)
        for array in arrays
        for k in range(array.shape[1])
    ]
    return distinct_rows(*planes)


@njit(cache=True, nogil=True)
def _hash(table: Array, row: int) -> np.uint64:
    key = np.uint64(0)
    for k in range(table.shape[1]):
        key = (key ^ np.uint64(np.uint32(table[row, k]))) * GOLDEN
        key ^= key >> np.uint64(29)
    return key


@njit(cache=True, nogil=True)
def _label(table: Array, slots: Array, label: Array, first: Array) -> int:
    rows, width = table.shape
    mask = np.uint64(len(slots) - 1)
    coming = np.zeros(AHEAD, np.uint64)
    for row in range(min(AHEAD, rows)):
        coming[row] = _hash(table, row)
    count = 0
    touched = 0
    for row in range(rows):
        slot = coming[row % AHEAD] & mask
        if row + AHEAD < rows:
            later = _hash(table, row + AHEAD)
            coming[row % AHEAD] = later
            touched ^= slots[later & mask]
        while True:
            other = slots[slot]
            if other < 0:
                slots[slot] = row
                first[count] = row
                label[row] = count
                count += 1
                break
            equal = True
            for k in range(width):
                if table[row, k] != table[other, k]:
                    equal = False
                    break
            if equal:
                label[row] = label[other]
                break
            slot = (slot + np.uint64(1)) & mask
    first[rows - 1 if rows else 0 : 0] = touched  # an empty write: keeps the touching from being left out
    return count
