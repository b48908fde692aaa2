"""What two decoders shade, held against each other texel by texel."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numba import njit
from tangentry.nodes.geometry.cores import share_out, shared_zeros
from tangentry.nodes.geometry.texels import texel_owners
from tangentry.nodes.maps.decoders import WAYS, shade
from tangentry.nodes.maps.encodings import decode_texels
from tangentry.nodes.maps.surface import Surface, parts_by_material, parts_under, surface_of
from tangentry.nodes.model import Asset, Map, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

BAND = 256  # rows worked on at a time
PROBE = np.array([0.5, 0.5, np.sqrt(0.5)], np.float32)  # a texel that leans 45 degrees, both ways alike


class Shown(NamedTuple):
    """One side of a comparison: a sheet on a surface, as a decoder reads it."""

    surface: Surface
    sheet: Sheet | None  # None: every texel is the probe
    way: int  # one of WAYS


class Compared(NamedTuple):
    """One sheet of a comparison."""

    material: str
    degrees: Array  # (height, width) float32: between what the two shade; NaN where either has no owner


def compared(
    asset: Asset, map: Map | None, decoder: str, other: Asset, other_map: Map | None, other_decoder: str, size: int
) -> list[Compared]:
    """Every sheet of two mapped assets.

    Without maps every texel is taken to lean 45 degrees, at `size` texels along both sides, and materials that both
    assets have are compared. Raises InputError where the maps have different materials or sizes, or nothing is shared.
    """
    sheets, others = _sheets(asset, map), _sheets(other, other_map)
    shared = [material for material in sheets if material in others]
    if not shared or (map is not None and other_map is not None and set(sheets) != set(others)):
        raise InputError(
            other.name,
            "",
            f"it has maps or materials for {_told(others)}, and {asset.name} for {_told(sheets)}",
            "compare what is made for the same materials",
        )
    found = []
    for material in shared:
        pair = (
            _shown(asset, material, sheets[material], decoder),
            _shown(other, material, others[material], other_decoder),
        )
        found.append(Compared(material, _angles(*pair, *_size(pair, size))))
    return found


def _told(sheets: dict[str, Sheet | None]) -> str:
    return ", ".join(name or "all materials" for name in sheets) or "none"


def _sheets(asset: Asset, map: Map | None) -> dict[str, Sheet | None]:
    if map is None:
        return dict.fromkeys(
            name
            for name, rows in parts_by_material(asset).items()
            if any(asset.parts[row].frames is not None for row in rows)
        )
    return {sheet.material: sheet for sheet in map.sheets if sheet.holds == "normal"}


def _shown(asset: Asset, material: str, sheet: Sheet | None, decoder: str) -> Shown:
    if sheet is not None and sheet.space == "tangent" and sheet.green == "undecided":
        raise InputError(
            sheet.name or "map",
            "",
            "it is not known whether its green points up or down",
            "state it: texture, green: up or down",
        )
    in_object_space = sheet is not None and sheet.space == "object"
    rows = parts_under(asset, material) if sheet is not None else parts_by_material(asset)[material]
    surface = surface_of(asset, rows, needs_frames=not in_object_space)
    return Shown(surface, sheet, WAYS["object" if in_object_space else decoder])


def _size(pair: tuple[Shown, Shown], size: int) -> tuple[int, int]:
    """Height and width of the comparison."""
    shapes = {shown.sheet.texels.shape[:2] for shown in pair if shown.sheet is not None}
    if len(shapes) > 1:
        (a, b), (c, d) = sorted(shapes)
        raise InputError("compare", "", f"maps of {b} x {a} and {d} x {c} texels", "compare maps of one size")
    return shapes.pop() if shapes else (size, size)


def _angles(one: Shown, two: Shown, height: int, width: int) -> Array:
    degrees = shared_zeros((height, width), np.float32)

    def work(band: int) -> None:
        rows = band * BAND, min(height, (band + 1) * BAND)
        sides = []
        for surface, sheet, way in (one, two):
            owners = texel_owners(surface.places, width, height, rows=rows)
            sides += [_normals(sheet, rows, width), *owners, surface.frames, way]
        _between(*sides, degrees[rows[0] : rows[1]])

    share_out(work, -(-height // BAND))
    return degrees


def _normals(sheet: Sheet | None, rows: tuple[int, int], width: int) -> Array:
    if sheet is None:
        return np.broadcast_to(PROBE, (rows[1] - rows[0], width, 3)).copy()
    return decode_texels(sheet.texels[rows[0] : rows[1]], sheet.encoding, sheet.green)


@njit(cache=True, nogil=True, error_model="numpy")
def _between(
    normals: Array,
    triangle: Array,
    weights: Array,
    frames: Array,
    way: int,
    other_normals: Array,
    other_triangle: Array,
    other_weights: Array,
    other_frames: Array,
    other_way: int,
    degrees: Array,
) -> None:
    for r in range(normals.shape[0]):
        for c in range(normals.shape[1]):
            s, t = triangle[r, c], other_triangle[r, c]
            if s < 0 or t < 0:
                degrees[r, c] = np.nan
                continue
            u, v, n = normals[r, c, 0], normals[r, c, 1], normals[r, c, 2]
            e, f, m = other_normals[r, c, 0], other_normals[r, c, 1], other_normals[r, c, 2]
            w1, w2 = np.float64(weights[r, c, 0]), np.float64(weights[r, c, 1])
            x, y, z = shade(frames, s, w1, w2, way, u, v, n)
            w1, w2 = np.float64(other_weights[r, c, 0]), np.float64(other_weights[r, c, 1])
            p, q, w = shade(other_frames, t, w1, w2, other_way, e, f, m)
            apart = np.sqrt((x - p) ** 2 + (y - q) ** 2 + (z - w) ** 2)
            total = np.sqrt((x + p) ** 2 + (y + q) ** 2 + (z + w) ** 2)
            degrees[r, c] = np.degrees(2 * np.arctan2(apart, total))  # Kahan's formula: exact near 0 and 180
