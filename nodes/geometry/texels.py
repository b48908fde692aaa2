"""Which triangle owns each texel, and where in it the texel's centre lies.

Texel (row r, column c) has its centre at (c + 1/2, r + 1/2) texels from the image's top left corner. A texel belongs to
the triangle that its centre is in; a centre on a shared edge belongs to one of the two by the top-left rule, so charts
have neither gaps nor texels drawn twice. Where charts overlap, the first triangle keeps the texel. UVs beyond the tile
wrap, as textures repeat.

The edge function of an edge from a to b is evaluated with its ends in a fixed order, so the two triangles that share an
edge see exactly opposite values (rasterisation by edge functions: Pineda 1988).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array

MOST_TILES = 64.0  # a triangle that spans more repeats than this has no sensible place in a texture and is left out
FARTHEST = 1e6  # likewise one that lies further from the origin than this, in tiles
WIDE = 8  # columns from which it pays to work out where a row enters and leaves the triangle


class Owners(NamedTuple):
    """Owners of texels. Row 0 is the top of the image."""

    triangle: Array  # (rows, width) int32: row of the triangles, -1 where there is none
    weights: Array  # (rows, width, 2) float32: of the triangle's corners 1 and 2; corner 0 has the rest


def texel_owners(
    places: Array, width: int, height: int, *, rows: tuple[int, int] | None = None, conservative: bool = False
) -> Owners:
    """Owners of the texels of an image.

    places        (triangles, 3, 2) float64: where corners lie in the image, in shares of its width and height from the
                  top left corner (see `image_places`)
    rows          only these rows, first and one past the last; beyond the image's own they wrap
    conservative  texels that a triangle merely touches are owned as well, after all whose centre is covered; their
                  weights are those of a place on the triangle's border

    Triangles without area, with non-finite corners, or spanning more than 64 repeats own nothing.
    """
    first, last = rows or (0, height)
    triangle = np.full((last - first, width), -1, np.int32)
    weights = np.zeros((last - first, width, 2), np.float32)
    texels = np.ascontiguousarray(places, np.float64) * (width, height)
    free = _fill(texels, width, height, first, triangle, weights, False, triangle.size)
    if conservative:
        _fill(texels, width, height, first, triangle, weights, True, free)
    return Owners(triangle, weights)


def image_places(uvs: Array, v_down: bool) -> Array:
    """(..., 2) float64: UVs as places in the image, from its top left corner; v_down: v grows down already."""
    places: Array = np.array(uvs, np.float64)
    if not v_down:
        places[..., 1] = 1 - places[..., 1]
    return places


@njit(cache=True, nogil=True)
def _edge(ax: float, ay: float, bx: float, by: float) -> tuple[float, float, float]:
    """(p, q, r) with p x + q y + r > 0 inside of a -> b; negated exactly where a and b change places."""
    if (ay, ax) <= (by, bx):
        return ay - by, bx - ax, ax * by - ay * bx
    return -(by - ay), -(ax - bx), -(bx * ay - by * ax)


@njit(cache=True, nogil=True)
def _owned(value: float, p: float, q: float) -> bool:
    """Is a centre with this edge value inside? On the edge: only on top and left ones."""
    return value > 0 or (value == 0 and (p > 0 or (p == 0 and q > 0)))


@njit(cache=True, nogil=True)
def _narrowed(low: int, high: int, y: float, p: float, q: float, r: float, slack: float) -> tuple[int, int]:
    """The columns of a row that can be inside of an edge, one more on either side."""
    if p == 0:
        return low, high
    meets = (-slack - q * y - r) / p - 0.5
    if p > 0:
        return max(low, int(min(max(meets, low), high)) - 1), high
    return low, min(high, int(max(min(meets, high), low)) + 1)


@njit(cache=True, nogil=True)
def _fill(
    texels: Array, width: int, height: int, first: int, triangle: Array, weights: Array, touching: bool, free: int
) -> int:
    """Give texels without an owner to triangles; returns how many are left free."""
    rows = triangle.shape[0]
    slack = 0.5 if touching else 0.0
    for t in range(len(texels)):
        if free == 0:
            break
        x0, y0 = texels[t, 0, 0], texels[t, 0, 1]
        x1, y1 = texels[t, 1, 0], texels[t, 1, 1]
        x2, y2 = texels[t, 2, 0], texels[t, 2, 1]
        left, right = min(x0, x1, x2), max(x0, x1, x2)
        top, bottom = min(y0, y1, y2), max(y0, y1, y2)
        if not (right - left < MOST_TILES * width and bottom - top < MOST_TILES * height):
            continue
        if not (abs(left) < FARTHEST * width and abs(top) < FARTHEST * height):
            continue
        area = (x1 - x0) * (y2 - y0) - (x2 - x0) * (y1 - y0)
        if area == 0:
            continue
        if area < 0:  # seen from behind: corners 1 and 2 change places
            x1, y1, x2, y2 = x2, y2, x1, y1
        p0, q0, r0 = _edge(x1, y1, x2, y2)
        p1, q1, r1 = _edge(x2, y2, x0, y0)
        p2, q2, r2 = _edge(x0, y0, x1, y1)
        s0, s1, s2 = slack * (abs(p0) + abs(q0)), slack * (abs(p1) + abs(q1)), slack * (abs(p2) + abs(q2))
        over = 1 / abs(area)
        column0, column1 = int(np.ceil(left - 0.5 - slack)), int(np.floor(right - 0.5 + slack))
        row0, row1 = int(np.ceil(top - 0.5 - slack)), int(np.floor(bottom - 0.5 + slack))
        for row in range(row0, row1 + 1):
            at_row = row - first
            if at_row < 0 or at_row >= rows:
                at_row %= height
                if at_row >= rows:
                    continue
            y = row + 0.5
            low, high = column0, column1
            if high - low > WIDE:
                low, high = _narrowed(low, high, y, p0, q0, r0, s0)
                low, high = _narrowed(low, high, y, p1, q1, r1, s1)
                low, high = _narrowed(low, high, y, p2, q2, r2, s2)
            for column in range(low, high + 1):
                x = column + 0.5
                e0, e1, e2 = (p0 * x + q0 * y) + r0, (p1 * x + q1 * y) + r1, (p2 * x + q2 * y) + r2
                if touching:
                    if e0 <= -s0 or e1 <= -s1 or e2 <= -s2:
                        continue
                elif not (_owned(e0, p0, q0) and _owned(e1, p1, q1) and _owned(e2, p2, q2)):
                    continue
                at = column if 0 <= column < width else column % width
                if triangle[at_row, at] >= 0:
                    continue
                triangle[at_row, at] = t
                free -= 1
                one, two = e1 * over, e2 * over
                if touching:
                    zero, one, two = max(e0 * over, 0.0), max(one, 0.0), max(two, 0.0)
                    total = zero + one + two
                    one, two = one / total, two / total
                weights[at_row, at, 0] = two if area < 0 else one
                weights[at_row, at, 1] = one if area < 0 else two
    return free
