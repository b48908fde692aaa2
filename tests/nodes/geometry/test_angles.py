"""Angles in kernels."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from tangentry.nodes.geometry.angles import angle_between_edges


@settings(deadline=None)
@given(st.floats(0, np.pi), st.floats(1e-30, 1e30))
def test_the_angle_is_the_c_library_s_within_float32(angle, length):
    across, along = length * np.sin(angle), length * np.cos(angle)

    assert abs(angle_between_edges(across, along) - np.arctan2(across, along)) < 3e-8


@pytest.mark.parametrize("nothing", [0.0, np.nan, np.inf])
def test_no_edges_no_angle(nothing):
    assert angle_between_edges(nothing, nothing) == 0.0
