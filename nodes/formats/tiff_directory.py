"""What the first directory of a TIFF file says of its texels, and what its decoder leaves undone."""

from __future__ import annotations

import struct
from typing import NamedTuple

import numpy as np
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

FORMS = {1: "B", 3: "H", 4: "I", 16: "Q"}  # types of whole numbers (TIFF 6.0, section 2; 16 is BigTIFF's)
WIDTH, HEIGHT, BITS, COMPRESSION, KIND, SAMPLES, COLOURS, PROFILE = 256, 257, 258, 259, 262, 277, 320, 34675
WHITE_IS_ZERO, PALETTE = 0, 3
PLAIN = (WHITE_IS_ZERO, 1, 2, PALETTE, 6)  # 1: black is zero; 2: RGB; 6: YCbCr, which the decoder turns into RGB
LOSSY = (6, 7)  # JPEG
MOST_COLOURS = 3 << 16


class TiffDirectory(NamedTuple):
    """Sizes and kinds, of fields that are left out their defaults."""

    width: int
    height: int
    bits: int  # of each sample
    samples: int  # of each pixel
    kind: int  # PhotometricInterpretation
    colours: tuple[int, ...]  # of a palette: all reds, greens, blues, 0 to 65535
    lossy: bool
    profile: bool  # there is a colour profile


def read_directory(data: bytes) -> TiffDirectory:
    """The first directory of a TIFF or BigTIFF file. Raises struct.error where the data ends too early."""
    order = "<" if data[:2] == b"II" else ">"
    big = data[2:4] in (b"+\0", b"\0+")
    place, count, entry = ("Q", "Q", 20) if big else ("I", "H", 12)
    (start,) = struct.unpack_from(order + place, data, 8 if big else 4)
    (entries,) = struct.unpack_from(order + count, data, start)
    first = start + struct.calcsize(count)
    found: dict[int, tuple[int, ...]] = {}
    for at in range(first, min(first + entry * entries, len(data)), entry):
        (tag,) = struct.unpack_from(order + "H", data, at)
        if tag in (WIDTH, HEIGHT, BITS, COMPRESSION, KIND, SAMPLES, COLOURS, PROFILE):
            found.setdefault(tag, _numbers(data, at + 2, order, place))  # of two the first counts, as when decoding
    one = {tag: numbers[0] for tag, numbers in found.items() if numbers}
    return TiffDirectory(
        one.get(WIDTH, 0), one.get(HEIGHT, 0), one.get(BITS, 1), one.get(SAMPLES, 1), one.get(KIND, 1),
        found.get(COLOURS, ()), one.get(COMPRESSION, 1) in LOSSY, PROFILE in found,
    )  # fmt: skip


def _numbers(data: bytes, at: int, order: str, place: str) -> tuple[int, ...]:
    """The whole numbers of a field, which lie in the entry itself where they fit; none of other types."""
    kind, count = struct.unpack_from(order + "H" + place, data, at)
    if kind not in FORMS or count > MOST_COLOURS:
        return ()
    form = f"{order}{count}{FORMS[kind]}"
    value = at + 2 + struct.calcsize(place)
    if struct.calcsize(form) > struct.calcsize(place):
        (value,) = struct.unpack_from(order + place, data, value)
    return struct.unpack_from(form, data, value)


def refuse_unplain(directory: TiffDirectory, name: str) -> None:
    """Raise InputError where pixels are no plain grey or RGB, with alpha or without."""
    if directory.kind not in PLAIN:
        what = "a CMYK image, which holds" if directory.kind == 5 else f"colours of kind {directory.kind}, which are"
        raise InputError(name, "header", f"{what} no plain channels", "save it as RGB")
    if not 1 <= directory.samples <= 4 or (directory.kind == PALETTE and directory.samples > 1):
        raise InputError(name, "header", f"{directory.samples} samples a pixel", "save it with one to four channels")
    if not 1 <= directory.bits <= 64:
        raise InputError(name, "header", f"samples of {directory.bits} bits", "save it with 8 or 16 bits a channel")


def plain_tiff(texels: Array, directory: TiffDirectory, name: str) -> Array:
    """Decoded samples as channels: palettes looked up, few bits spread over 8 or 16, black as zero."""
    if directory.kind == PALETTE:
        colours, indices = len(directory.colours) // 3, texels.reshape(texels.shape[:2]).astype(np.intp)
        if indices.max() >= colours:
            raise InputError(name, "header", f"colour {indices.max()} of a palette of {colours}", "save it as RGB")
        table = np.array(directory.colours[: 3 * colours]).reshape(3, colours).T >> 8
        return table.astype(np.uint8)[indices]
    if texels.dtype.kind not in "ub":
        return texels
    whole = 255 if directory.bits <= 8 else 65535
    most = (1 << directory.bits) - 1
    if most < whole and directory.bits != 8:
        texels = np.rint(texels * (whole / most)).astype(np.uint8 if whole == 255 else np.uint16)
    return whole - texels if directory.kind == WHITE_IS_ZERO else texels
