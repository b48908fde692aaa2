"""Counts and measures of an asset, as a table wants them."""

from __future__ import annotations

import numpy as np
from tangentry.nodes.checks.stretch import density_of, measured_triangles
from tangentry.nodes.checks.view import View
from tangentry.nodes.formats.vertices import vertices_of
from tangentry.nodes.geometry.stretch import singular_values, stretch_of
from tangentry.pipeline.flow import Array

Facts = dict[str, float | str]


def facts_of(views: list[View]) -> Facts:
    """What an asset consists of; stretch and texel density where it has charts.

    `points` counts distinct positions, `vertices` what export would write. Texel density is in sides of UV space per
    unit of length: times the size of a map, it is texels per unit.
    """
    frames = [view.part.frames for view in views if view.part.frames is not None]
    return {
        "parts": len(views),
        "materials": len(views[0].asset.materials) if views else 0,
        "faces": sum(view.part.face_count for view in views),
        "triangles": sum(len(view.triangles) for view in views),
        "corners": sum(view.part.corner_count for view in views),
        "points": sum(int(np.count_nonzero(np.bincount(view.point))) for view in views),
        "vertices": sum(len(vertices_of(view.part).points) for view in views),
        "frames": sum(len(one.tangents) for one in frames),
        "parts without frames": len(views) - len(frames),
        "charts": sum(view.chart_count for view in views),
        **_spread([view for view in views if view.chart_count]),
    }


def _spread(views: list[View]) -> Facts:
    rows = [_rows(view) for view in views]
    if not any(len(area) for _, _, area, _ in rows):  # nothing has an area and a chart
        return {}
    greatest, least, area, uv_area = (np.concatenate(column) for column in zip(*rows, strict=True))
    mean, longest = stretch_of(greatest, least, area, uv_area, np.zeros(len(area), np.int32))
    density = np.concatenate([density_of(view) for view in views])
    return {
        "L2 stretch": _short(mean[0]),
        "L-infinity stretch": _short(longest[0]),
        "texel density, least": _short(density.min()),
        "texel density, middle": _short(np.median(density)),
        "texel density, most": _short(density.max()),
    }


def _rows(view: View) -> tuple[Array, Array, Array, Array]:
    assert view.uv is not None and view.directions is not None
    sound, _ = measured_triangles(view)
    greatest, least = singular_values(view.triangles[sound], view.part.points, view.uv)
    return greatest, least, view.area[sound], view.directions.uv_area[sound].astype(np.float64)


def _short(value: float) -> float:
    return float(f"{value:.4g}")
