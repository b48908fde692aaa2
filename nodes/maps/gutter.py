"""The nearest texel that a chart owns, for texels that none does."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array

FAR = 20000  # texels: further than any image is wide


def nearest_owned(owned: Array, reach: int) -> Array:
    """(height, width) int32: the flat index of the nearest owned texel, its own for owned ones, -1 beyond `reach` texels.

    owned  (height, width) bool

    Distances are Euclidean, found in two sweeps that hand offsets on (Danielsson 1980), so near the corners of charts a
    texel may get an owner that is a fraction of a texel further than the nearest.
    """
    down, along = np.where(owned, 0, FAR).astype(np.int16), np.where(owned, 0, FAR).astype(np.int16)
    _sweep(down, along)
    source = np.empty(owned.shape, np.int32)
    _resolve(down, along, reach, source)
    return source


@njit(cache=True, nogil=True)
def _offer(down: Array, along: Array, r: int, c: int, dr: int, dc: int) -> None:
    """Take the neighbour's owner where that is nearer than the owner known so far."""
    if not (0 <= r + dr < down.shape[0] and 0 <= c + dc < down.shape[1]) or down[r + dr, c + dc] == FAR:
        return
    new_down, new_along = np.int64(down[r + dr, c + dc]) + dr, np.int64(along[r + dr, c + dc]) + dc
    old_down, old_along = np.int64(down[r, c]), np.int64(along[r, c])
    if new_down * new_down + new_along * new_along < old_down * old_down + old_along * old_along:
        down[r, c], along[r, c] = new_down, new_along


@njit(cache=True, nogil=True)
def _sweep(down: Array, along: Array) -> None:
    height, width = down.shape
    for r in range(height):
        for c in range(width):
            for dc in (-1, 0, 1):
                _offer(down, along, r, c, -1, dc)
            _offer(down, along, r, c, 0, -1)
        for c in range(width - 1, -1, -1):
            _offer(down, along, r, c, 0, 1)
    for r in range(height - 1, -1, -1):
        for c in range(width - 1, -1, -1):
            for dc in (-1, 0, 1):
                _offer(down, along, r, c, 1, dc)
            _offer(down, along, r, c, 0, 1)
        for c in range(width):
            _offer(down, along, r, c, 0, -1)


@njit(cache=True, nogil=True)
def _resolve(down: Array, along: Array, reach: int, source: Array) -> None:
    height, width = down.shape
    for r in range(height):
        for c in range(width):
            dr, dc = np.int64(down[r, c]), np.int64(along[r, c])
            near = dr != FAR and dr * dr + dc * dc <= reach * reach
            source[r, c] = (r + dr) * width + c + dc if near else -1
