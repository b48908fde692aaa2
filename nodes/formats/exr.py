"""OpenEXR images, through the format's own library, an extra."""

from __future__ import annotations

import struct
import tempfile
from pathlib import Path
from typing import Any

import numpy as np
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

MAGIC = b"\x76\x2f\x31\x01"
ORDER = ("R", "G", "B", "A")


def exr_size(data: bytes, name: str) -> tuple[int, int]:
    """Width and height, from the dataWindow of the header (OpenEXR file layout, "Header")."""
    if data[4] != 2 or struct.unpack("<I", data[4:8])[0] >> 8 & 0x18:  # deep data, several parts
        raise InputError(name, "header", "an EXR file of several parts or deep pixels", "save it with one flat part")
    at = 8
    while data[at] != 0:
        end = data.index(b"\0", at)
        kind = data.index(b"\0", end + 1)
        size = struct.unpack("<I", data[kind + 1 : kind + 5])[0]
        if data[at:end] == b"dataWindow":
            left, top, right, bottom = struct.unpack("<4i", data[kind + 5 : kind + 21])
            return right - left + 1, bottom - top + 1
        at = kind + 5 + size
    raise InputError(name, "header", "no dataWindow", "the file is damaged or cut off: export it again")


def read_exr(content: Array, name: str) -> Array:
    """The texels, (height, width, channels) float32: R, G, B and A where they are there, else Y, else what there is."""
    library = _library(name)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "image.exr"
        path.write_bytes(content.tobytes())
        try:
            with library.File(str(path), separate_channels=True) as file:
                found = {key: np.asarray(one.pixels) for key, one in file.channels().items()}
        except (RuntimeError, ValueError, TypeError, OSError) as error:
            raise InputError(
                name, "", f"EXR data can't be decoded: {error}", "the file is damaged or cut off: export it again"
            ) from None
    chosen = [key for key in ORDER if key in found] or (["Y"] if "Y" in found else sorted(found))
    planes = [found[key] for key in chosen]
    if not planes or any(plane.shape != planes[0].shape for plane in planes):
        raise InputError(name, "", "its channels are of different sizes", "save it with channels of one size")
    return np.stack(planes, axis=2).astype(np.float32)


def write_exr(texels: Array, half: bool, name: str) -> Array:
    """An EXR file, (size,) uint8, of (height, width, 1 to 4) texels: Y, or R, G, B and A; half or float."""
    library = _library(name)
    keys = ("Y",) if texels.shape[2] == 1 else ORDER[: texels.shape[2]]
    kind = np.float16 if half else np.float32
    planes: dict[str, Any] = {key: np.ascontiguousarray(texels[..., k], kind) for k, key in enumerate(keys)}
    header = {"compression": library.ZIP_COMPRESSION, "type": library.scanlineimage}
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "image.exr"
        with library.File(header, planes) as file:
            file.write(str(path))
        return np.fromfile(path, np.uint8)


def _library(name: str) -> Any:
    try:
        import OpenEXR
    except ImportError:
        raise InputError(
            name, "", "EXR images need an extra", "pip install 'tangentry[exr]', or use PNG or TIFF"
        ) from None
    return OpenEXR
