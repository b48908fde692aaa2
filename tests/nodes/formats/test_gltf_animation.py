"""Animation curves (glTF 2.0 specification, appendix C)."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from tangentry.nodes.formats.gltf_animation import Channel, value_at


def channel(way: str, times: list[float], values: np.ndarray, path: str = "translation") -> Channel:
    values = np.asarray(values, np.float64)
    if way != "CUBICSPLINE":
        values = np.stack([0 * values, values, 0 * values], axis=1)
    return Channel(0, path, way, np.array(times), values)


def turn(degrees: float) -> np.ndarray:
    """A quaternion around z."""
    return np.array([0, 0, np.sin(np.radians(degrees) / 2), np.cos(np.radians(degrees) / 2)])


def test_a_line_goes_straight_from_key_to_key():
    assert_allclose(value_at(channel("LINEAR", [1, 3], [[0, 2, 4], [2, 2, 0]]), 1.5), [0.5, 2, 3])


def test_a_step_holds_until_the_next_key():
    held = channel("STEP", [0, 1, 2], [[1], [5], [7]])

    assert [float(value_at(held, time)[0]) for time in (0, 0.99, 1, 1.99, 2)] == [1, 1, 5, 5, 7]


@pytest.mark.parametrize("way", ["STEP", "LINEAR"])
def test_before_the_first_key_and_after_the_last_their_values_hold(way):
    held = channel(way, [1, 2], [[3], [4]])

    assert value_at(held, -5) == 3 and value_at(held, 9) == 4


@pytest.mark.parametrize("time", [0.5, 0.7, 1.6, 2.0])
def test_a_spline_through_a_cubic_s_values_and_slopes_is_that_cubic(time):
    """Hermite interpolation reproduces polynomials of the third degree."""
    keys = np.array([0.5, 1.5, 2.0])
    rows = [[[3 * t**2 - 2 * t], [t**3 - t**2], [3 * t**2 - 2 * t]] for t in keys]

    assert_allclose(value_at(channel("CUBICSPLINE", keys.tolist(), rows), time), time**3 - time**2, atol=1e-12)


@pytest.mark.parametrize("sign", [1, -1])
def test_rotations_turn_evenly_along_the_shorter_arc(sign):
    """q and -q are one rotation."""
    turning = channel("LINEAR", [0, 1], [turn(0), sign * turn(90)], "rotation")

    assert_allclose(np.abs(value_at(turning, 1 / 3)), turn(30), atol=1e-12)


def test_splined_rotations_stay_unit():
    rows = [[[0, 0, 0, 0], turn(0), [0, 0, 3, 0]], [[0, 0, 1, 1], turn(170), [0, 0, 0, 0]]]

    assert np.linalg.norm(value_at(channel("CUBICSPLINE", [0, 1], rows, "rotation"), 0.4)) == pytest.approx(1)
