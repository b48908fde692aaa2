"""What an image file says of itself in its first bytes, read without decoding it."""

from __future__ import annotations

import struct
from typing import NamedTuple

from tangentry.nodes.formats.exr import HEADER, MAGIC, exr_size
from tangentry.nodes.formats.tiff_directory import read_directory
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

READ = "PNG, JPEG, WebP, TIFF and EXR are read"
TIFF = (b"II*\0", b"MM\0*", b"II+\0", b"MM\0+")  # "+" is BigTIFF
GAMMA_ONE = struct.pack(">I", 100000)
BAD = "the file is damaged or cut off: export it again"


class ImageHeader(NamedTuple):
    """Format and size."""

    format: str  # "PNG", "JPEG", "WebP", "TIFF" or "EXR"
    width: int
    height: int


def read_header(content: Array, name: str) -> ImageHeader:
    """Format and size of an image file. Raises InputError for other formats, and where the header is broken."""
    head = content[:64].tobytes()
    try:
        if head.startswith(b"\x89PNG\r\n\x1a\n"):
            return _checked(ImageHeader("PNG", *struct.unpack(">II", head[16:24])), name)
        if head.startswith(b"\xff\xd8"):
            return _checked(_jpeg(content.tobytes(), name), name)
        if head[:4] == b"RIFF" and head[8:12] == b"WEBP":
            return _checked(_webp(head), name)
        if head[:4] in TIFF:
            return _checked(ImageHeader("TIFF", *read_directory(content.tobytes())[:2]), name)
        if head.startswith(MAGIC):
            return _checked(ImageHeader("EXR", *exr_size(content[:HEADER].tobytes(), name)), name)
    except (struct.error, IndexError, ValueError):
        raise InputError(name, "header", "cut off", BAD) from None
    shown = head[:8].hex(" ")
    raise InputError(name, "", f"not an image that can be read (it begins with {shown}); {READ}", "save it as PNG")


def _checked(header: ImageHeader, name: str) -> ImageHeader:
    if header.width < 1 or header.height < 1:
        raise InputError(name, "header", f"{header.width} x {header.height} pixels", BAD)
    return header


def _jpeg(data: bytes, name: str) -> ImageHeader:
    """From the frame header, which the other segments lead to (ITU-T T.81, B.2.2)."""
    at = 2
    while True:
        while data[at] == 0xFF and data[at + 1] == 0xFF:
            at += 1
        marker = data[at + 1]
        if data[at] != 0xFF:
            raise InputError(name, f"byte {at}", "no JPEG segment begins here", BAD)
        if 0xC0 <= marker <= 0xCF and marker not in (0xC4, 0xC8, 0xCC):
            height, width, channels = struct.unpack(">HHB", data[at + 5 : at + 10])
            if channels == 4:
                raise InputError(name, "", "a CMYK image, which holds no plain channels", "save it as RGB")
            return ImageHeader("JPEG", width, height)
        at += 2 + struct.unpack(">H", data[at + 2 : at + 4])[0]


def _webp(head: bytes) -> ImageHeader:
    """RFC 9649, chapter 2."""
    kind = head[12:16]
    if kind == b"VP8X":
        return ImageHeader("WebP", 1 + int.from_bytes(head[24:27], "little"), 1 + int.from_bytes(head[27:30], "little"))
    if kind == b"VP8L":
        bits = struct.unpack("<I", head[21:25])[0]
        return ImageHeader("WebP", 1 + (bits & 0x3FFF), 1 + (bits >> 14 & 0x3FFF))
    width, height = struct.unpack("<HH", head[26:30])
    return ImageHeader("WebP", width & 0x3FFF, height & 0x3FFF)


def is_image(content: Array) -> bool:
    """Does a file begin like an image that can be read?"""
    head = content[:12].tobytes()
    return head.startswith((b"\x89PNG", b"\xff\xd8", *TIFF, MAGIC)) or (head[:4] == b"RIFF" and head[8:12] == b"WEBP")


def tag_of(content: Array) -> str:
    """What an image file says of its texels: "lossy" for JPEG, in a TIFF file too, and WebP's lossy form; "sRGB" for a
    colour profile in a TIFF or PNG file, or a gamma chunk (PNG specification, 11.3.2); else ""."""
    head = content[:64].tobytes()
    if head.startswith(b"\xff\xd8") or (head[8:12] == b"WEBP" and b"VP8 " in head[12:]):
        return "lossy"
    if head.startswith(TIFF):
        directory = read_directory(content.tobytes())
        return "lossy" if directory.lossy else "sRGB" if directory.profile else ""
    at = 8
    while head.startswith(b"\x89PNG") and at + 8 <= len(content):
        size, kind = struct.unpack(">I4s", content[at : at + 8].tobytes())
        if kind in (b"sRGB", b"iCCP") or (kind == b"gAMA" and content[at + 8 : at + 12].tobytes() != GAMMA_ONE):
            return "sRGB"
        if kind in (b"IDAT", b"IEND"):
            break
        at += 12 + size
    return ""
