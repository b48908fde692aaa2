"""Angles in kernels: quicker than the C library's arc functions, and as exact as float32 can tell."""

from __future__ import annotations

import numpy as np
from numba import njit


@njit(cache=True, nogil=True)
def angle_from(product: float, squares: float) -> float:
    """The angle between vectors of this dot product and product of squared lengths: radians, within 3e-8; 0 of none.

    The polynomial is 4.4.46 of Abramowitz & Stegun, Handbook of Mathematical Functions, 1964.
    """
    if not squares > 0:
        return 0.0
    cosine = product / np.sqrt(squares)
    x = min(abs(cosine), 1.0)
    series = -0.0012624911
    series = series * x + 0.0066700901
    series = series * x - 0.0170881256
    series = series * x + 0.0308918810
    series = series * x - 0.0501743046
    series = series * x + 0.0889789874
    series = series * x - 0.2145988016
    series = series * x + 1.5707963050
    short_of_right = np.pi / 2 - np.sqrt(1.0 - x) * series
    return np.pi / 2 - np.copysign(short_of_right, cosine)
