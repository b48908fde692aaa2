"""Heights to tangent-space normals, and back.

    normal = (-dh/dx, -dh/dy, 1) / length, x to the right, y up the image, heights and texels in one unit

Slopes by central differences, or by a 3 x 3 operator (Scharr 2000) that keeps directions better on fine detail.
Back by Frankot & Chellappa (1988): the integrable surface nearest to the slopes, through the Fourier transform.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numba import njit
from tangentry.nodes.geometry.cores import core_count, in_threads
from tangentry.pipeline.flow import Array

Texel = tuple[float, float] | tuple[Array, Array]

SCHARR = (3 / 16, 10 / 16, 3 / 16)
LEAST = np.float32(1e-3)  # a normal that leans further has no slope to speak of


def heights_to_normals(heights: Array, texel: Texel, edge: str, slope: str) -> Array:
    """Unit normals, (height, width, 3) float32, y up.

    heights   (height, width) float32, in the unit of `texel`
    texel     width and height of a texel; or of each, (height, width)
    edge      "wrap": the image tiles; "clamp": it ends at its border
    slope     "central" or "scharr"
    """
    padded = np.pad(heights.astype(np.float32), 1, mode="wrap" if edge == "wrap" else "edge")
    across = (padded[:, 2:] - padded[:, :-2]) / 2
    down = (padded[2:, :] - padded[:-2, :]) / 2
    if edge == "clamp":  # one-sided at the border: half the distance
        across[:, [0, -1]] *= 2
        down[[0, -1], :] *= 2
    if slope == "scharr":
        dx = sum(np.float32(w) * across[k : k + len(heights)] for k, w in enumerate(SCHARR))
        dy = sum(np.float32(w) * down[:, k : k + heights.shape[1]] for k, w in enumerate(SCHARR))
    else:
        dx, dy = across[1:-1], down[:, 1:-1]
    normals = np.stack([-dx / np.float32(texel[0]), dy / np.float32(texel[1]), np.ones_like(dx)], axis=-1)
    normals /= np.sqrt(np.einsum("ijk,ijk->ij", normals, normals))[..., None]
    return normals.astype(np.float32)


def normals_to_heights(normals: Array, texel: Texel) -> Array:
    """Heights of mean 0, (height, width) float32 in the unit of `texel`, of a field of normals that tiles.

    Frankot & Chellappa (1988), for central differences: the inverse of `heights_to_normals` with edge "wrap", exact to
    rounding but for the mean and the frequencies at which such differences vanish.
    """
    from scipy import fft

    shape, cores = normals.shape[:2], core_count()
    normals = np.ascontiguousarray(normals, np.float32)
    slopes = np.empty(shape, np.float32)  # of one axis, then of the other: less memory to fetch
    mean = float(np.mean(texel[0])), float(np.mean(texel[1]))

    def transformed(axis: int) -> Array:
        _in_bands(lambda rows: _slopes(normals[rows], axis, slopes[rows]), shape[0])
        size = texel[axis]
        if isinstance(size, np.ndarray):  # as slopes would be were all texels of the mean size
            np.multiply(slopes, size / mean[axis], out=slopes)
        return np.asarray(fft.rfft2(slopes, workers=cores))

    spectrum, other = transformed(0), transformed(1)
    wx = (np.sin(2 * np.pi * np.fft.rfftfreq(shape[1])) / mean[0]).astype(np.float32)
    wy = (np.sin(2 * np.pi * np.fft.fftfreq(shape[0])) / mean[1]).astype(np.float32)
    least = np.float32(1e-12) * max((wx**2).max() + (wy**2).max(), np.float32(1e-30))
    _in_bands(lambda rows: _integrate(spectrum[rows], other[rows], wx, wy[rows], least), shape[0])
    return np.asarray(fft.irfft2(spectrum, s=shape, workers=cores, overwrite_x=True), np.float32)


def _in_bands(work: Callable[[slice], None], rows: int) -> None:
    """The work on a band of rows for each core."""
    bands = min(core_count(), rows)
    in_threads(lambda k: work(slice(rows * k // bands, rows * (k + 1) // bands)), bands)


@njit(cache=True, nogil=True)
def _slopes(normals: Array, axis: int, slopes: Array) -> None:
    """dh/dx for axis 0, dh/dy down the image for 1."""
    sign = np.float32(-1 if axis == 0 else 1)
    for r in range(normals.shape[0]):
        for c in range(normals.shape[1]):
            slopes[r, c] = sign * normals[r, c, axis] / max(normals[r, c, 2], LEAST)


@njit(cache=True, nogil=True)
def _integrate(spectrum: Array, other: Array, wx: Array, wy: Array, least: float) -> None:
    """-i (wx P + wy Q) / (wx^2 + wy^2), into P; 0 where the differences vanish."""
    for r in range(spectrum.shape[0]):
        for c in range(spectrum.shape[1]):
            power = wx[c] * wx[c] + wy[r] * wy[r]
            over = np.float32(1) / power if power > least else np.float32(0)
            a, b = wx[c] * over, wy[r] * over
            p, q = spectrum[r, c], other[r, c]
            spectrum[r, c] = complex(a * p.imag + b * q.imag, -a * p.real - b * q.real)
