"""Height maps as normal maps, and back."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Literal

import numpy as np
from tangentry.nodes.model import Asset, Map, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

if TYPE_CHECKING:
    from tangentry.nodes.maps.relief import Texel


def relief(
    map: Map,
    asset: Asset | None = None,
    *,
    height: float = 0.01,
    size: float | None = None,
    edge: Literal["wrap", "clamp"] = "wrap",
    slope: Literal["central", "scharr"] = "central",
) -> Map:
    """The tangent-space normals of height maps, or the heights of normal maps.

    height  from the lowest code to the highest, in the asset's unit
    size    width of the whole map on the surface, in the asset's unit; by default as the asset's UVs have it
    edge    wrap: the map tiles; clamp: it ends at its border
    slope   central differences, or Scharr's operator

    With an asset and no size, each texel is as large as the face it lies on makes it, along u and v apart, so one
    height map has the right slopes on charts of any stretch; where charts overlap, the first face counts. Heights from
    normals need a map that tiles (Frankot & Chellappa 1988). Raises InputError where neither size nor asset is given,
    and where the asset has no UVs there.
    """
    return Map(tuple(_sheet(sheet, asset, height, size, edge, slope) for sheet in map.sheets))


def _sheet(sheet: Sheet, asset: Asset | None, height: float, size: float | None, edge: str, slope: str) -> Sheet:
    from tangentry.nodes.maps.encodings import decoded
    from tangentry.nodes.maps.relief import heights_to_normals, normals_to_heights

    rows, columns = sheet.texels.shape[:2]
    texel = _texel(sheet, asset, size, rows, columns)
    if sheet.holds == "normal":
        heights = normals_to_heights(decoded(sheet), texel) / np.float32(height)
        return replace(sheet, texels=heights[..., None], holds="height", space="", green="", encoding="float")
    normals = heights_to_normals(_heights(sheet) * np.float32(height), texel, edge, slope)
    return replace(sheet, texels=normals, holds="normal", space="tangent", green="up", encoding="float")


def _heights(sheet: Sheet) -> Array:
    """(height, width) float32: the first channel, codes as 0..1."""
    first = sheet.texels[..., 0]
    return (
        first.astype(np.float32)
        if first.dtype.kind == "f"
        else first.astype(np.float32) / np.float32(np.iinfo(first.dtype).max)
    )


def _texel(sheet: Sheet, asset: Asset | None, size: float | None, rows: int, columns: int) -> Texel:
    """Width and height of a texel on the surface, or of each."""
    from tangentry.nodes.maps.surface import parts_under, surface_of
    from tangentry.nodes.maps.texel_sizes import texel_sizes
    from tangentry.nodes.normals import normals

    if size is not None:
        return size / columns, size / columns
    found = None
    if asset is not None:
        ready = normals(asset)
        surface = surface_of(ready, parts_under(ready, sheet.material), needs_frames=False)
        found = texel_sizes(surface, columns, rows)
    if found is None:
        what, advice = "how large a texel is on the surface is not known", "set `size`, or give the asset it lies on"
        raise InputError(sheet.name or "relief", "", what, advice)
    return found
