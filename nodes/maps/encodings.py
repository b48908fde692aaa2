"""Unit normals as texel codes, and back.

    unorm            -1..1 over the whole range of codes, in three channels: c = (n + 1) / 2 * most
    snorm            codes offset by half: 128 (32768) is exactly 0
    xy               two channels as unorm; z is rebuilt: sqrt(1 - x^2 - y^2)
    octahedral       two channels, the octahedron unfolded, the nearest code of four (Cigolle et al. 2014)
    hemi-octahedral  two channels, its upper half alone over the whole square (likewise); z below 0 becomes 0
    float            three float32 channels, as they are

Green up stores y as it is; green down stores -y.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numba import njit
from tangentry.nodes.geometry.octahedron import octahedral_codes, octahedral_directions
from tangentry.nodes.model import Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

ENCODINGS = ("unorm", "snorm", "xy", "octahedral", "hemi-octahedral", "float")
TWO_CHANNELS = ("xy", "octahedral", "hemi-octahedral")
BAND = 256  # rows worked on at a time, an even number: every other row is diffused backward
DOWN = np.array([1, -1, 1], np.float32)
AHEAD = np.array([0, 0, 1], np.float32)


def most(bits: int) -> int:
    """The largest code."""
    return (1 << bits) - 1


def encode_normals(normals: Array, encoding: str, bits: int, green: str, lost: Array | None = None) -> Array:
    """Codes, (height, width, 2 or 3) uint8 or uint16, float32 for "float", of unit normals (height, width, 3) float32.

    lost   (width, 2 or 3) float64: what rounding lost above these rows and hands on to them, replaced by what is lost
           below them (Floyd & Steinberg 1976); None: plain rounding. Not for octahedral codes
    """
    if green == "down":
        normals = normals * DOWN
    if encoding == "float":
        return np.ascontiguousarray(normals, np.float32)
    top = most(bits)
    if encoding == "octahedral":
        codes = octahedral_codes(normals.reshape(-1, 3), top).reshape(*normals.shape[:2], 2)
    else:
        components = _hemi_octahedral(normals) if encoding == "hemi-octahedral" else normals
        components = components[..., : channels_of(encoding)].astype(np.float64)
        codes = components * (top // 2) + top // 2 + 1 if encoding == "snorm" else (components + 1) / 2 * top
        if lost is not None:
            _diffuse(codes, float(top), lost)
    return np.clip(np.rint(codes), 0, top).astype(np.uint8 if bits == 8 else np.uint16)


def _hemi_octahedral(normals: Array) -> Array:
    """(height, width, 2), -1..1: the diamond |x| + |y| <= 1 turned by 45 degrees to fill the square."""
    total = np.abs(normals[..., 0]) + np.abs(normals[..., 1]) + np.maximum(normals[..., 2], 0)
    x, y = (normals[..., k] / np.where(total > 0, total, 1) for k in (0, 1))
    return np.stack([x + y, x - y], axis=-1)


def channels_of(encoding: str) -> int:
    """How many channels an encoding takes."""
    return 2 if encoding in TWO_CHANNELS else 3


@njit(cache=True, nogil=True)
def _diffuse(codes: Array, top: float, lost: Array) -> None:
    """Round (height, width, channels) in place, every other row backward."""
    height, width, channels = codes.shape
    below = np.zeros_like(lost)
    for r in range(height):
        step = 1 if r % 2 == 0 else -1
        for channel in range(channels):
            ahead = 0.0
            for k in range(width):
                c = k if step == 1 else width - 1 - k
                wanted = codes[r, c, channel] + lost[c, channel] + ahead
                given = min(max(np.rint(wanted), 0.0), top)
                codes[r, c, channel] = given
                error = wanted - given
                ahead = error * 7 / 16
                below[c, channel] += error * 5 / 16
                if 0 <= c - step < width:
                    below[c - step, channel] += error * 3 / 16
                if 0 <= c + step < width:
                    below[c + step, channel] += error / 16
        lost[:] = below
        below[:] = 0


def decode_texels(texels: Array, encoding: str, green: str) -> Array:
    """Unit normals, (height, width, 3) float32, of codes; texels that hold no direction give (0, 0, 1)."""
    if encoding == "float" or texels.dtype.kind == "f":
        normals = texels[..., :3].astype(np.float32)
    else:
        normals = _directions(texels, encoding, int(np.iinfo(texels.dtype).max))
    length = np.sqrt(np.einsum("...i,...i->...", normals, normals))[..., None]
    normals = np.where(length > 0, normals / np.where(length > 0, length, 1), AHEAD).astype(np.float32)
    return normals * DOWN if green == "down" else normals


def _directions(texels: Array, encoding: str, top: int) -> Array:
    """(height, width, 3) float32, not normalised."""
    if encoding == "octahedral":
        codes = texels[..., :2].astype(np.int32).reshape(-1, 2)
        return octahedral_directions(codes, top).reshape(*texels.shape[:2], 3)
    if encoding == "snorm":
        half = top // 2
        return (texels[..., :3].astype(np.float32) - np.float32(half + 1)) / np.float32(half)
    normals = texels[..., :3].astype(np.float32) * np.float32(2 / top) - 1
    if encoding == "hemi-octahedral":
        diamond = np.stack([normals[..., 0] + normals[..., 1], normals[..., 0] - normals[..., 1]], axis=-1) / 2
        return np.concatenate([diamond, 1 - np.abs(diamond).sum(axis=-1, keepdims=True)], axis=-1)
    if encoding == "xy" or normals.shape[2] == 2:
        x, y = normals[..., 0], normals[..., 1]
        return np.stack([x, y, np.sqrt(np.maximum(0, 1 - x * x - y * y))], axis=-1)
    return normals


def decoded(sheet: Sheet) -> Array:
    """(height, width, 3) float32: the unit normals that a sheet holds, y up."""
    out = np.empty((*sheet.texels.shape[:2], 3), np.float32)
    for rows in _bands(sheet):
        out[rows] = decode_texels(sheet.texels[rows], sheet.encoding, sheet.green)
    return out


def encoded(sheet: Sheet, encoding: str, bits: int, green: str, diffuse: bool = False) -> Sheet:
    """A sheet's normals in another encoding. Codes that only change the side of green are flipped exactly.

    Besides the two sheets, memory is taken for a band of rows only.
    """
    kind = np.float32 if encoding == "float" else np.uint8 if bits == 8 else np.uint16
    if sheet.encoding == encoding == "unorm" and sheet.texels.dtype == kind and "undecided" not in (sheet.green, green):
        texels = sheet.texels
        if sheet.green != green:
            texels = texels.copy()
            texels[..., 1] = most(bits) - texels[..., 1]
        return replace(sheet, texels=texels, green=green)
    height, width = sheet.texels.shape[:2]
    out = np.empty((height, width, channels_of(encoding)), kind)
    lost = np.zeros((width, channels_of(encoding))) if diffuse else None
    for rows in _bands(sheet):
        normals = decode_texels(sheet.texels[rows], sheet.encoding, sheet.green)
        out[rows] = encode_normals(normals, encoding, bits, green, lost)
    return replace(sheet, texels=out, encoding=encoding, green=green)


def _bands(sheet: Sheet) -> list[slice]:
    return [slice(first, first + BAND) for first in range(0, len(sheet.texels), BAND)]


def as_gltf_texels(sheet: Sheet, file: str, name: str) -> Array:
    """Codes as glTF wants them: three unorm channels, green up (specification, 3.9.3).

    file  the asset that takes the map, and `name` the map's, for messages

    Raises InputError where the sheet holds other than tangent-space normals, or nobody knows which way green points.
    """
    place = f"map {sheet.name or name}"
    if sheet.holds != "normal" or sheet.space not in ("tangent", ""):
        found = f"it holds {sheet.space} {sheet.holds}, not tangent-space normals"
        raise InputError(file, place, found, "turn it into them first: `relief`, `reencode`")
    if sheet.green not in ("up", "down"):
        found = f"which way its green points is {sheet.green or 'not said'}"
        raise InputError(file, place, found, "say it where the map comes in: `texture` with green: up or down")
    bits = 16 if sheet.texels.dtype == np.uint16 else 8
    return encoded(sheet, "unorm", bits, "up").texels[..., :3]
