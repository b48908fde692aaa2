"""Normal maps from one decoder's frames into another's, texel by texel."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numba import njit
from tangentry.nodes.geometry.cores import share_out, shared_zeros
from tangentry.nodes.geometry.texels import Owners, texel_owners
from tangentry.nodes.maps.decoders import OBJECT, WAYS, shade, unshade
from tangentry.nodes.maps.encodings import decode_texels, encode_normals
from tangentry.nodes.maps.gutter import nearest_owned
from tangentry.nodes.maps.surface import Surface
from tangentry.nodes.model import Sheet
from tangentry.pipeline.flow import Array

BAND = 256  # rows worked on at a time


def reencode_sheet(
    sheet: Sheet, made_in: Surface, made_for: str, wanted_in: Surface, wanted_for: str, gutter: int
) -> Sheet:
    """The sheet whose texels decode, in the wanted frames, to the normals that they decoded to in the old ones.

        wanted.texel = unshade(wanted frame, shade(old frame, old texel))

    made_for, wanted_for   names of decoders, see maps/decoders.py
    gutter                 texels outside all charts take the frames of the nearest texel inside that is no further than this

    Texels that neither surface covers stay as they are. Encoding and depth stay; two channels that would have to hold a
    negative z become three.
    """
    encoding = "unorm" if sheet.encoding == "xy" and wanted_for == "object" else sheet.encoding
    green = "" if wanted_for == "object" else sheet.green or "up"
    channels = _channels(sheet, encoding)
    out = shared_zeros((*sheet.texels.shape[:2], channels), sheet.texels.dtype)
    made_way, wanted_way = WAYS[made_for], WAYS[wanted_for]
    height = len(out)

    def work(band: int) -> None:
        rows = band * BAND, min(height, (band + 1) * BAND)
        old = sheet.texels[rows[0] : rows[1]]
        reach = 0 if made_way == wanted_way == OBJECT else gutter
        here = _owners(made_in, sheet, rows, reach)
        there = here if _same_layout(made_in, wanted_in) else _owners(wanted_in, sheet, rows, reach)
        new = np.empty((*old.shape[:2], 3), np.float32)
        normals = decode_texels(old, sheet.encoding, sheet.green)
        _reencode(normals, *here, made_in.frames, made_way, *there, wanted_in.frames, wanted_way, new)
        covered = (here.triangle >= 0) & (there.triangle >= 0)
        codes = encode_normals(new, encoding, 8 * sheet.texels.dtype.itemsize, green)
        out[rows[0] : rows[1], :, : codes.shape[2]] = codes
        if channels > codes.shape[2]:
            out[rows[0] : rows[1], :, codes.shape[2] :] = old[..., codes.shape[2] - channels :]
        if encoding == sheet.encoding and green == sheet.green:
            out[rows[0] : rows[1]][~covered] = old[~covered]

    share_out(work, -(-height // BAND))
    space = "object" if wanted_for == "object" else "tangent"
    return replace(sheet, texels=out, space=space, green=green, encoding=encoding)


def _channels(sheet: Sheet, encoding: str) -> int:
    own = sheet.texels.shape[2]
    return max(own, 3) if encoding != sheet.encoding else own


def _same_layout(a: Surface, b: Surface) -> bool:
    return a.places is b.places or np.array_equal(a.places, b.places)


def _owners(surface: Surface, sheet: Sheet, rows: tuple[int, int], reach: int) -> Owners:
    """Owners of a band of rows, those of the gutter included."""
    height, width = sheet.texels.shape[:2]
    first, last = max(0, rows[0] - reach), min(height, rows[1] + reach)
    found = texel_owners(surface.places, width, height, rows=(first, last), conservative=True)
    if reach:
        source = nearest_owned(found.triangle >= 0, reach)
        known = source >= 0
        found.triangle[known] = found.triangle.ravel()[source[known]]
        found.weights[known] = found.weights.reshape(-1, 2)[source[known]]
    cut = slice(rows[0] - first, rows[1] - first)
    return Owners(np.ascontiguousarray(found.triangle[cut]), np.ascontiguousarray(found.weights[cut]))


@njit(cache=True, nogil=True, error_model="numpy")
def _reencode(
    normals: Array,
    made_by: Array,
    made_at: Array,
    made_frames: Array,
    made_way: int,
    wanted_by: Array,
    wanted_at: Array,
    wanted_frames: Array,
    wanted_way: int,
    out: Array,
) -> None:
    for r in range(normals.shape[0]):
        for c in range(normals.shape[1]):
            a, b = made_by[r, c], wanted_by[r, c]
            x, y, z = np.float64(normals[r, c, 0]), np.float64(normals[r, c, 1]), np.float64(normals[r, c, 2])
            if a >= 0 and b >= 0:
                x, y, z = shade(made_frames[a], made_at[r, c, 0], made_at[r, c, 1], made_way, x, y, z)
                x, y, z = unshade(wanted_frames[b], wanted_at[r, c, 0], wanted_at[r, c, 1], wanted_way, x, y, z)
            out[r, c, 0], out[r, c, 1], out[r, c, 2] = x, y, z
