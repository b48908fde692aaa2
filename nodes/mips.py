"""Mip chains."""

from __future__ import annotations

from dataclasses import replace
from typing import NamedTuple

import numpy as np
from tangentry.nodes.model import Asset, Map, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array


class Mips(NamedTuple):
    """What a chain is made of."""

    maps: Map  # each sheet with all its levels
    roughness: Map  # of normal maps: the roughness that each level needs, one channel float32, 0 to 1


def mips(
    map: Map, rough: Map | None = None, asset: Asset | None = None, *, roughness: float = 0.5, levels: int | None = None
) -> Mips:
    """Every level of the maps down to one texel, normals averaged as vectors; and the roughness that makes up for it.

    roughness  of the surface, 0 to 1, where no `rough` map tells it texel by texel
    levels     how many below the map itself; by default all

    Averages of normals are shorter than 1 where they disagree. They are made unit again, and the lost length goes into
    roughness (Toksvig 2005): power' = l power / (l + power (1 - l)), with power = 2 / roughness^4 - 2. With an asset,
    texels outside all charts count for nothing and are filled from the nearest inside. Levels of odd sizes are means
    over equal areas. Raises InputError where a normal map's green is undecided.
    """
    chains = [_chain(sheet, _for(rough, sheet.material), asset, roughness, levels) for sheet in map.sheets]
    return Mips(
        Map(tuple(sheet for chain, _ in chains for sheet in chain)),
        Map(tuple(sheet for _, chain in chains for sheet in chain)),
    )


def _for(map: Map | None, material: str) -> Sheet | None:
    sheets = map.sheets if map is not None else ()
    return next((one for one in sheets if one.material in (material, "")), None)


def _chain(
    sheet: Sheet, rough: Sheet | None, asset: Asset | None, roughness: float, levels: int | None
) -> tuple[list[Sheet], list[Sheet]]:
    from tangentry.nodes.maps.resampling import halved

    values, weights = _values(sheet), _weights(sheet, asset)
    power = _power(rough, roughness, values.shape[:2]) if sheet.holds == "normal" else None
    chain, roughs = [sheet], [] if power is None else [_rough_sheet(sheet, power, 0)]
    while max(values.shape[:2]) > 1 and (levels is None or len(chain) <= levels):
        share = halved(weights)
        values, power = halved(values * weights), None if power is None else halved(power * weights)
        weights, over = share, np.where(share > 0, share, 1)
        values, power = values / over, None if power is None else power / over
        level = len(chain)
        chain.append(_sheet(sheet, _filled(values, weights), level))
        if power is not None:
            length = np.clip(np.sqrt(np.einsum("...i,...i->...", values, values))[..., None], 1e-6, 1)
            less = length * power / (length + power * (1 - length))
            roughs.append(_rough_sheet(sheet, _filled(less, weights), level))
    return chain, roughs


def _values(sheet: Sheet) -> Array:
    """What is averaged: unit vectors of normals, else the texels as they are."""
    from tangentry.nodes.maps.encodings import decoded

    if sheet.holds != "normal":
        return sheet.texels.astype(np.float64)
    if sheet.green == "undecided":
        raise InputError(sheet.name or "map", "", "it is not known whether its green points up or down", "state it")
    return decoded(sheet).astype(np.float64)


def _weights(sheet: Sheet, asset: Asset | None) -> Array:
    from tangentry.nodes.pad import owned

    inside = None if asset is None else owned(sheet, asset)
    if inside is None or not inside.any():
        return np.ones((*sheet.texels.shape[:2], 1))
    return inside[..., None].astype(np.float64)


def _power(rough: Sheet | None, roughness: float, shape: tuple[int, ...]) -> Array:
    """(height, width, 1): Blinn and Phong's exponent of each texel."""
    if rough is None:
        texels = np.full((*shape, 1), roughness)
    else:
        most = np.iinfo(rough.texels.dtype).max if rough.texels.dtype.kind == "u" else 1
        texels = rough.texels[..., :1] / most
        if texels.shape[:2] != shape:
            raise InputError(
                rough.name or "roughness",
                "",
                f"{texels.shape[1]} x {texels.shape[0]} texels, the normal map {shape[1]} x {shape[0]}",
                "give both one size",
            )
    return np.asarray(2 / np.clip(texels, 0.01, 1) ** 4 - 2)


def _filled(values: Array, weights: Array) -> Array:
    """The values, those that stand for no chart taken from the nearest that do."""
    from tangentry.nodes.maps.gutter import nearest_owned

    inside = weights[..., 0] > 0
    if inside.all():
        return values
    source = nearest_owned(inside, max(inside.shape))
    known = source >= 0
    filled = values.copy()
    filled[known] = values.reshape(-1, values.shape[2])[source[known]]
    return filled


def _sheet(sheet: Sheet, values: Array, level: int) -> Sheet:
    from tangentry.nodes.maps.encodings import encode_normals

    kind = sheet.texels.dtype
    if sheet.holds != "normal":
        codes = values if kind.kind == "f" else np.rint(values)
        return replace(sheet, texels=codes.astype(kind), level=level)
    length = np.sqrt(np.einsum("...i,...i->...", values, values))[..., None]
    normals = np.where(length > 0, values / np.where(length > 0, length, 1), [0, 0, 1]).astype(np.float32)
    codes = encode_normals(normals, sheet.encoding if kind.kind != "f" else "float", 8 * kind.itemsize, sheet.green)
    return replace(sheet, texels=codes, level=level)


def _rough_sheet(sheet: Sheet, power: Array, level: int) -> Sheet:
    texels = (2 / (power + 2)) ** 0.25
    return Sheet(sheet.material, texels.astype(np.float32), "data", encoding="float", name=sheet.name, level=level)
