"""What a bake takes from the detailed mesh where a ray met it."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import numpy as np
from numba import njit
from tangentry.nodes.geometry.rays import Hits, RayScene
from tangentry.nodes.maps.decoders import scaled, unshade
from tangentry.pipeline.flow import Array

SKY_RAYS = 64  # for each texel's ambient occlusion
AT_ONCE = 1 << 14  # texels whose sky is looked at together
CLEAR_OF = 1e-4  # share of a scene's size by which sky rays start clear of the surface


@njit(cache=True, nogil=True, error_model="numpy")
def normals_at(triangle: Array, weights: Array, corner_normals: Array, out: Array) -> None:
    """The detail's interpolated unit normals, out (n, 3) float32; zero where nothing was met."""
    for i in range(len(triangle)):
        t = triangle[i]
        if t < 0:
            out[i, 0], out[i, 1], out[i, 2] = 0, 0, 0
            continue
        w1, w2 = weights[i, 0], weights[i, 1]
        w0 = np.float32(1) - w1 - w2
        x = w0 * corner_normals[t, 0, 0] + w1 * corner_normals[t, 1, 0] + w2 * corner_normals[t, 2, 0]
        y = w0 * corner_normals[t, 0, 1] + w1 * corner_normals[t, 1, 1] + w2 * corner_normals[t, 2, 1]
        z = w0 * corner_normals[t, 0, 2] + w1 * corner_normals[t, 1, 2] + w2 * corner_normals[t, 2, 2]
        s = scaled(x, y, z)
        out[i, 0], out[i, 1], out[i, 2] = x * s, y * s, z * s


@cache
def into_frames(way: int) -> Callable[[Array, Array, Array, Array, Array], None]:
    """The kernel `into(chosen, triangle, weights, frames, normals)` for a decoder: its way is a constant to it.

    It turns normals (n, 3) float32 of the mesh's own space into texels of the target's frames, in place; zero stays
    zero.

    chosen              (n,) int64: flat indices of texels
    triangle, weights   of texels, flat: see Owners
    frames              (triangles, 3, 10) float32: see Surface.frames
    """

    @njit(cache=True, nogil=True, error_model="numpy")
    def into(chosen: Array, triangle: Array, weights: Array, frames: Array, normals: Array) -> None:
        for i in range(len(chosen)):
            x, y, z = normals[i, 0], normals[i, 1], normals[i, 2]
            if x == 0 and y == 0 and z == 0:
                continue
            at = chosen[i]
            x, y, z = unshade(frames, triangle[at], weights[at, 0], weights[at, 1], way, x, y, z)
            normals[i, 0], normals[i, 1], normals[i, 2] = x, y, z

    kernel: Callable[[Array, Array, Array, Array, Array], None] = into
    return kernel


def openness(scene: RayScene, origins: Array, directions: Array, hits: Hits, normals: Array, chosen: Array) -> Array:
    """(n,) float32: which share of the sky each place that was met sees, by cosine (ambient occlusion; 1: all of it).

    origins, directions, hits   of the rays that met the places
    normals                     (n, 3) float32 of the detail there
    chosen                      (n,) int64: numbers of the texels; they turn the pattern, so that neighbours differ
    """
    open_share = np.ones(len(origins), np.float32)
    met = np.nonzero(hits.triangle >= 0)[0]
    clear = CLEAR_OF * scene.size
    for start in range(0, len(met), AT_ONCE):
        rows = met[start : start + AT_ONCE]
        places = origins[rows] + directions[rows] * hits.distance[rows, None] + normals[rows] * clear
        sky = np.empty((len(rows), SKY_RAYS, 3), np.float32)
        _sky(normals[rows], chosen[rows], sky)
        starts = np.repeat(places, SKY_RAYS, axis=0)
        blocked = scene.blocked(starts, sky.reshape(-1, 3), np.full(len(starts), 2 * scene.size, np.float32))
        open_share[rows] = 1 - blocked.reshape(-1, SKY_RAYS).mean(axis=1)
    return open_share


@njit(cache=True, nogil=True, error_model="numpy")
def _sky(normals: Array, numbers: Array, sky: Array) -> None:
    """Directions spread by cosine about each normal: a Hammersley set on the disc, turned by the texel's number."""
    count = sky.shape[1]
    for i in range(len(normals)):
        x, y, z = np.float64(normals[i, 0]), np.float64(normals[i, 1]), np.float64(normals[i, 2])
        sign = 1.0 if z >= 0 else -1.0
        a = -1 / (sign + z)  # an axis across the normal (Duff et al. 2017, listing 3)
        tx, ty, tz = 1 + sign * x * x * a, sign * x * y * a, -sign * x
        bx, by, bz = x * y * a, sign + y * y * a, -y
        shift = (np.uint32(numbers[i]) * np.uint32(2654435769)) / 4294967296.0
        for k in range(count):
            radius = np.sqrt((k + 0.5) / count)
            bits, fraction, half = k, shift, 0.5
            while bits:
                fraction += half * (bits & 1)
                bits >>= 1
                half *= 0.5
            turn = 2 * np.pi * fraction
            p, q, r = radius * np.cos(turn), radius * np.sin(turn), np.sqrt(1 - radius * radius)
            sky[i, k, 0] = p * tx + q * bx + r * x
            sky[i, k, 1] = p * ty + q * by + r * y
            sky[i, k, 2] = p * tz + q * bz + r * z
