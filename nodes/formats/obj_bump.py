"""What the image of a `bump` statement holds: the manual means heights by it, many exporters put normal maps there."""

from __future__ import annotations

import numpy as np
from tangentry.nodes.formats.image_headers import is_image
from tangentry.nodes.formats.images import read_image
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

LOOKED_AT = 512  # rows and columns at most
UNIT = 0.25  # how far from 1 the length of a stored normal may be, lossy coding included (measured: 0.72 to 1.15)
GREY = 1 / 32  # of the largest code: channels that differ less on average are a grey
SHARE = 0.9  # of texels that must be normals


def holds_normals(content: Array, name: str) -> bool:
    """Are the texels of an image file unit vectors that point outward? Of greys, no. Common practice, no source."""
    if not is_image(content):
        return False
    try:
        texels = read_image(content, name)
    except InputError:  # told where the image is used
        return False
    if texels.shape[2] < 3 or texels.dtype.kind == "f":
        return False
    some = texels[:: -(-texels.shape[0] // LOOKED_AT), :: -(-texels.shape[1] // LOOKED_AT), :3]
    top = np.iinfo(texels.dtype).max
    vectors = some.astype(np.float32) * np.float32(2 / top) - 1
    length = np.linalg.norm(vectors, axis=2)
    outward = vectors[..., 2] > 0
    coloured = np.ptp(some, axis=2).mean() > GREY * top
    return bool(coloured and (outward & (np.abs(length - 1) < UNIT)).mean() >= SHARE)
