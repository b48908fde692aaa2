"""Image files as texels, and back: PNG, TIFF, WebP and JPEG through imagecodecs, EXR, at their own bit depth.

The size is read from the header and held against a limit before anything is decoded: a small file can announce a huge
image.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from tangentry.nodes.formats.image_headers import ImageHeader, read_header
from tangentry.nodes.formats.tiff_directory import plain_tiff, read_directory, refuse_unplain
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

MOST_PIXELS = 16384 * 16384


def read_image(content: Array, name: str, pixels: int = MOST_PIXELS) -> Array:
    """The texels of an image file: (height, width, channels) uint8, uint16 or float32; row 0 is the top.

    content  (size,) uint8
    name     of the file, for messages
    pixels   the most that is decoded

    Palettes are looked up and greys of fewer bits spread over 8 or 16. Raises InputError naming the file and the
    reason where it is no image, is cut off, is larger than the limit, or of a kind that holds no plain channels (CMYK).
    """
    if not len(content):
        raise InputError(name, "", "the file is empty", "export the image again")
    header = read_header(content, name)
    if header.width * header.height > pixels:
        raise InputError(
            name,
            "header",
            f"{header.width} x {header.height} pixels, more than the {pixels:,} that are read",
            "make it smaller",
        )
    texels = _decode(content, header, name)
    if texels.ndim == 2:
        texels = texels[:, :, None]
    if texels.ndim != 3 or texels.shape[:2] != (header.height, header.width):
        raise InputError(
            name,
            "",
            f"decoded to {texels.shape}, not to {header.height} rows of {header.width}",
            "save it as a plain PNG",
        )
    return _plain(texels, name)


def _decode(content: Array, header: ImageHeader, name: str) -> Array:
    import imagecodecs

    if header.format == "EXR":
        from tangentry.nodes.formats.exr import read_exr

        return read_exr(content, name)
    decoders = {
        "PNG": (imagecodecs.png_decode, imagecodecs.PngError),
        "JPEG": (imagecodecs.jpeg8_decode, imagecodecs.Jpeg8Error),
        "WebP": (imagecodecs.webp_decode, imagecodecs.WebpError),
        "TIFF": (imagecodecs.tiff_decode, imagecodecs.TiffError),
    }
    decode, trouble = decoders[header.format]
    data = content.tobytes()
    directory = read_directory(data) if header.format == "TIFF" else None
    if directory is not None:
        refuse_unplain(directory, name)
    # The decoder makes up what is missing; entropy-coded data holds no marker but the end (ITU-T T.81, B.1.1.2).
    if header.format == "JPEG" and data.rfind(b"\xff\xd9") < data.rfind(b"\xff\xda"):
        raise InputError(name, "", "JPEG data without an end", "the file is damaged or cut off: export it again")
    try:
        texels: Array = decode(data)
    except (trouble, ValueError, RuntimeError, MemoryError, IndexError, TypeError, OverflowError) as error:
        raise InputError(
            name,
            "",
            f"{header.format} data can't be decoded: {error}",
            "the file is damaged or cut off: export it again",
        ) from None
    return texels if directory is None else plain_tiff(texels, directory, name)


def _plain(texels: Array, name: str) -> Array:
    if texels.dtype == np.bool_:
        texels = texels.astype(np.uint8) * 255
    if texels.dtype.kind == "f":
        texels = texels.astype(np.float32)
        if not np.isfinite(texels).all():
            row, column, _ = np.argwhere(~np.isfinite(texels))[0]
            raise InputError(name, f"pixel ({column}, {row})", "not a finite number", "export the image again")
    elif texels.dtype not in (np.uint8, np.uint16):
        raise InputError(name, "", f"texels of type {texels.dtype}", "save it with 8 or 16 bits a channel")
    return np.ascontiguousarray(texels)


def write_png(texels: Array) -> Array:
    """A PNG file, (size,) uint8, of (height, width, 1 to 4) uint8 or uint16 texels."""
    import imagecodecs

    plane = texels[:, :, 0] if texels.shape[2] == 1 else texels
    return np.frombuffer(imagecodecs.png_encode(np.ascontiguousarray(plane)), np.uint8)


def write_tiff(texels: Array) -> Array:
    """A TIFF file, (size,) uint8, of (height, width, 1 to 4) uint8, uint16 or float32 texels."""
    import imagecodecs

    plane = texels[:, :, 0] if texels.shape[2] == 1 else texels
    kind = "minisblack" if texels.shape[2] < 3 else "rgb"
    further: dict[str, Any] = {"extrasample": "unassalpha"} if texels.shape[2] in (2, 4) else {}
    packed = imagecodecs.tiff_encode(
        np.ascontiguousarray(plane), photometric=kind, compression=imagecodecs.TIFF.COMPRESSION.ADOBE_DEFLATE, **further
    )
    return np.frombuffer(packed, np.uint8)
