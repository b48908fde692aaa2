"""Directions as points of an unfolded octahedron (Cigolle et al., JCGT 2014): the upper half is the diamond
|u| + |v| <= 1, the lower half is folded outward over its edges."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array


def octahedral_codes(vectors: Array, top: int) -> Array:
    """(n, 2) int32 codes 0 to top of (n, 3) directions: of the four around each the one that comes back nearest.

    Code c stands for 2 c / top - 1. Where a direction has no length the code of (0, 0, 1) is given.
    """
    codes = np.empty((len(vectors), 2), np.int32)
    _nearest(np.ascontiguousarray(vectors), top, codes)
    return codes


def octahedral_directions(codes: Array, top: int) -> Array:
    """(n, 3) float32 unit directions of (n, 2) codes: the inverse of `octahedral_codes`."""
    out = np.empty((len(codes), 3), np.float32)
    _fold_all(np.ascontiguousarray(codes), top, out)
    return out


@njit(cache=True, nogil=True)
def _fold(u: float, v: float) -> tuple[float, float, float]:
    z = 1 - abs(u) - abs(v)
    if z < 0:
        u, v = (1 - abs(v)) * (1 if u >= 0 else -1), (1 - abs(u)) * (1 if v >= 0 else -1)
    length = np.sqrt(u * u + v * v + z * z)
    return u / length, v / length, z / length


@njit(cache=True, nogil=True)
def _nearest(vectors: Array, top: int, codes: Array) -> None:
    for i in range(len(vectors)):
        x, y, z = np.float64(vectors[i, 0]), np.float64(vectors[i, 1]), np.float64(vectors[i, 2])
        total = abs(x) + abs(y) + abs(z)
        if not total > 0:
            z = total = np.float64(1)
        u, v = x / total, y / total
        if z < 0:
            u, v = (1 - abs(v)) * (1 if u >= 0 else -1), (1 - abs(u)) * (1 if v >= 0 else -1)
        low_u, low_v = np.floor((u + 1) / 2 * top), np.floor((v + 1) / 2 * top)
        best = -np.inf
        for du in range(2):
            for dv in range(2):
                a, b = min(low_u + du, top), min(low_v + dv, top)
                p, q, r = _fold(2 * a / top - 1, 2 * b / top - 1)
                cosine = p * x + q * y + r * z
                if cosine > best:
                    best = cosine
                    codes[i, 0], codes[i, 1] = a, b


@njit(cache=True, nogil=True)
def _fold_all(codes: Array, top: int, out: Array) -> None:
    for i in range(len(codes)):
        out[i, 0], out[i, 1], out[i, 2] = _fold(2 * codes[i, 0] / top - 1, 2 * codes[i, 1] / top - 1)
