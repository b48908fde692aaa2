"""Pictures of mapped meshes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

import numpy as np
from tangentry.nodes.model import Asset, Map, Part, Sheet
from tangentry.pipeline.errors import InputError

if TYPE_CHECKING:
    from tangentry.nodes.maps.picture import Mapped

LARGEST = 8192


def preview(
    asset: Asset,
    map: Map | None = None,
    *,
    size: int = 768,
    turn: float = 30.0,
    rise: float = 20.0,
    decoder: Literal["pixel", "pixel-unit", "pixel-square", "vertex", "vertex-unit", "vertex-square"] = "pixel",
) -> Map:
    """A picture of the asset under one light: its normal map on at the left, off at the right; or just the mesh.

    size     pixels along each side of one view
    turn     degrees that the camera goes round to the right of the mesh's front, which looks along +z
    rise     degrees that it is above the horizon
    decoder  how the frame is built, as in `reencode`

    y is up; there is no perspective. Parts without UVs or frames are drawn without the map. Raises InputError where it
    is not known which way a map's green points, or the size is none.
    """
    from tangentry.nodes.maps.picture import camera, draw

    if not 1 <= size <= LARGEST:
        raise InputError(asset.name, "", f"a picture of {size} pixels", f"from 1 to {LARGEST}")
    mapped, axes = _mapped(asset, map), camera(turn, rise)
    views = [draw(mapped, axes, size, 2, decoder, on) for on in ((True, False) if mapped.sheets else (False,))]
    return Map((Sheet("", np.concatenate(views, axis=1), "colour", name="preview"),))


def _mapped(asset: Asset, map: Map | None) -> Mapped:
    from tangentry.nodes.maps.picture import Mapped
    from tangentry.nodes.maps.surface import surface_of
    from tangentry.nodes.normals import normals

    sheets = [sheet for sheet in (map.sheets if map else ()) if sheet.holds == "normal"]
    for sheet in sheets:
        if sheet.space == "tangent" and sheet.green == "undecided":
            found = "it is not known whether its green points up or down"
            raise InputError(sheet.name or "map", "", found, "state it: texture, green: up or down")
    columns: list[list[np.ndarray]] = [[], [], [], []]
    strengths = [1.0] * len(sheets)
    ready = normals(asset)
    for row, part in enumerate(ready.parts):
        number = _sheet_of(asset, part, sheets)
        if number >= 0:
            surface = surface_of(ready, [row], needs_frames=sheets[number].space != "object")
            pieces = surface.positions, surface.frames, surface.places
            use = asset.materials[part.material].tangent_space_map if part.material >= 0 else None
            strengths[number] = use.strength if use is not None else 1.0
        else:
            pieces = _bare(part)
        for column, piece in zip(columns, (*pieces, np.full(len(pieces[0]), number, np.int32)), strict=True):
            column.append(piece)
    if not columns[0]:
        raise InputError(asset.name, "", "it has no parts to draw", "export it again")
    positions, frames, places, numbers = (np.concatenate(column) for column in columns)
    return Mapped(positions, frames, places, numbers, sheets, strengths)


def _sheet_of(asset: Asset, part: Part, sheets: list[Sheet]) -> int:
    """The number of the sheet that a part has; -1 where it has none, or nothing to map it by."""
    name = asset.materials[part.material].name if part.material >= 0 else ""
    found = next((k for k, sheet in enumerate(sheets) if sheet.material in ("", name)), -1)
    if found < 0 or not part.uvs or part.normals is None or (part.frames is None and sheets[found].space != "object"):
        return -1
    return found


def _bare(part: Part) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Positions and normals of a part, with nothing to map it by."""
    from tangentry.nodes.geometry.triangles import triangulate

    triangles, _ = triangulate(part)
    assert part.normals is not None
    frames = np.zeros((len(triangles), 3, 10), np.float32)
    frames[..., :3] = part.normals.values[part.normals.index[triangles]]
    return part.points.values[part.points.index[triangles]], frames, np.zeros((len(triangles), 3, 2))
