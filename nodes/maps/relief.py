"""Heights to tangent-space normals, and back.

    normal = (-dh/dx, -dh/dy, 1) / length, x to the right, y up the image, heights and texels in one unit

Slopes by central differences, or by a 3 x 3 operator (Scharr 2000) that keeps directions better on fine detail.
Back by Frankot & Chellappa (1988): the integrable surface nearest to the slopes, through the Fourier transform.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.geometry.cores import core_count
from tangentry.pipeline.flow import Array

SCHARR = (3 / 16, 10 / 16, 3 / 16)
LEAST = np.float32(1e-3)  # a normal that leans further has no slope to speak of


def heights_to_normals(heights: Array, texel: tuple[float, float], edge: str, slope: str) -> Array:
    """Unit normals, (height, width, 3) float32, y up.

    heights   (height, width) float32, in the unit of `texel`
    texel     width and height of a texel
    edge      "wrap": the image tiles; "clamp": it ends at its border
    slope     "central" or "scharr"
    """
    padded = np.pad(heights.astype(np.float32), 1, mode="wrap" if edge == "wrap" else "edge")
    across = (padded[:, 2:] - padded[:, :-2]) / np.float32(2 * texel[0])
    down = (padded[2:, :] - padded[:-2, :]) / np.float32(2 * texel[1])
    if edge == "clamp":  # one-sided at the border: half the distance
        across[:, [0, -1]] *= 2
        down[[0, -1], :] *= 2
    if slope == "scharr":
        dx = sum(np.float32(w) * across[k : k + len(heights)] for k, w in enumerate(SCHARR))
        dy = sum(np.float32(w) * down[:, k : k + heights.shape[1]] for k, w in enumerate(SCHARR))
    else:
        dx, dy = across[1:-1], down[:, 1:-1]
    normals = np.stack([-dx, dy, np.ones_like(dx)], axis=-1)
    normals /= np.sqrt(np.einsum("ijk,ijk->ij", normals, normals))[..., None]
    return normals.astype(np.float32)


def normals_to_heights(normals: Array, texel: tuple[float, float]) -> Array:
    """Heights of mean 0, (height, width) float32 in the unit of `texel`, of a field of normals that tiles.

    Frankot & Chellappa (1988), for central differences: the inverse of `heights_to_normals` with edge "wrap", exact to
    rounding but for the mean and the frequencies at which such differences vanish.
    """
    from scipy import fft

    rows, columns = normals.shape[:2]
    across, down = np.empty((rows, columns), np.float32), np.empty((rows, columns), np.float32)
    _slopes(np.ascontiguousarray(normals, np.float32), across, down)
    cores = core_count()
    spectrum, other = fft.rfft2(across, workers=cores), fft.rfft2(down, workers=cores)
    wx = np.sin(2 * np.pi * np.fft.rfftfreq(columns)) / texel[0]
    wy = np.sin(2 * np.pi * np.fft.fftfreq(rows)) / texel[1]
    _integrate(spectrum, other, wx, wy, 1e-12 * max(float((wx**2).max() + (wy**2).max()), 1e-300))
    return np.asarray(fft.irfft2(spectrum, s=(rows, columns), workers=cores, overwrite_x=True), np.float32)


@njit(cache=True, nogil=True)
def _slopes(normals: Array, across: Array, down: Array) -> None:
    """dh/dx, and dh/dy down the image."""
    for r in range(normals.shape[0]):
        for c in range(normals.shape[1]):
            over = np.float32(1) / max(normals[r, c, 2], LEAST)
            across[r, c], down[r, c] = -normals[r, c, 0] * over, normals[r, c, 1] * over


@njit(cache=True, nogil=True)
def _integrate(spectrum: Array, other: Array, wx: Array, wy: Array, least: float) -> None:
    """-i (wx P + wy Q) / (wx^2 + wy^2), into P; 0 where the differences vanish."""
    for r in range(spectrum.shape[0]):
        for c in range(spectrum.shape[1]):
            power = wx[c] * wx[c] + wy[r] * wy[r]
            if power < least:
                spectrum[r, c] = 0
                continue
            a, b = wx[c] / power, wy[r] / power
            p, q = spectrum[r, c], other[r, c]
            spectrum[r, c] = complex(a * p.imag + b * q.imag, -a * p.real - b * q.real)
