"""Detail normals over base normals."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

import numpy as np
from tangentry.nodes.model import Map, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array


def combine(
    base: Map | None = None,
    detail: Map | None = None,
    mask: Map | None = None,
    *,
    method: Literal["reoriented", "derivatives", "whiteout", "udn", "linear", "overlay"] = "reoriented",
    tiling: float | tuple[float, float] = 1.0,
    strength: float = 1.0,
) -> Map | None:
    """The base's normal maps with the detail on them, as unit vectors; where only one of the two is there, that one.

    method    formulas that Barré-Brisebois & Hill (2012) compare: reoriented turns the detail along with the base;
              derivatives adds slopes; whiteout, udn, linear and overlay are cheaper
    tiling    how many times the detail repeats across the map; or along x and y
    strength  factor on the detail's x and y

    The mask's first channel, 0 to 1, scales the strength texel by texel. Each base sheet takes the detail of its
    material, else the lone one that serves all, and stays as it is where there is none. Raises InputError for maps that
    hold no tangent-space normals, or whose green is undecided.
    """
    if base is None or detail is None:
        return base if detail is None else detail
    over = tiling if isinstance(tiling, tuple) else (tiling, tiling)
    if not min(over) > 0:
        raise InputError("combine", "setting tiling", f"{over[0]:g} x {over[1]:g} repeats", "make it more than none")
    return Map(tuple(_combined(sheet, detail, mask, method, over, strength) for sheet in base.sheets))


def _combined(
    sheet: Sheet, detail: Map, mask: Map | None, method: str, tiling: tuple[float, float], strength: float
) -> Sheet:
    from tangentry.nodes.maps.blending import blend
    from tangentry.nodes.maps.encodings import decode_texels, decoded
    from tangentry.nodes.maps.resampling import BAND, repeated

    other = _for(detail, sheet.material)
    if other is None:
        return sheet
    _refuse(sheet)
    _refuse(other)
    height, width = sheet.texels.shape[:2]
    masking = _for(mask, sheet.material) if mask is not None else None
    normals, out = decoded(other), np.empty((height, width, 3), np.float32)
    for rows in (slice(first, first + BAND) for first in range(0, height, BAND)):
        added = repeated(normals, height, width, tiling, rows)
        added[..., :2] *= strength
        if masking is not None:
            added[..., :2] *= repeated(_share(masking), height, width, (1.0, 1.0), rows)
        added /= np.sqrt(np.einsum("...i,...i->...", added, added))[..., None]
        out[rows] = blend(decode_texels(sheet.texels[rows], sheet.encoding, sheet.green), added, method)
    return replace(sheet, texels=out, green="up", encoding="float", space="tangent")


def _for(map: Map, material: str) -> Sheet | None:
    named = {sheet.material: sheet for sheet in reversed(map.sheets)}
    return named.get(material, named.get(""))


def _refuse(sheet: Sheet) -> None:
    """Raise InputError where a sheet holds no tangent-space normals that can be read."""
    if sheet.holds != "normal" or sheet.space not in ("tangent", "") or sheet.green == "undecided":
        found = f"green {sheet.green}" if sheet.green == "undecided" else f"{sheet.space} {sheet.holds}".strip()
        raise InputError(sheet.name or "map", "", f"{found}, not tangent-space normals", "turn it into them first")


def _share(sheet: Sheet) -> Array:
    """(height, width, 1) float32: the first channel, 0 to 1."""
    first = sheet.texels[..., :1].astype(np.float32)
    most = np.iinfo(sheet.texels.dtype).max if sheet.texels.dtype.kind == "u" else 1
    return np.clip(first / np.float32(most), 0, 1)
