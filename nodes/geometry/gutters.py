"""Gutters: how far apart charts lie in texels."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array

PATIENCE = 2_000_000_000  # pixels looked at before what is left is passed over


def gutters_of(start: Array, end: Array, stack: Array, size: tuple[int, int], limit: float) -> tuple[Array, Array]:
    """Gaps under a limit: (gap, other), gap (n,) float64, inf where there is none, other (n,) int32 the piece across.

    start, end  (n, 2) float64, in texels: pieces of the borders of charts
    stack       (n,) int32: pieces of one number are not held against each other
    size        (width, height) in texels

    Borders are drawn on the texels, the first piece in each; the gaps between pieces found near one another that way
    are then measured exactly.
    """
    gap, other = np.full(len(start), np.inf), np.full(len(start), -1, np.int32)
    width, height = size
    grid = np.full((height, width), -1, np.int32)
    _draw(start, end, stack, grid, gap, other, limit, PATIENCE)
    _look(start, end, stack, grid, gap, other, limit, PATIENCE)
    return gap, other


@njit(cache=True, nogil=True)
def _from(px: float, py: float, a: Array, b: Array) -> float:
    """Squared distance of a point from a piece."""
    dx, dy = b[0] - a[0], b[1] - a[1]
    square = dx * dx + dy * dy
    t = 0.0
    if square > 0:
        t = min(max(((px - a[0]) * dx + (py - a[1]) * dy) / square, 0.0), 1.0)
    return (a[0] + t * dx - px) ** 2 + (a[1] + t * dy - py) ** 2


@njit(cache=True, nogil=True)
def _measure(start: Array, end: Array, i: int, j: int, gap: Array, other: Array, limit: float) -> None:
    """The gap between two pieces that do not cross is at an end of one of them."""
    a, b, c, d = start[i], end[i], start[j], end[j]
    square = min(_from(a[0], a[1], c, d), _from(b[0], b[1], c, d), _from(c[0], c[1], a, b), _from(d[0], d[1], a, b))
    found = np.sqrt(square)
    if found < limit:
        if found < gap[i]:
            gap[i], other[i] = found, j
        if found < gap[j]:
            gap[j], other[j] = found, i


@njit(cache=True, nogil=True)
def _draw(
    start: Array, end: Array, stack: Array, grid: Array, gap: Array, other: Array, limit: float, patience: int
) -> None:
    height, width = grid.shape
    for i in range(len(start)):
        dx, dy = end[i, 0] - start[i, 0], end[i, 1] - start[i, 1]
        steps = int(2 * max(abs(dx), abs(dy))) + 1
        patience -= steps
        if patience < 0:
            return
        for k in range(steps + 1):
            x = min(max(int(start[i, 0] + dx * k / steps), 0), width - 1)
            y = min(max(int(start[i, 1] + dy * k / steps), 0), height - 1)
            there = grid[y, x]
            if there < 0:
                grid[y, x] = i
            elif stack[there] != stack[i]:
                _measure(start, end, i, there, gap, other, limit)


@njit(cache=True, nogil=True)
def _look(
    start: Array, end: Array, stack: Array, grid: Array, gap: Array, other: Array, limit: float, patience: int
) -> None:
    height, width = grid.shape
    reach = int(np.ceil(limit)) + 1
    for y in range(height):
        for x in range(width):
            i = grid[y, x]
            if i < 0:
                continue
            patience -= (reach + 1) * (2 * reach + 1)
            if patience < 0:
                return
            for ny in range(y, min(y + reach + 1, height)):  # each pair of pixels once: those below, or right of it
                for nx in range(max(x - reach, 0) if ny > y else x + 1, min(x + reach + 1, width)):
                    j = grid[ny, nx]
                    if j >= 0 and stack[j] != stack[i]:
                        _measure(start, end, i, j, gap, other, limit)
