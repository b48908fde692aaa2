"""Triangles that lie over one another in UV space, found on a grid of pixels.

Unlike in a map, where each texel has one owner (texels.py), every triangle is held against those that came before it.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array

INSET = 0.02  # pixels kept clear along edges, so that rounding makes no overlap of faces that only touch
DEEP = 16  # pixels looked at, as a multiple of the grid's, before each triangle stops at its first overlap


class Overlaps(NamedTuple):
    """Of every triangle."""

    pixels: Array  # (n,) int32: how many it holds
    shared: Array  # (n,) int32: how many of them another face holds, too
    other: Array  # (n,) int32: a triangle that it shares pixels with; -1: none
    own: Array  # (n,) bool: does it share pixels with a face of its own chart?
    resolution: int  # pixels along the longer side of the UVs' bounding box


def overlaps_of(corners: Array, face: Array, chart: Array) -> Overlaps:
    """Which triangles share pixels with those of other faces, in a time and memory that depend on their number alone.

    corners   (n, 3, 2) float64 UVs; triangles that are not finite are passed over
    face      (n,) int32: triangles of one face are not held against each other
    chart     (n,) int32

    The grid spans the bounding box with 1024 to 4096 pixels, 16 a triangle if they suffice. An overlap that holds no
    pixel's centre is not seen. Where overlaps lie so deep that looking at all would take too long, a triangle stops at
    its first, and `shared` is a lower bound.
    """
    n = len(corners)
    resolution = int(np.clip(4 * np.sqrt(n), 1024, 4096))
    out = Overlaps(
        np.zeros(n, np.int32), np.zeros(n, np.int32), np.full(n, -1, np.int32), np.zeros(n, bool), resolution
    )
    finite = np.isfinite(corners).all(axis=(1, 2))
    if not finite.any():
        return out
    low, high = corners[finite].min(axis=(0, 1)), corners[finite].max(axis=(0, 1))
    scale = resolution / max(float((high - low).max()), 1e-30)
    width, height = (int(np.ceil(side * scale)) + 1 for side in high - low)
    # Off the round numbers that UVs like to lie on.
    pixels = np.where(finite[:, None, None], (corners - low) * scale + (0.37, 0.41), 0.0)
    grid = np.full((height, width), -1, np.int32)
    _look(pixels, face, chart, grid, np.zeros((height, width), np.bool_), INSET, DEEP, *out[:4])
    return out


@njit(cache=True, nogil=True)
def _look(
    corners: Array,
    face: Array,
    chart: Array,
    grid: Array,
    contested: Array,
    inset: float,
    deep: int,
    pixels: Array,
    shared: Array,
    other: Array,
    own: Array,
) -> None:
    height, width = grid.shape
    left = deep * height * width
    for t in range(len(corners)):
        first_row, beyond = _rows(corners[t], height)
        for y in range(first_row, beyond):
            first, last = _span(corners[t], y, width, inset)
            left -= max(last - first, 0)
            for x in range(first, last):
                pixels[t] += 1
                holder = grid[y, x]
                if holder < 0:
                    grid[y, x] = t
                elif face[holder] != face[t]:
                    shared[t] += 1
                    other[t] = holder
                    if not contested[y, x]:
                        contested[y, x] = True
                        shared[holder] += 1
                        other[holder] = t
                    if chart[holder] == chart[t]:
                        own[t] = own[holder] = True
                    if left < 0:
                        break
            if left < 0 and other[t] >= 0:
                break


@njit(cache=True, nogil=True)
def _rows(corner: Array, height: int) -> tuple[int, int]:
    """The rows whose pixel centres a triangle can hold: first, and one beyond the last.

    corner   (3, 2) float64, in pixels; pixel (i, j) has its centre at (i + 0.5, j + 0.5)
    """
    low = min(corner[0, 1], corner[1, 1], corner[2, 1])
    high = max(corner[0, 1], corner[1, 1], corner[2, 1])
    return max(0, int(np.ceil(low - 0.5))), min(height, int(np.floor(high - 0.5)) + 1)


@njit(cache=True, nogil=True)
def _span(corner: Array, row: int, width: int, inset: float) -> tuple[int, int]:
    """The pixels of a row whose centres lie in a triangle, at least `inset` from its edges: first, one beyond the last.

    With a small positive inset, triangles that share an edge never share a pixel.
    """
    y = row + 0.5
    turn = (corner[1, 0] - corner[0, 0]) * (corner[2, 1] - corner[0, 1]) - (corner[1, 1] - corner[0, 1]) * (
        corner[2, 0] - corner[0, 0]
    )
    if not abs(turn) > 0:
        return 0, 0
    way = 1.0 if turn > 0 else -1.0
    first, last = 0.5, width - 0.5  # of the centres
    for k in range(3):
        ax, ay = corner[k, 0], corner[k, 1]
        dx, dy = (corner[(k + 1) % 3, 0] - ax) * way, (corner[(k + 1) % 3, 1] - ay) * way
        # Inside is dx (y - ay) - dy (x - ax) >= inset * length.
        room = dx * (y - ay) - inset * np.sqrt(dx * dx + dy * dy)
        if dy > 0:
            last = min(last, ax + room / dy)
        elif dy < 0:
            first = max(first, ax + room / dy)
        elif room < 0:
            return 0, 0
    if not first <= last:
        return 0, 0
    return int(np.ceil(first - 0.5)), int(np.floor(last - 0.5)) + 1
