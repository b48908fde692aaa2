"""Gutters filled."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from tangentry.nodes.model import Asset, Map, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array


def pad(map: Map, asset: Asset, *, gutter: int = 16) -> Map:
    """The map with the texels around each chart taken from the nearest texel inside.

    gutter  how many texels around the charts are filled

    What lies between two charts goes to the nearer one, so no chart's colours cross another's gutter. Texels of charts
    and those further away stay. Where charts reach the map's border they are not continued on the other side. Raises
    InputError where a part that the map lies on has no UVs.
    """
    if gutter < 0:
        raise InputError("pad", "setting gutter", f"{gutter} texels", "give 0 or more")
    return Map(tuple(_padded(sheet, asset, gutter) for sheet in map.sheets))


def _padded(sheet: Sheet, asset: Asset, gutter: int) -> Sheet:
    from tangentry.nodes.maps.gutter import nearest_owned

    source = nearest_owned(owned(sheet, asset), gutter)
    known = source >= 0
    texels = sheet.texels.copy()
    texels[known] = sheet.texels.reshape(-1, texels.shape[2])[source[known]]
    return replace(sheet, texels=texels)


def owned(sheet: Sheet, asset: Asset) -> Array:
    """(height, width) bool: texels whose centre lies in a chart of the parts that a sheet serves."""
    from tangentry.nodes.geometry.texels import texel_owners
    from tangentry.nodes.maps.surface import parts_under, surface_of
    from tangentry.nodes.normals import normals

    ready = normals(asset)
    surface = surface_of(ready, parts_under(ready, sheet.material), needs_frames=False)
    height, width = sheet.texels.shape[:2]
    inside: Array = np.asarray(texel_owners(surface.places, width, height).triangle >= 0)
    return inside
