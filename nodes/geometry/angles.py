"""Angles in kernels: quicker than the C library's arc functions, and as exact as float32 can tell."""

from __future__ import annotations

import numpy as np
from numba import njit


@njit(cache=True, nogil=True)
def angle_between_edges(across: float, along: float) -> float:
    """The angle, 0 to pi, of a cross product's length and a dot product, within 3e-8; 0 where there are none.

    The polynomial is 4.4.49 of Abramowitz & Stegun, Handbook of Mathematical Functions, 1964.
    """
    small, large = min(across, abs(along)), max(across, abs(along))
    if not 0 < large < np.inf:
        return 0.0
    x = small / large
    square = x * x
    series = 0.0028662257
    series = series * square - 0.0161657367
    series = series * square + 0.0429096138
    series = series * square - 0.0752896400
    series = series * square + 0.1065626393
    series = series * square - 0.1420889944
    series = series * square + 0.1999355085
    series = series * square - 0.3333314528
    angle = x + x * square * series
    angle = np.pi / 2 - angle if across > abs(along) else angle
    return np.pi - angle if along < 0 else angle
