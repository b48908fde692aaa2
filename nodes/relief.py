"""Height maps as normal maps, and back."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

import numpy as np
from tangentry.nodes.model import Asset, Map, Part, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array


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
    size    width of the whole map on the surface, in the asset's unit; by default as the asset's UVs have it, u and v apart
    edge    wrap: the map tiles; clamp: it ends at its border
    slope   central differences, or Scharr's operator

    With an asset and no size, the texel's size along u and v is the mean over its faces of how far a step of u or v goes
    on the surface, so slopes come out right on charts that are stretched alike. Heights from normals need a map that
    tiles (Frankot & Chellappa 1988). Raises InputError where neither size nor asset is given.
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


def _texel(sheet: Sheet, asset: Asset | None, size: float | None, rows: int, columns: int) -> tuple[float, float]:
    """Width and height of a texel on the surface."""
    if size is not None:
        return size / columns, size / columns
    parts = [part for part in (asset.parts if asset else ()) if part.uvs and _has(asset, part, sheet.material)]
    if not parts:
        raise InputError(
            sheet.name or "relief",
            "",
            "how large a texel is on the surface is not known",
            "set `size`, or give the asset it lies on",
        )
    steps = np.array([_steps(part) for part in parts])
    along_u, along_v = np.average(steps[:, :2], axis=0, weights=np.maximum(steps[:, 2], 1e-30))
    return float(along_u) / columns, float(along_v) / rows


def _has(asset: Asset | None, part: Part, material: str) -> bool:
    return asset is None or not material or (part.material >= 0 and asset.materials[part.material].name == material)


def _steps(part: Part) -> tuple[float, float, float]:
    """How far a step of 1 in u and in v goes on a part, averaged over its area; and the area."""
    from tangentry.nodes.geometry.triangles import triangulate

    triangles, _ = triangulate(part)
    p = part.points.values[part.points.index[triangles]].astype(np.float64)
    q = part.uvs[0].values[part.uvs[0].index[triangles]].astype(np.float64)
    d1, d2, e1, e2 = p[:, 1] - p[:, 0], p[:, 2] - p[:, 0], q[:, 1] - q[:, 0], q[:, 2] - q[:, 0]
    det = e1[:, 0] * e2[:, 1] - e2[:, 0] * e1[:, 1]
    area = np.linalg.norm(np.cross(d1, d2), axis=1) / 2
    sound = (np.abs(det) > 1e-12) & (area > 0)
    if not sound.any():
        return 1.0, 1.0, 0.0
    d1, d2, e1, e2, det, area = (a[sound] for a in (d1, d2, e1, e2, det, area))
    along_u = np.linalg.norm(e2[:, 1:] * d1 - e1[:, 1:] * d2, axis=1) / np.abs(det)
    along_v = np.linalg.norm(e1[:, :1] * d2 - e2[:, :1] * d1, axis=1) / np.abs(det)
    return float(np.average(along_u, weights=area)), float(np.average(along_v, weights=area)), float(area.sum())
