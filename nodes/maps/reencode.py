"""Normal maps from one decoder's frames into another's, texel by texel."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from functools import cache
from typing import NamedTuple

import numpy as np
from numba import njit
from numpy.typing import DTypeLike
from tangentry.nodes.geometry.cores import share_out, shared_zeros
from tangentry.nodes.geometry.texels import Owners, texel_owners
from tangentry.nodes.maps.decoders import OBJECT, WAYS, scaled, shade, unshade
from tangentry.nodes.maps.encodings import decode_texels, encode_normals
from tangentry.nodes.maps.gutter import nearest_owned
from tangentry.nodes.maps.surface import Surface
from tangentry.nodes.model import Sheet
from tangentry.pipeline.flow import Array

BAND = 256  # rows worked on at a time


class Codes(NamedTuple):
    """How three channels hold a direction: component = code * scale + offset, y turned over where green points down."""

    scale: np.float32
    offset: np.float32
    turn: np.float32  # +1, or -1 where green points down
    top: np.float32  # the largest code; 0 where components are held as they are

    @classmethod
    def of(cls, scale: float, offset: float, turn: float, top: float) -> Codes:
        """In the precision that the kernel works in."""
        return cls(np.float32(scale), np.float32(offset), np.float32(turn), np.float32(top))


PLAIN = Codes.of(1, 0, 1, 0)


def reencode_sheet(
    sheet: Sheet, made_in: Surface, made_for: str, wanted_in: Surface, wanted_for: str, gutter: int
) -> Sheet:
    """The sheet whose texels decode, in the wanted frames, to the normals that they decoded to in the old ones.

        wanted.texel = unshade(wanted frame, shade(old frame, old texel))

    made_for, wanted_for   names of decoders, see maps/decoders.py
    gutter                 texels outside all charts take the frames of the nearest inside that is no further than this

    Texels that neither surface covers stay as they are. Encoding and depth stay; two channels that would have to hold a
    negative z become three.
    """
    encoding = "unorm" if sheet.encoding == "xy" and wanted_for == "object" else sheet.encoding
    green = "" if wanted_for == "object" else sheet.green or "up"
    height, width, channels = sheet.texels.shape
    out = shared_zeros(
        (height, width, max(channels, 3) if encoding != sheet.encoding else channels), sheet.texels.dtype
    )
    same = encoding == sheet.encoding and green == sheet.green
    ways = WAYS[made_for], WAYS[wanted_for]
    move = _mover(*ways)
    reach = 0 if ways == (OBJECT, OBJECT) else gutter

    def work(band: int) -> None:
        rows = band * BAND, min(height, (band + 1) * BAND)
        here = _owners(made_in, width, height, rows, reach)
        there = here if _same_layout(made_in, wanted_in) else _owners(wanted_in, width, height, rows, reach)
        old, new = sheet.texels[rows[0] : rows[1]], out[rows[0] : rows[1]]
        source, read = _readable(old, sheet.encoding, sheet.green)
        written = _codes(encoding, green, out.dtype)
        target = new if written is not None else np.empty((*old.shape[:2], 3), np.float32)
        new[..., 2:] = old[..., 2 : new.shape[2]] if same else 0
        sides = *here, made_in.frames, *there, wanted_in.frames
        move(source, *read, *sides, target, *(written or PLAIN), same and target is new and source is old)
        if target is not new:
            codes = encode_normals(target, encoding, 8 * out.itemsize, green)
            kept = ((here.triangle < 0) | (there.triangle < 0)) & same
            new[..., : codes.shape[2]] = np.where(kept[..., None], old[..., : codes.shape[2]], codes)

    share_out(work, -(-height // BAND))
    space = "object" if wanted_for == "object" else "tangent"
    return replace(sheet, texels=out, space=space, green=green, encoding=encoding)


def _codes(encoding: str, green: str, kind: DTypeLike) -> Codes | None:
    """How an encoding with three plain channels holds a direction; None for the others."""
    turn = -1.0 if green == "down" else 1.0
    if np.dtype(kind).kind == "f":
        return Codes.of(1, 0, turn, 0)
    top = float(np.iinfo(kind).max)
    half = top // 2
    return {"unorm": Codes.of(2 / top, -1, turn, top), "snorm": Codes.of(1 / half, -(half + 1) / half, turn, top)}.get(
        encoding
    )


def _readable(texels: Array, encoding: str, green: str) -> tuple[Array, Codes]:
    """Texels that the kernel can read as they are, or their decoded normals."""
    codes = _codes(encoding, green, texels.dtype)
    if codes is None or texels.shape[2] < 3:
        return decode_texels(texels, encoding, green), PLAIN
    return texels, codes


def _same_layout(a: Surface, b: Surface) -> bool:
    return a.places is b.places or np.array_equal(a.places, b.places)


def _owners(surface: Surface, width: int, height: int, rows: tuple[int, int], reach: int) -> Owners:
    """Owners of a band of rows, those of the gutter included."""
    first, last = max(0, rows[0] - reach), min(height, rows[1] + reach)
    found = texel_owners(surface.places, width, height, rows=(first, last), conservative=True)
    cut = slice(rows[0] - first, rows[1] - first)
    if reach and (found.triangle < 0).any():
        source = nearest_owned(found.triangle >= 0, reach)[cut]
        known = source >= 0
        found.triangle[cut][known] = found.triangle.ravel()[source[known]]
        found.weights[cut][known] = found.weights.reshape(-1, 2)[source[known]]
    return Owners(found.triangle[cut], found.weights[cut])


@cache
def _mover(made_way: int, wanted_way: int) -> Callable[..., None]:
    """The kernel that moves texels from one decoder's frames to another's: their ways are constants to it."""

    @njit(cache=True, nogil=True, error_model="numpy")
    def move(
        source: Array,
        scale: np.float32,
        offset: np.float32,
        turn: np.float32,
        _top: np.float32,
        made_by: Array,
        made_at: Array,
        made_frames: Array,
        wanted_by: Array,
        wanted_at: Array,
        wanted_frames: Array,
        target: Array,
        out_scale: np.float32,
        out_offset: np.float32,
        out_turn: np.float32,
        top: np.float32,
        keep: bool,
    ) -> None:
        """Move a band of texels; `keep`: those without owners keep their codes."""
        over, shift, least = np.float32(1) / out_scale, -out_offset / out_scale, np.float32(0)
        for r in range(source.shape[0]):
            for c in range(source.shape[1]):
                a, b = made_by[r, c], wanted_by[r, c]
                if (a < 0 or b < 0) and keep:
                    for k in range(3):
                        target[r, c, k] = source[r, c, k]
                    continue
                x = np.float32(source[r, c, 0]) * scale + offset
                y = (np.float32(source[r, c, 1]) * scale + offset) * turn
                z = np.float32(source[r, c, 2]) * scale + offset
                if a >= 0 and b >= 0:
                    x, y, z = shade(made_frames, a, made_at[r, c, 0], made_at[r, c, 1], made_way, x, y, z)
                    x, y, z = unshade(wanted_frames, b, wanted_at[r, c, 0], wanted_at[r, c, 1], wanted_way, x, y, z)
                else:
                    s = scaled(x, y, z)
                    x, y, z = x * s, y * s, z * s
                x, y, z = x * over + shift, y * out_turn * over + shift, z * over + shift
                if top > least:
                    x = min(max(np.rint(x), least), top)
                    y = min(max(np.rint(y), least), top)
                    z = min(max(np.rint(z), least), top)
                target[r, c, 0], target[r, c, 1], target[r, c, 2] = x, y, z

    kernel: Callable[..., None] = move
    return kernel
