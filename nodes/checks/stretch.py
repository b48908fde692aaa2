"""Findings on how texels are spread over the surface: stretch within charts, density between them."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.geometry.stretch import singular_values, stretch_of
from tangentry.pipeline.flow import Array, Finding

TOO_SMALL = 1e-3  # share of the surface below which nobody sees a chart's density


def spread_findings(view: View, stretch: float, density: float) -> Iterator[Finding]:
    """Findings on the stretch and the texel density of one part's charts."""
    if view.uv is not None and view.chart_count:
        yield from _stretched(view, stretch)
        yield from _density(view, density)


def measured_triangles(view: View) -> tuple[Array, Array]:
    """The triangles that lie in a chart and have area, and their charts."""
    assert view.directions is not None
    chart = view.chart[view.face]
    sound = np.flatnonzero((chart >= 0) & (view.directions.side != 0) & (view.area > 0) & ~view.uv_flat)
    return sound, chart[sound]


def _stretched(view: View, limit: float) -> Iterator[Finding]:
    """Faces whose texels are longer than a chart's mean scale accounts for: L-infinity stretch (Sander et al. 2001)."""
    assert view.directions is not None and view.uv is not None
    sound, chart = measured_triangles(view)
    greatest, least = singular_values(view.triangles[sound], view.part.points, view.uv)
    area, uv_area = view.area[sound], view.directions.uv_area[sound].astype(np.float64)
    total = np.maximum(np.bincount(chart, area, view.chart_count), 1e-300)
    scale = np.sqrt(np.bincount(chart, uv_area, view.chart_count) / total)
    longest = np.zeros(len(view.triangles))
    longest[sound] = greatest * scale[chart]
    beyond = longest > limit
    if beyond.any():
        faces, worst = view.worst_of(beyond, longest)
        mean, _ = stretch_of(greatest, least, area, uv_area, chart)
        guilty = np.unique(view.chart[faces])
        yield view.finding(
            "uv-stretched",
            "warning",
            f"texels up to {worst.max():.4g} times as long as their chart's mean (L-infinity stretch; limit {limit:g};"
            f" L2 stretch of these charts up to {mean[guilty].max():.3g})",
            "unwrap with less stretch",
            "face",
            faces,
            worst,
            limit,
        )


def density_of(view: View) -> Array:
    """(charts,) float64: side of UV space per unit of length on the surface; times a map's size, its texel density."""
    assert view.directions is not None
    sound, chart = measured_triangles(view)
    area = np.bincount(chart, view.area[sound], view.chart_count)
    uv_area = np.bincount(chart, view.directions.uv_area[sound], view.chart_count)
    return np.sqrt(uv_area / np.where(area > 0, area, np.inf))


def _density(view: View, limit: float) -> Iterator[Finding]:
    if view.chart_count < 2:
        return
    density = density_of(view)
    face_area = np.bincount(view.chart[view.chart >= 0], view.face_area[view.chart >= 0], view.chart_count)
    order = np.argsort(density)
    middle = density[order[np.searchsorted(np.cumsum(face_area[order]), face_area.sum() / 2)]]
    ratio = np.maximum(density, 1e-30) / max(float(middle), 1e-30)
    off = np.maximum(ratio, 1 / ratio)
    guilty = (off > limit) & (density > 0) & (face_area > TOO_SMALL * face_area.sum())
    if guilty.any():
        faces = np.flatnonzero((view.chart >= 0) & guilty[view.chart])
        yield view.finding(
            "uv-density",
            "warning",
            f"{int(guilty.sum())} of {view.chart_count} charts have a texel density {ratio[guilty].min():.3g} to"
            f" {ratio[guilty].max():.3g} times that of the middle of the surface (limit {limit:g} either way)",
            "scale these charts, or accept it where they hardly show",
            "face",
            faces,
            ratio[view.chart[faces]],
            limit,
        )
