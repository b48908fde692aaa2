"""Arrays as objects of the store: their digests, and .npy files that are read by memory map.

The files are what numpy.load reads (format 1.0 of numpy.lib.format). We read them ourselves, strictly: a header that we
would not have written byte for byte is damage, and nothing in it is ever evaluated.
"""

from __future__ import annotations

import math
import mmap
import re
import weakref
from pathlib import Path
from typing import IO

import numpy as np
from blake3 import blake3
from tangentry.pipeline.flow import Array

HEADER = re.compile(
    rb"\x93NUMPY\x01\x00..\{'descr': '([<>|][a-zA-Z][0-9]{0,9}(?:\[\w{1,9}\])?)', "
    rb"'fortran_order': False, 'shape': \(([\d, ]*)\), \} *\n",
    re.S,
)
ALIGNED = 64  # bytes: where the body begins


class ArrayDigests:
    """Digests of arrays, remembered for read-only arrays while they live; `hashed` counts those really computed."""

    def __init__(self) -> None:
        self.hashed = 0
        self._known: dict[int, tuple[weakref.ref[Array], str]] = {}

    def __call__(self, array: Array) -> str:
        """Digest of an array's type, shape and bytes. Raises TypeError for arrays of Python objects or of records."""
        remembered = self._known.get(id(array))
        if remembered is not None and remembered[0]() is array:
            return remembered[1]
        self.hashed += 1
        digest = digest_array(array)
        self.remember(array, digest)
        return digest

    def remember(self, array: Array, digest: str) -> None:
        """Note the digest of an array that was just read or written under it."""
        if not array.flags.writeable:
            name = id(array)
            self._known[name] = (weakref.ref(array, lambda _: self._known.pop(name, None)), digest)


def digest_array(array: Array) -> str:
    """Digest of an array's type, shape and bytes. Raises TypeError for arrays of Python objects or of records."""
    if array.dtype.hasobject or array.dtype.names:
        raise TypeError(f"an array of {array.dtype} can't flow along an edge; only of numbers and texts")
    digest = blake3(f"{array.dtype.str}{array.shape}".encode())
    return digest.update(_body(array)).hexdigest()


def write_array(file: IO[bytes], array: Array) -> None:
    """Write an array as an .npy file, in C order."""
    file.write(_header(array.dtype, array.shape))
    file.write(_body(array))


def map_array(path: Path) -> Array:
    """The array of a file that `write_array` wrote, by memory map, read-only. Raises OSError or ValueError."""
    with open(path, "rb") as file:
        content = mmap.mmap(file.fileno(), 0, access=mmap.ACCESS_READ)
    found = HEADER.match(content)
    if found is None:
        raise ValueError("its header is not that of an array")
    shape = tuple(int(size) for size in found[2].split(b",") if size.strip())
    try:
        dtype = np.dtype(found[1].decode("ascii"))
    except TypeError as error:
        raise ValueError(str(error)) from None
    if found[0] != _header(dtype, shape) or len(content) != found.end() + math.prod(shape) * dtype.itemsize:
        raise ValueError("its header does not fit its content")
    return np.ndarray(shape, dtype, content, found.end())


def _header(dtype: np.dtype[np.generic], shape: tuple[int, ...]) -> bytes:
    text = f"{{'descr': '{dtype.str}', 'fortran_order': False, 'shape': {shape}, }}".encode()
    text += b" " * (-(len(text) + 11) % ALIGNED) + b"\n"
    return b"\x93NUMPY\x01\x00" + len(text).to_bytes(2, "little") + text


def _body(array: Array) -> memoryview | bytes:
    return np.ascontiguousarray(array).reshape(-1).view(np.uint8).data if array.size else b""
