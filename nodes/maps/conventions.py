"""What a map's own texels tell of its conventions."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from tangentry.nodes.maps.encodings import decode_texels
from tangentry.pipeline.flow import Array

CLEAR = 0.25  # a correlation below this is no verdict
STEEPEST = 0.1  # texels whose normals lean further (z below this) say little about slopes
FEWEST = 64  # texels that must have a say
BAND = 1 << 20  # texels that are looked at together


class Green(NamedTuple):
    """Which way green points, and how sure that is."""

    verdict: str  # "up", "down" or "undecided"
    correlation: float  # +1: surely up; -1: surely down; 0: no telling


def measure_green(texels: Array) -> Green:
    """Does green grow up the image or down? By integrability, of (height, width, 3 or more) unorm codes or floats.

    A map that was made from heights has slopes p = dh/dx and q = dh/dy with dp/dy = dq/dx. Read with green the wrong
    way round the two sides have opposite signs, so their correlation over the map tells which it is. Common practice,
    no source, for the use; the condition is Frankot & Chellappa's (1988, equation 1).
    """
    if min(texels.shape[:2]) < 3:
        return Green("undecided", 0.0)
    # In bands of rows that overlap by the two that differences reach over: memory stays small, however large the map.
    starts = range(0, len(texels) - 2, max(1, BAND // texels.shape[1]))
    count, both, one, other = np.sum([_sums(texels[r : r + starts.step + 2]) for r in starts], axis=0)
    power = float(np.sqrt(one * other))
    if count < FEWEST or power == 0:
        return Green("undecided", 0.0)
    correlation = float(both / power)
    return Green("up" if correlation > CLEAR else "down" if correlation < -CLEAR else "undecided", correlation)


def _sums(texels: Array) -> tuple[float, float, float, float]:
    """Of a band: how many texels have a say, and the sums of a b, a a and b b with a = dp/dy, b = dq/dx."""
    normals = decode_texels(texels[..., :3], "float" if texels.dtype.kind == "f" else "unorm", "up")
    z = normals[..., 2]
    sure = z > STEEPEST
    safe = np.where(sure, z, 1)
    p, q = -normals[..., 0] / safe, -normals[..., 1] / safe
    dp_dy = p[:-2, 1:-1] - p[2:, 1:-1]  # rows go down, y goes up
    dq_dx = q[1:-1, 2:] - q[1:-1, :-2]
    usable = sure[1:-1, 1:-1] & sure[:-2, 1:-1] & sure[2:, 1:-1] & sure[1:-1, 2:] & sure[1:-1, :-2]
    a, b = dp_dy[usable].astype(np.float64), dq_dx[usable].astype(np.float64)
    return float(len(a)), float((a * b).sum()), float((a * a).sum()), float((b * b).sum())
