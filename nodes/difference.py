"""Two ways of shading held against each other, as a picture."""

from __future__ import annotations

from typing import Literal

import numpy as np
from tangentry.nodes.model import Asset, Map, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

# Dark blue for no difference, then green and yellow, red at the top of the scale.
RAMP = np.array([(20, 20, 60), (40, 140, 110), (235, 210, 60), (215, 40, 30)], np.float32)


def difference(
    asset: Asset,
    other: Asset | None = None,
    map: Map | None = None,
    other_map: Map | None = None,
    *,
    decoder: Literal["pixel", "pixel-unit", "pixel-square", "vertex", "vertex-unit", "vertex-square"] = "pixel",
    other_decoder: Literal["pixel", "pixel-unit", "pixel-square", "vertex", "vertex-unit", "vertex-square"]
    | None = None,
    scale: float = 5.0,
    size: int = 1024,
) -> Map:
    """A picture of the angle between what two decoders shade, one sheet for each material.

    decoder        how the first's decoder builds its frame, as in `reencode`
    other_decoder  the same of the other; by default the first's
    scale          degrees that are drawn red; none is dark blue, black is outside all charts
    size           texels along both sides, where there is no map: each is then taken to lean 45 degrees

    Inputs and errors are those of `compare`, which gives the figures.
    """
    from tangentry.nodes.maps.shading import compared

    if not scale > 0:
        raise InputError(asset.name, "", f"a scale that ends at {scale:g} degrees", "make it more than nothing")
    if other is None and other_map is None and other_decoder is None:
        raise InputError(asset.name, "", "nothing to compare it with", "give `other`, `other_map` or `other_decoder`")
    sheets = compared(
        asset, map, decoder, other or asset, map if other_map is None else other_map, other_decoder or decoder, size
    )
    return Map(tuple(Sheet(one.material, _drawn(one.degrees, scale), "colour", name="difference") for one in sheets))


def _drawn(degrees: Array, scale: float) -> Array:
    """(height, width, 3) uint8."""
    known = np.isfinite(degrees)
    at = np.clip(np.where(known, degrees, 0) / scale, 0, 1) * (len(RAMP) - 1)
    low = np.minimum(at.astype(np.int32), len(RAMP) - 2)
    share = (at - low)[..., None]
    colour = RAMP[low] * (1 - share) + RAMP[low + 1] * share
    return np.where(known[..., None], np.rint(colour), 0).astype(np.uint8)
