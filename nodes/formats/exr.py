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
HEADER = 1 << 20  # bytes in which a header must end
MOST_SAMPLES = 4 * 16384 * 16384


def exr_size(data: bytes, name: str) -> tuple[int, int]:
    """Width and height, from the header's dataWindow."""
    left, top, right, bottom = struct.unpack("<4i", _attribute(data, b"dataWindow", name)[:16])
    return right - left + 1, bottom - top + 1


def _channels(data: bytes, name: str) -> list[str]:
    """Names of the channels, each followed by 16 bytes on how it is stored ("chlist")."""
    at, found, stored = 0, [], _attribute(data, b"channels", name)
    while at < len(stored) and stored[at] != 0:
        end = stored.index(b"\0", at)
        found.append(stored[at:end].decode("latin-1"))
        at = end + 17
    return found


def _attribute(data: bytes, wanted: bytes, name: str) -> bytes:
    """The value of one of the header's attributes (OpenEXR file layout, "Header")."""
    if data[4] != 2 or struct.unpack("<I", data[4:8])[0] >> 8 & 0x18:  # deep data, several parts
        raise InputError(name, "header", "an EXR file of several parts or deep pixels", "save it with one flat part")
    at = 8
    while data[at] != 0:
        end = data.index(b"\0", at)
        kind = data.index(b"\0", end + 1)
        size = struct.unpack("<I", data[kind + 1 : kind + 5])[0]
        if data[at:end] == wanted:
            return data[kind + 5 : kind + 5 + size]
        at = kind + 5 + size
    raise InputError(name, "header", f"no {wanted.decode()}", "the file is damaged or cut off: export it again")


def read_exr(content: Array, name: str) -> Array:
    """The texels, (height, width, channels) float32: R, G, B and A where they are there, else Y, else what there is."""
    library = _library(name)
    chosen = _chosen(content[:HEADER].tobytes(), name)
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
    planes = [found[key] for key in chosen if key in found]
    if len(planes) < len(chosen) or any(plane.shape != planes[0].shape for plane in planes):
        raise InputError(name, "", "its channels are of different sizes", "save it with channels of one size")
    return np.stack(planes, axis=2).astype(np.float32)


def _chosen(data: bytes, name: str) -> list[str]:
    """The channels that are read. All are decoded, so all count against the limit."""
    try:
        (width, height), found = exr_size(data, name), _channels(data, name)
    except (struct.error, IndexError, ValueError):
        raise InputError(name, "header", "cut off", "the file is damaged or cut off: export it again") from None
    chosen = [key for key in ORDER if key in found] or (["Y"] if "Y" in found else sorted(found))
    if width * height * len(found) > MOST_SAMPLES or not 1 <= len(chosen) <= len(ORDER):
        raise InputError(
            name, "header", f"{len(found)} channels of {width} x {height}", "save it with R, G and B, or Y, alone"
        )
    return chosen


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
