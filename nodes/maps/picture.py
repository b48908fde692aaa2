"""A mesh as a picture, lit on the CPU: one ray a sample from a camera without perspective."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.geometry.rays import RayScene
from tangentry.nodes.maps.decoders import WAYS, scaled, shade
from tangentry.nodes.maps.encodings import decode_texels
from tangentry.nodes.model import Sheet
from tangentry.pipeline.flow import Array

AT_ONCE = 1 << 19  # samples worked on together
MARGIN = 1.05  # the mesh's size in the picture, with what is left free around it
GROUND = 0.16  # brightness behind the mesh
LIGHT = np.array([-0.45, 0.6, 0.66])  # towards the light, in the camera's axes: right, up, towards the eye
AMBIENT, DIFFUSE, GLOSS, SHARPNESS = 0.08, 0.72, 0.25, 40.0


class Mapped(NamedTuple):
    """Triangles to draw."""

    positions: Array  # (triangles, 3, 3) float32
    frames: Array  # (triangles, 3, 10) float32: see Surface.frames
    places: Array  # (triangles, 3, 2) float64: see Surface.places
    sheet: Array  # (triangles,) int32: which sheet a triangle has, -1: none
    sheets: list[Sheet]
    strengths: list[float]  # factor on x and y of each sheet's normals


def camera(turn: float, rise: float) -> Array:
    """(3, 3) float64: the camera's right, up and towards-the-eye axes, y being up in the world.

    turn   degrees around y from looking along -z, to the right
    rise   degrees above the horizon
    """
    a, b = np.radians(turn), np.radians(rise)
    eye = np.array([np.sin(a) * np.cos(b), np.sin(b), np.cos(a) * np.cos(b)])
    right = np.array([np.cos(a), 0.0, -np.sin(a)])
    return np.stack([right, np.cross(eye, right), eye])


def draw(mapped: Mapped, axes: Array, size: int, fine: int, decoder: str, mapped_normals: bool) -> Array:
    """(size, size, 3) uint8: the mesh, its map on or off.

    axes   see `camera`
    fine   samples along each side of a pixel
    """
    scene = RayScene(mapped.positions)
    sound = mapped.positions[np.isfinite(mapped.positions).all(axis=(1, 2))].reshape(-1, 3).astype(np.float64)
    seen = sound @ axes.T if len(sound) else np.zeros((1, 3))
    low, high = seen.min(axis=0), seen.max(axis=0)
    middle, half = (low + high) / 2, max(float((high - low)[:2].max()) / 2 * MARGIN, 1e-12)
    across = (np.arange(size * fine) + 0.5) / (size * fine) * 2 - 1
    light: Array = np.zeros((size * fine, size * fine))
    rows = max(1, AT_ONCE // (size * fine))
    start, deep = high[2] + half, float(high[2] - low[2]) + 2 * half
    for first in range(0, size * fine, rows):
        y = -across[first : first + rows]
        x, y = (grid.ravel() for grid in np.meshgrid(across, y))
        local = np.stack([middle[0] + half * x, middle[1] + half * y, np.full(len(x), start)], axis=1)
        light[first : first + rows] = _lit(scene, mapped, axes, local @ axes, deep, decoder, mapped_normals).reshape(
            -1, size * fine
        )
    mean = light.reshape(size, fine, size, fine).mean(axis=(1, 3))
    return np.repeat(_as_srgb(mean)[..., None], 3, axis=2)


def _lit(
    scene: RayScene, mapped: Mapped, axes: Array, origins: Array, deep: float, decoder: str, mapped_normals: bool
) -> Array:
    """(n,) float64: how bright each sample is, linear."""
    eye = axes[2]
    count = len(origins)
    hits = scene.nearest(origins, np.tile(-eye, (count, 1)).astype(np.float32), np.full(count, deep, np.float32))
    texels = np.tile(np.array([0, 0, 1], np.float32), (count, 1))
    if mapped_normals:
        for number, (sheet, strength) in enumerate(zip(mapped.sheets, mapped.strengths, strict=True)):
            own = np.nonzero((hits.triangle >= 0) & (mapped.sheet[hits.triangle] == number))[0]
            texels[own] = _sampled(sheet, _places(mapped.places, hits.triangle[own], hits.weights[own]), strength)
    objects = np.array([*(sheet.space == "object" for sheet in mapped.sheets), False])
    ways = np.where(objects[mapped.sheet] & mapped_normals, WAYS["object"], WAYS[decoder])
    light = np.empty(count)
    towards = (LIGHT / np.linalg.norm(LIGHT)) @ axes
    _shine(hits.triangle, hits.weights, mapped.frames, mapped.sheet, ways, texels, towards, eye, light)
    return light


def _places(places: Array, triangle: Array, weights: Array) -> Array:
    w = np.concatenate([1 - weights.sum(axis=1, keepdims=True), weights], axis=1).astype(np.float64)
    found: Array = np.einsum("nk,nkx->nx", w, places[triangle])
    return found


def _sampled(sheet: Sheet, places: Array, strength: float) -> Array:
    """(n, 3) float32 unit normals at places in a sheet: the four texels around each, by nearness."""
    height, width = sheet.texels.shape[:2]
    at = places * (width, height) - 0.5
    low = np.floor(at).astype(np.int64)
    share = (at - low).astype(np.float32)
    total = np.zeros((len(at), 3), np.float32)
    for down in (0, 1):
        for along in (0, 1):
            texels = sheet.texels[(low[:, 1] + down) % height, (low[:, 0] + along) % width]
            near = np.abs(1 - along - share[:, 0]) * np.abs(1 - down - share[:, 1])
            total += decode_texels(texels[None], sheet.encoding, sheet.green)[0] * near[:, None]
    total[:, :2] *= strength
    length = np.sqrt(np.einsum("ij,ij->i", total, total))[:, None]
    out: Array = total / np.where(length > 0, length, 1)
    return out


@njit(cache=True, nogil=True, error_model="numpy")
def _shine(
    triangle: Array,
    weights: Array,
    frames: Array,
    sheet: Array,
    ways: Array,
    texels: Array,
    towards: Array,
    eye: Array,
    light: Array,
) -> None:
    """Lambert's cosine and a highlight about the halfway vector (Blinn 1977)."""
    hx, hy, hz = towards[0] + eye[0], towards[1] + eye[1], towards[2] + eye[2]
    over = scaled(hx, hy, hz)
    hx, hy, hz = hx * over, hy * over, hz * over
    for i in range(len(triangle)):
        t = triangle[i]
        if t < 0:
            light[i] = GROUND
            continue
        w1, w2 = np.float64(weights[i, 0]), np.float64(weights[i, 1])
        x, y, z = 0.0, 0.0, 0.0
        if sheet[t] >= 0:
            x, y, z = shade(frames, t, w1, w2, ways[t], texels[i, 0], texels[i, 1], texels[i, 2])
        if x == 0 and y == 0 and z == 0:  # nothing mapped, or a frame that defines nothing
            w0 = 1 - w1 - w2
            x = w0 * frames[t, 0, 0] + w1 * frames[t, 1, 0] + w2 * frames[t, 2, 0]
            y = w0 * frames[t, 0, 1] + w1 * frames[t, 1, 1] + w2 * frames[t, 2, 1]
            z = w0 * frames[t, 0, 2] + w1 * frames[t, 1, 2] + w2 * frames[t, 2, 2]
            s = scaled(x, y, z)
            x, y, z = x * s, y * s, z * s
        facing = max(0.0, x * towards[0] + y * towards[1] + z * towards[2])
        gloss = max(0.0, x * hx + y * hy + z * hz) ** SHARPNESS if facing > 0 else 0.0
        light[i] = AMBIENT + DIFFUSE * facing + GLOSS * gloss


def _as_srgb(linear: Array) -> Array:
    """Codes of linear brightness (IEC 61966-2-1)."""
    x = np.clip(linear, 0, 1)
    return np.rint(255 * np.where(x <= 0.0031308, 12.92 * x, 1.055 * x ** (1 / 2.4) - 0.055)).astype(np.uint8)
