"""Texels at other sizes: halves as means over areas, and repeats."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from tangentry.pipeline.flow import Array

BAND = 256  # rows worked on at a time; an even number


def halved(values: Array) -> Array:
    """(max(1, height // 2), max(1, width // 2), channels) float64: means over equal areas, whatever the sizes."""
    return _means(_means(values.astype(np.float64), 0), 1)


def _means(values: Array, axis: int) -> Array:
    """Half as many along an axis, each the mean over its share of it; texels that two share count to both in part."""
    values = np.moveaxis(values, axis, 0)
    size = len(values)
    count = max(1, size // 2)
    if size == 2 * count:
        means = values.reshape(count, 2, *values.shape[1:]).mean(axis=1)
    else:
        ends = np.linspace(0, size, count + 1)
        so_far = np.concatenate([np.zeros((1, *values.shape[1:])), np.cumsum(values, axis=0)])
        whole = np.minimum(ends.astype(int), size - 1)
        part = (ends - whole).reshape(-1, *[1] * (values.ndim - 1))
        at_ends = so_far[whole] + part * values[whole]
        means = np.diff(at_ends, axis=0) * count / size
    return np.moveaxis(means, 0, axis)


def halved_in_bands(height: int, of: Callable[[slice], Array]) -> Array:
    """`halved` of an image that is given by its rows; only a band of it is held at a time where its height is even."""
    if height % 2:
        return halved(of(slice(0, height)))
    return np.concatenate([halved(of(slice(first, first + BAND))) for first in range(0, height, BAND)])


def repeated(values: Array, height: int, width: int, tiling: tuple[float, float], rows: slice) -> Array:
    """(rows, width, channels) float32 of an image that repeats so many times along x and y, sampled bilinearly.

    height, width   of the whole, of which some rows are wanted
    """
    down = ((np.arange(height)[rows] + 0.5) / height * tiling[1] * len(values)) - 0.5
    columns = ((np.arange(width) + 0.5) / width * tiling[0] * values.shape[1]) - 0.5
    return _between(_between(values, down, 0).astype(np.float32), columns, 1)


def _between(values: Array, places: Array, axis: int) -> Array:
    low = np.floor(places).astype(int)
    share = (places - low).astype(np.float32).reshape([-1 if k == axis else 1 for k in range(values.ndim)])
    size = values.shape[axis]
    before, after = (np.take(values, (low + k) % size, axis=axis) for k in (0, 1))
    return np.asarray(before * (1 - share) + after * share)
