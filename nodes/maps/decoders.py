"""How a renderer turns a texel (x, y, z) into the normal it shades with: normalise(x t + y b + z n).

t, b, n come from the triangle's corners by interpolation. Decoders differ in what they do then:

    pixel          b = cross(n, t) * side at each pixel, nothing normalised before (Mikkelsen 2008; what glTF 2.0's
                   default frames are made for)
    pixel-unit     n and t normalised, then b = cross(n, t) * side
    pixel-square   n normalised, t made perpendicular to it and normalised, then b
    vertex         b made at the vertices and interpolated like n and t, nothing normalised
    vertex-unit    each of the three normalised
    vertex-square  n normalised; t made perpendicular to it, b to both; all normalised
    object         the texel is the normal in the mesh's own space

Kernels work in the precision of the weights they are given. Where `way` is a constant to the kernel that calls them,
its branches are gone before it runs.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array

ONE: Any = np.float32(1)  # in float32, lest they widen what they are reckoned with
NONE: Any = np.float32(0)
PER_VERTEX, UNIT, SQUARE, OBJECT = 1, 2, 4, 8

WAYS = {
    "pixel": 0,
    "pixel-unit": UNIT,
    "pixel-square": UNIT | SQUARE,
    "vertex": PER_VERTEX,
    "vertex-unit": PER_VERTEX | UNIT,
    "vertex-square": PER_VERTEX | UNIT | SQUARE,
    "object": OBJECT,
}


@njit(cache=True, nogil=True, inline="always")
def scaled(x: float, y: float, z: float) -> float:
    """One over the length of a vector; 0 for one without length."""
    square = x * x + y * y + z * z
    return ONE / np.sqrt(square) if square > NONE else NONE


@njit(cache=True, nogil=True, error_model="numpy")
def _corner_mean(
    frames: Array, t: int, w1: float, w2: float
) -> tuple[float, float, float, float, float, float, float, float, float, float]:
    """What the corners of a triangle have, interpolated: normal, tangent, bitangent, side.

    This alone takes an array and has no branches: then no reference to the array is counted for each texel.
    """
    w0 = np.float32(1) - w1 - w2
    return (
        w0 * frames[t, 0, 0] + w1 * frames[t, 1, 0] + w2 * frames[t, 2, 0],
        w0 * frames[t, 0, 1] + w1 * frames[t, 1, 1] + w2 * frames[t, 2, 1],
        w0 * frames[t, 0, 2] + w1 * frames[t, 1, 2] + w2 * frames[t, 2, 2],
        w0 * frames[t, 0, 3] + w1 * frames[t, 1, 3] + w2 * frames[t, 2, 3],
        w0 * frames[t, 0, 4] + w1 * frames[t, 1, 4] + w2 * frames[t, 2, 4],
        w0 * frames[t, 0, 5] + w1 * frames[t, 1, 5] + w2 * frames[t, 2, 5],
        w0 * frames[t, 0, 6] + w1 * frames[t, 1, 6] + w2 * frames[t, 2, 6],
        w0 * frames[t, 0, 7] + w1 * frames[t, 1, 7] + w2 * frames[t, 2, 7],
        w0 * frames[t, 0, 8] + w1 * frames[t, 1, 8] + w2 * frames[t, 2, 8],
        w0 * frames[t, 0, 9] + w1 * frames[t, 1, 9] + w2 * frames[t, 2, 9],
    )


@njit(cache=True, nogil=True, error_model="numpy")
def frame_at(
    frames: Array, t: int, w1: float, w2: float, way: int
) -> tuple[float, float, float, float, float, float, float, float, float]:
    """The frame t, b, n that a decoder has at a place in a triangle.

    frames    (triangles, 3, 10) float32: see Surface.frames
    t         the triangle
    w1, w2    weights of its corners 1 and 2
    way       one of WAYS
    """
    return _built(way, *_corner_mean(frames, t, w1, w2))


@njit(cache=True, nogil=True, error_model="numpy")
def _built(
    way: int,
    nx: float,
    ny: float,
    nz: float,
    tx: float,
    ty: float,
    tz: float,
    bx: float,
    by: float,
    bz: float,
    side: float,
) -> tuple[float, float, float, float, float, float, float, float, float]:
    """A decoder's frame t, b, n of what was interpolated."""
    if way & OBJECT:
        return ONE, NONE, NONE, NONE, ONE, NONE, NONE, NONE, ONE
    if way & UNIT:
        s = scaled(nx, ny, nz)
        nx, ny, nz = nx * s, ny * s, nz * s
        if way & SQUARE:
            d = nx * tx + ny * ty + nz * tz
            tx, ty, tz = tx - d * nx, ty - d * ny, tz - d * nz
        s = scaled(tx, ty, tz)
        tx, ty, tz = tx * s, ty * s, tz * s
    if not way & PER_VERTEX:
        return (
            tx,
            ty,
            tz,
            (ny * tz - nz * ty) * side,
            (nz * tx - nx * tz) * side,
            (nx * ty - ny * tx) * side,
            nx,
            ny,
            nz,
        )
    if way & SQUARE:
        d, e = bx * nx + by * ny + bz * nz, bx * tx + by * ty + bz * tz
        bx, by, bz = bx - d * nx - e * tx, by - d * ny - e * ty, bz - d * nz - e * tz
    if way & UNIT:
        s = scaled(bx, by, bz)
        bx, by, bz = bx * s, by * s, bz * s
    return tx, ty, tz, bx, by, bz, nx, ny, nz


@njit(cache=True, nogil=True, error_model="numpy")
def shade(
    frames: Array, t: int, w1: float, w2: float, way: int, x: float, y: float, z: float
) -> tuple[float, float, float]:
    """The unit normal that a decoder shades with, in the mesh's own space; (0, 0, 0) where its frame has none."""
    tx, ty, tz, bx, by, bz, nx, ny, nz = frame_at(frames, t, w1, w2, way)
    a, b, c = x * tx + y * bx + z * nx, x * ty + y * by + z * ny, x * tz + y * bz + z * nz
    s = scaled(a, b, c)
    return a * s, b * s, c * s


@njit(cache=True, nogil=True, error_model="numpy")
def unshade(
    frames: Array, t: int, w1: float, w2: float, way: int, x: float, y: float, z: float
) -> tuple[float, float, float]:
    """The unit texel that a decoder turns into a normal of the mesh's own space: the inverse of `shade`.

    By the inverse of the matrix (t b n), whose rows are cross products over its determinant. A frame without volume
    gives (0, 0, 1).
    """
    tx, ty, tz, bx, by, bz, nx, ny, nz = frame_at(frames, t, w1, w2, way)
    # b x n, n x t, t x b
    ux, uy, uz = by * nz - bz * ny, bz * nx - bx * nz, bx * ny - by * nx
    vx, vy, vz = ny * tz - nz * ty, nz * tx - nx * tz, nx * ty - ny * tx
    wx, wy, wz = ty * bz - tz * by, tz * bx - tx * bz, tx * by - ty * bx
    volume = tx * ux + ty * uy + tz * uz
    if not abs(volume) > np.float32(1e-12):
        return NONE, NONE, ONE
    a, b, c = x * ux + y * uy + z * uz, x * vx + y * vy + z * vz, x * wx + y * wy + z * wz
    s = scaled(a, b, c)
    if s == 0:
        return NONE, NONE, ONE
    if volume < 0:
        s = -s
    return a * s, b * s, c * s
