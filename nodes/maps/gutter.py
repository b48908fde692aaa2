"""The nearest texel that a chart owns, for texels that none does."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array

FAR = 20000  # texels: further than any image is wide


def nearest_owned(owned: Array, reach: int) -> Array:
    """(height, width) int32: flat indices of the nearest owned texels, their own for owned ones, -1 beyond `reach`.

    owned  (height, width) bool
    reach  in texels

    Distances are Euclidean, found in two sweeps that hand offsets on (Danielsson 1980), so near the corners of charts a
    texel may get an owner that is a fraction of a texel further than the nearest.
    """
    height, width = owned.shape
    # A border of texels without owners saves asking at each step whether there is a neighbour.
    down, along = (np.full((height + 2, width + 2), FAR, np.int16) for _ in range(2))
    down[1:-1, 1:-1][owned] = 0
    along[1:-1, 1:-1][owned] = 0
    _sweep(down, along, reach + 1)
    source = np.empty(owned.shape, np.int32)
    _resolve(down, along, reach, source)
    return source


@njit(cache=True, nogil=True, inline="always")
def _offer(down: Array, along: Array, r: int, c: int, dr: int, dc: int, reach: int) -> None:
    """Take the neighbour's owner where that is nearer than the owner known so far, and not out of reach."""
    there = down[r + dr, c + dc]
    if there != FAR:
        new_down, new_along = np.int32(there) + dr, np.int32(along[r + dr, c + dc]) + dc
        old_down, old_along = np.int32(down[r, c]), np.int32(along[r, c])
        square = new_down * new_down + new_along * new_along
        if square <= reach * reach and square < old_down * old_down + old_along * old_along:
            down[r, c], along[r, c] = new_down, new_along


@njit(cache=True, nogil=True)
def _sweep(down: Array, along: Array, reach: int) -> None:
    height, width = down.shape
    for r in range(1, height - 1):
        for c in range(1, width - 1):
            if down[r, c] != 0 or along[r, c] != 0:
                for dc in (-1, 0, 1):
                    _offer(down, along, r, c, -1, dc, reach)
                _offer(down, along, r, c, 0, -1, reach)
        for c in range(width - 2, 0, -1):
            if down[r, c] != 0 or along[r, c] != 0:
                _offer(down, along, r, c, 0, 1, reach)
    for r in range(height - 2, 0, -1):
        for c in range(width - 2, 0, -1):
            if down[r, c] != 0 or along[r, c] != 0:
                for dc in (-1, 0, 1):
                    _offer(down, along, r, c, 1, dc, reach)
                _offer(down, along, r, c, 0, 1, reach)
        for c in range(1, width - 1):
            if down[r, c] != 0 or along[r, c] != 0:
                _offer(down, along, r, c, 0, -1, reach)


@njit(cache=True, nogil=True)
def _resolve(down: Array, along: Array, reach: int, source: Array) -> None:
    height, width = source.shape
    for r in range(height):
        for c in range(width):
            dr, dc = np.int64(down[r + 1, c + 1]), np.int64(along[r + 1, c + 1])
            near = dr != FAR and dr * dr + dc * dc <= reach * reach
            source[r, c] = (r + dr) * width + c + dc if near else -1
