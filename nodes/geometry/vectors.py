"""Small vector algebra on arrays of rows."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array


def dot(a: Array, b: Array) -> Array:
    """(n,) products of the rows of two (n, 3) arrays."""
    products: Array = np.einsum("ij,ij->i", a, b)
    return products


def unit(rows: Array) -> Array:
    """(n, 3) rows of length one; rows without a length, or without a finite one, are zero."""
    length = np.sqrt(dot(rows, rows))[:, None]
    out: Array = np.divide(rows, length, out=np.zeros_like(rows), where=(length > 0) & (length < np.inf))
    return out


def unit_or_up(rows: Array) -> Array:
    """(n, 3) rows of length one; (0, 0, 1) for rows that have no direction."""
    out = unit(rows)
    out[~out.any(axis=1)] = (0, 0, 1)
    return out


def reject(rows: Array, normals: Array) -> Array:
    """(n, 3) the part of each row that is perpendicular to a unit normal: rows - normals (rows . normals)."""
    out: Array = rows - normals * dot(rows, normals)[:, None]
    return out


def axis_across(normals: Array) -> Array:
    """(n, 3) a unit vector across each unit normal, continuous but at n_z = 0 (Duff et al. 2017, listing 3)."""
    x, y, z = normals.T
    sign = np.copysign(np.float32(1), z)
    a = -1 / (sign + z)
    axis: Array = np.stack([1 + sign * x * x * a, sign * x * y * a, -sign * x], axis=1)
    return unit(axis.astype(normals.dtype))


def angle_between(a: Array, b: Array) -> Array:
    """(n,) degrees between the rows of two (n, 3) arrays of unit vectors, exact near 0 and 180 (Kahan's formula)."""
    kind = np.float32 if a.dtype == b.dtype == np.float32 else np.float64
    one, other = (np.ascontiguousarray(rows, kind).view() for rows in np.broadcast_arrays(a, b))
    one.flags.writeable = other.flags.writeable = False  # so that one compiled kernel serves all
    angle = np.empty(len(one))
    _angles(one, other, angle)
    return angle


@njit(cache=True, nogil=True)
def _angles(one: Array, other: Array, angle: Array) -> None:
    for row in range(len(one)):
        apart = together = 0.0
        for k in range(3):
            apart += (np.float64(one[row, k]) - np.float64(other[row, k])) ** 2
            together += (np.float64(one[row, k]) + np.float64(other[row, k])) ** 2
        angle[row] = np.degrees(2 * np.arctan2(np.sqrt(apart), np.sqrt(together)))
