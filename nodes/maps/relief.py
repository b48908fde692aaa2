"""Heights to tangent-space normals, and back.

    normal = (-dh/dx, -dh/dy, 1) / length, x to the right, y up the image, heights and texels in one unit

Slopes by central differences, or by Scharr's 3 x 3 operator (Scharr 2000), which keeps directions better on fine detail.
Back by Frankot & Chellappa (1988): the integrable surface nearest to the slopes, through the Fourier transform.
"""

from __future__ import annotations

import numpy as np
from tangentry.pipeline.flow import Array

SCHARR = (3 / 16, 10 / 16, 3 / 16)


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
    """Heights of mean 0, (height, width) float32 in the unit of `texel`, of a tiling field of normals (Frankot & Chellappa 1988).

    Inverts the central differences of `heights_to_normals` with edge "wrap": exact to rounding but for the mean and
    the frequencies at which such differences vanish.
    """
    z = np.maximum(normals[..., 2], np.float32(1e-3))
    dx, dy = -normals[..., 0] / z, normals[..., 1] / z  # dy: down the image
    rows, columns = z.shape
    wx = np.sin(2 * np.pi * np.fft.rfftfreq(columns)) / texel[0]
    wy = np.sin(2 * np.pi * np.fft.fftfreq(rows))[:, None] / texel[1]
    power = wx * wx + wy * wy
    spectrum = -1j * (wx * np.fft.rfft2(dx) + wy * np.fft.rfft2(dy))
    small = power < 1e-12 * max(float(power.max()), 1e-300)
    spectrum = np.where(small, 0, spectrum / np.where(small, 1, power))
    return np.fft.irfft2(spectrum, s=(rows, columns)).astype(np.float32)
