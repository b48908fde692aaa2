"""Angles in kernels."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from tangentry.nodes.geometry.angles import angle_from


@settings(deadline=None)
@given(st.floats(-1, 1), st.floats(1e-30, 1e30))
def test_the_angle_is_the_c_library_s_within_float32(cosine, squares):
    assert abs(angle_from(cosine * np.sqrt(squares), squares) - np.arccos(cosine)) < 3e-8


def test_no_lengths_no_angle():
    assert angle_from(0.0, 0.0) == angle_from(np.nan, np.nan) == 0.0
