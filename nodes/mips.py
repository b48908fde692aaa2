"""Mip chains."""

from __future__ import annotations

from collections.abc import Callable
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
    chain, roughs = [sheet], []
    own = _rough_texels(sheet, rough, roughness) if sheet.holds == "normal" else None
    if own is not None:
        roughs.append(_rough_sheet(sheet, own, 0))
    level = _first(sheet, own, _inside(sheet, asset))
    while max(level.size) > 1 and (levels is None or len(chain) <= levels):
        level = level.halved()
        chain.append(_sheet(sheet, _filled(level.values, level.weights), len(chain)))
        if level.power is not None:
            length = np.clip(np.sqrt(np.einsum("...i,...i->...", level.values, level.values))[..., None], 1e-6, 1)
            less = length * level.power / (length + level.power * (1 - length))
            roughs.append(_rough_sheet(sheet, (2 / (_filled(less, level.weights) + 2)) ** 0.25, len(roughs)))
    return chain, roughs


class _Level(NamedTuple):
    """What a level is averaged from, given by its rows."""

    size: tuple[int, int]
    of: Callable[[slice], Array]  # (rows, width, channels) float64: unit vectors of normals, else texels as they are
    weighing: Callable[[slice], Array]  # (rows, width, 1) float64: 0 where nothing is stood for
    powers: Callable[[slice], Array] | None  # (rows, width, 1) float64: Blinn and Phong's exponent

    @property
    def values(self) -> Array:
        return self.of(slice(None))

    @property
    def weights(self) -> Array:
        return self.weighing(slice(None))

    @property
    def power(self) -> Array | None:
        return None if self.powers is None else self.powers(slice(None))

    def halved(self) -> _Level:
        from tangentry.nodes.maps.resampling import halved_in_bands

        of, weighing, powers, height = self.of, self.weighing, self.powers, self.size[0]
        share = halved_in_bands(height, weighing)
        over = np.where(share > 0, share, 1)
        values = halved_in_bands(height, lambda rows: of(rows) * weighing(rows)) / over
        power = None if powers is None else halved_in_bands(height, lambda rows: powers(rows) * weighing(rows)) / over
        return _Level(
            share.shape[:2],
            values.__getitem__,
            share.__getitem__,
            None if power is None else power.__getitem__,
        )


def _first(sheet: Sheet, rough: Array | None, inside: Array | None) -> _Level:
    """The level of the map itself."""
    from tangentry.nodes.maps.encodings import decode_texels

    height, width = sheet.texels.shape[:2]
    if sheet.holds == "normal" and sheet.green == "undecided":
        raise InputError(sheet.name or "map", "", "it is not known whether its green points up or down", "state it")

    def values(rows: slice) -> Array:
        if sheet.holds != "normal":
            return sheet.texels[rows].astype(np.float64)
        return decode_texels(sheet.texels[rows], sheet.encoding, sheet.green).astype(np.float64)

    def weights(rows: slice) -> Array:
        if inside is None:
            return np.ones((len(range(*rows.indices(height))), width, 1))
        return inside[rows, :, None].astype(np.float64)

    powers = None if rough is None else lambda rows: 2 / np.clip(rough[rows].astype(np.float64), 0.01, 1) ** 4 - 2
    return _Level((height, width), values, weights, powers)


def _inside(sheet: Sheet, asset: Asset | None) -> Array | None:
    """(height, width) bool: texels that stand for something; None: all."""
    from tangentry.nodes.pad import owned

    inside = None if asset is None else owned(sheet, asset)
    return inside if inside is not None and inside.any() else None


def _rough_texels(sheet: Sheet, rough: Sheet | None, roughness: float) -> Array:
    """(height, width, 1) float32: the roughness of each texel."""
    shape = sheet.texels.shape[:2]
    if rough is None:
        return np.full((*shape, 1), roughness, np.float32)
    if rough.texels.shape[:2] != shape:
        size = f"{rough.texels.shape[1]} x {rough.texels.shape[0]}"
        raise InputError(
            rough.name or "roughness",
            "",
            f"{size} texels, the normal map {shape[1]} x {shape[0]}",
            "give both one size",
        )
    most = np.iinfo(rough.texels.dtype).max if rough.texels.dtype.kind == "u" else 1
    return rough.texels[..., :1].astype(np.float32) / np.float32(most)


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


def _rough_sheet(sheet: Sheet, texels: Array, level: int) -> Sheet:
    plain = texels.astype(np.float32)
    return Sheet(sheet.material, plain, "data", encoding="float", name=sheet.name, level=level)
