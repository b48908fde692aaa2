"""A detail normal over a base normal, by the formulas that Barré-Brisebois & Hill compare ("Blending in Detail", 2012).

    reoriented    the detail turned by the shortest turn from (0, 0, 1) to the base: nothing is flattened
    derivatives   the slopes added: exact for heights that are added
    whiteout      x and y added, z multiplied
    udn           x and y added, z of the base
    linear        added
    overlay       each channel's code darkened or lightened by the other's

All are normalised. b and d are unit normals with y up.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from tangentry.pipeline.flow import Array


def blend(base: Array, detail: Array, method: str) -> Array:
    """Unit normals, (height, width, 3) float32, of two of that shape."""
    out = METHODS[method](base, detail)
    length = np.sqrt(np.einsum("...i,...i->...", out, out))[..., None]
    unit: Array = (out / np.where(length > 0, length, 1)).astype(np.float32)
    return unit


def _reoriented(b: Array, d: Array) -> Array:
    t = b + np.array([0, 0, 1], np.float32)
    u = d * np.array([-1, -1, 1], np.float32)
    tz = np.where(np.abs(t[..., 2:]) > 1e-6, t[..., 2:], 1e-6)
    return np.asarray(t * np.einsum("...i,...i->...", t, u)[..., None] / tz - u)


def _derivatives(b: Array, d: Array) -> Array:
    return np.concatenate([b[..., :2] * d[..., 2:] + d[..., :2] * b[..., 2:], b[..., 2:] * d[..., 2:]], axis=-1)


def _whiteout(b: Array, d: Array) -> Array:
    return np.concatenate([b[..., :2] + d[..., :2], b[..., 2:] * d[..., 2:]], axis=-1)


def _udn(b: Array, d: Array) -> Array:
    return np.concatenate([b[..., :2] + d[..., :2], b[..., 2:]], axis=-1)


def _linear(b: Array, d: Array) -> Array:
    return np.asarray(b + d)


def _overlay(b: Array, d: Array) -> Array:
    p, q = (b + 1) / 2, (d + 1) / 2
    return np.where(p < 0.5, 2 * p * q, 1 - 2 * (1 - p) * (1 - q)) * 2 - 1


METHODS: dict[str, Callable[[Array, Array], Array]] = {
    "reoriented": _reoriented,
    "derivatives": _derivatives,
    "whiteout": _whiteout,
    "udn": _udn,
    "linear": _linear,
    "overlay": _overlay,
}
