"""How large texels are on the surface that a map lies on."""

from __future__ import annotations

import numpy as np
from tangentry.nodes.geometry.corners import distinct_values
from tangentry.nodes.geometry.texels import texel_owners
from tangentry.nodes.maps.gutter import nearest_owned
from tangentry.nodes.maps.surface import Surface
from tangentry.pipeline.flow import Array


def texel_sizes(surface: Surface, width: int, height: int) -> tuple[Array, Array] | None:
    """Width and height of every texel, (height, width) float32 each, in the unit of positions; None: there are none.

    At a vertex a size is the mean of its triangles', by their area in the image, and between vertices it is
    interpolated, so it has no steps within a chart. Texels outside all charts have that of the nearest inside.
    """
    owners = texel_owners(surface.places, width, height)
    owned = owners.triangle >= 0
    if not owned.any():
        return None
    source = nearest_owned(owned, width + height)
    triangle, weights = owners.triangle.ravel()[source], owners.weights.reshape(-1, 2)[source]
    across, down = (_between(corners, triangle, weights) for corners in np.moveaxis(_at_corners(surface), 2, 0))
    # A face without extent has no slopes; a size next to nothing says so without dividing by zero.
    least = np.float32(1e-6) * max(across.max(), down.max())
    if not least > 0:
        return None
    return np.maximum(across, least) / np.float32(width), np.maximum(down, least) / np.float32(height)


def _between(corners: Array, triangle: Array, weights: Array) -> Array:
    one, two = weights[..., 0], weights[..., 1]
    at: Array = corners[triangle, 0] * (1 - one - two)
    at += corners[triangle, 1] * one
    at += corners[triangle, 2] * two
    return at


def _at_corners(surface: Surface) -> Array:
    """(triangles, 3, 2) float32: the sizes of the whole image, at each corner the mean over all that meet there."""
    steps, area = _steps(surface)
    vertex, _ = distinct_values(surface.places.reshape(-1, 2), surface.positions.reshape(-1, 3))
    area = np.repeat(area, 3)
    whole = np.maximum(np.bincount(vertex, area), 1e-300)
    means = [np.bincount(vertex, area * np.repeat(step, 3)) / whole for step in steps.T]
    return np.stack(means, axis=1)[vertex].reshape(-1, 3, 2).astype(np.float32)


def _steps(surface: Surface) -> tuple[Array, Array]:
    """(triangles, 2): lengths of dP/dx and dP/dy over the image; (triangles,): areas in it, 0 where those are none."""
    p, q = surface.positions.astype(np.float64), surface.places
    d1, d2, e1, e2 = p[:, 1] - p[:, 0], p[:, 2] - p[:, 0], q[:, 1] - q[:, 0], q[:, 2] - q[:, 0]
    twice = e1[:, 0] * e2[:, 1] - e2[:, 0] * e1[:, 1]
    sound = (np.abs(twice) > 1e-18) & np.isfinite(p).all(axis=(1, 2)) & np.isfinite(q).all(axis=(1, 2))
    over = 1 / np.where(sound, np.abs(twice), 1)
    along_x = np.linalg.norm(e2[:, 1:] * d1 - e1[:, 1:] * d2, axis=1) * over
    along_y = np.linalg.norm(e1[:, :1] * d2 - e2[:, :1] * d1, axis=1) * over
    steps = np.stack([along_x, along_y], axis=1)
    return np.where(sound[:, None], steps, 0), np.where(sound, np.abs(twice), 0)
