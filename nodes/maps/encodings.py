"""Unit normals as texel codes, and back.

    unorm       -1..1 over the whole range of codes, in three channels: c = (n + 1) / 2 * most
    snorm       codes offset by half: 128 (32768) is exactly 0
    xy          two channels as unorm; z is rebuilt: sqrt(1 - x^2 - y^2)
    octahedral  two channels, the octahedron unfolded (Cigolle et al. 2014)
    float       three float32 channels, as they are

Green up stores y as it is; green down stores -y.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from tangentry.nodes.model import Sheet
from tangentry.pipeline.flow import Array

ENCODINGS = ("unorm", "snorm", "xy", "octahedral", "float")


def most(bits: int) -> int:
    """The largest code."""
    return (1 << bits) - 1


def encode_normals(normals: Array, encoding: str, bits: int, green: str) -> Array:
    """Codes, (height, width, 2 or 3) uint8 or uint16 (float32 for "float"), of (height, width, 3) float32 unit normals."""
    if green == "down":
        normals = normals * np.array([1, -1, 1], np.float32)
    if encoding == "float":
        return np.ascontiguousarray(normals, np.float32)
    top = most(bits)
    if encoding == "snorm":
        half = top // 2
        codes = np.rint(normals * half) + half + 1
    elif encoding == "octahedral":
        codes = np.rint((_unfold(normals) + 1) / 2 * top)
    else:
        codes = np.rint((normals[..., : 2 if encoding == "xy" else 3].astype(np.float64) + 1) / 2 * top)
    return np.clip(codes, 0, top).astype(np.uint8 if bits == 8 else np.uint16)


def decode_texels(texels: Array, encoding: str, green: str) -> Array:
    """Unit normals, (height, width, 3) float32, of codes; texels that hold no direction give (0, 0, 1)."""
    if encoding == "float" or texels.dtype.kind == "f":
        normals = texels[..., :3].astype(np.float32)
    else:
        top = np.iinfo(texels.dtype).max
        if encoding == "snorm":
            half = top // 2
            normals = (texels[..., :3].astype(np.float32) - (half + 1)) / half
        else:
            normals = texels[..., :3].astype(np.float32) * np.float32(2 / top) - 1
        if encoding == "octahedral":
            normals = _fold(normals[..., :2])
        elif encoding == "xy" or normals.shape[2] == 2:
            x, y = normals[..., 0], normals[..., 1]
            normals = np.stack([x, y, np.sqrt(np.maximum(0, 1 - x * x - y * y))], axis=-1)
    length = np.sqrt(np.einsum("...i,...i->...", normals, normals))[..., None]
    normals = np.where(length > 0, normals / np.where(length > 0, length, 1), np.array([0, 0, 1], np.float32)).astype(
        np.float32
    )
    return normals * np.array([1, -1, 1], np.float32) if green == "down" else normals


def _unfold(normals: Array) -> Array:
    """(..., 2) in -1..1: the octahedron's upper half as a diamond, the lower folded over its edges."""
    flat = normals[..., :2] / np.abs(normals).sum(axis=-1, keepdims=True)
    folded = (1 - np.abs(flat[..., ::-1])) * np.where(flat >= 0, 1, -1)
    out: Array = np.where(normals[..., 2:] < 0, folded, flat)
    return out


def _fold(flat: Array) -> Array:
    z = 1 - np.abs(flat).sum(axis=-1, keepdims=True)
    folded = (1 - np.abs(flat[..., ::-1])) * np.where(flat >= 0, 1, -1)
    return np.concatenate([np.where(z < 0, folded, flat), z], axis=-1).astype(np.float32)


def decoded(sheet: Sheet) -> Array:
    """(height, width, 3) float32: the unit normals that a sheet holds, y up."""
    return decode_texels(sheet.texels, sheet.encoding, sheet.green)


def encoded(sheet: Sheet, encoding: str, bits: int, green: str) -> Sheet:
    """A sheet's normals in another encoding. Codes that only change the side of green are flipped exactly."""
    wanted = np.uint8 if bits == 8 else np.uint16
    if (
        sheet.encoding == encoding == "unorm"
        and sheet.texels.dtype == wanted
        and "undecided" not in (sheet.green, green)
    ):
        texels = sheet.texels
        if sheet.green != green:
            texels = texels.copy()
            texels[..., 1] = most(bits) - texels[..., 1]
        return replace(sheet, texels=texels, green=green)
    return replace(sheet, texels=encode_normals(decoded(sheet), encoding, bits, green), encoding=encoding, green=green)


def as_gltf_texels(sheet: Sheet) -> Array:
    """Codes as glTF wants them: three unorm channels, green up (specification, 3.9.3)."""
    bits = 16 if sheet.texels.dtype == np.uint16 else 8
    return encoded(sheet, "unorm", bits, "up").texels[..., :3]
