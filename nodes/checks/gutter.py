"""Findings on gutters: charts so close that a map's smaller levels blend them."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.geometry.edges import same_across
from tangentry.nodes.geometry.gutters import gutters_of
from tangentry.nodes.geometry.overlap import overlaps_of
from tangentry.nodes.geometry.unions import number, union
from tangentry.pipeline.flow import Array, Finding

REACH = 1.5  # texels of a level that bilinear filtering reads beyond a border: one to the last centre, half to its rim
LEAST = 64  # texels along a side: a smaller map only stands in for one
MOST, WIDEST = 8192, 32  # pixels along a side of the grid that borders are drawn on, and pixels looked at around each


def gutter_findings(view: View, map_size: int, mip: int) -> Iterator[Finding]:
    """Findings on the gutters of one part's charts that lie in the tile 0..1.

    map_size   texels along a side; 0: as large as the material's map, if there is one
    mip        the level down to which charts must not blend; 0 is the map itself

    Gaps are exact, whatever the grid.
    """
    size = (map_size, map_size) if map_size else view.map_size
    if view.uv is None or size is None or view.chart_count < 2 or min(size) < LEAST:
        return
    corner = _borders(view)
    chart = view.chart[view.owner[corner]]
    texels = np.array(size, np.float64)
    uv = view.uv.values[view.uv.index].astype(np.float64)
    start, end = uv[corner] * texels, uv[view.edges.following[corner]] * texels
    inside = _in_tile(view)[chart]
    corner, chart, start, end = corner[inside], chart[inside], start[inside], end[inside]
    limit = REACH * 2**mip
    coarser = min(1.0, MOST / max(size), WIDEST / limit)
    grid = (max(1, round(size[0] * coarser)), max(1, round(size[1] * coarser)))
    gap, other = gutters_of(start * coarser, end * coarser, _stacks(view)[chart], grid, limit * coarser)
    gap, narrow = gap / coarser, other >= 0
    if narrow.any():
        worst = int(np.argmin(gap))
        between = f"charts {chart[worst]} and {chart[other[worst]]}"
        yield view.finding(
            "uv-gutter",
            "warning" if gap[worst] < REACH else "note",
            f"charts down to {gap[worst]:.2g} texels apart ({between}) on a map of {size[0]} x {size[1]}; closer than"
            f" {limit:g} they blend at level {mip}, closer than {REACH:g} in the map itself",
            "pack the charts further apart",
            "corner",
            corner[narrow],
            gap[narrow],
            limit,
        )


def _borders(view: View) -> Array:
    """Corners at which a piece of a chart's border starts."""
    edges = view.edges
    border = view.chart[view.owner] >= 0
    inner = edges.pairs[
        same_across(edges, view.uv_label)
        & (view.chart[view.owner[edges.pairs[:, 0]]] == view.chart[view.owner[edges.pairs[:, 1]]])
    ]
    border[inner] = False
    return np.flatnonzero(border)


def _in_tile(view: View) -> Array:
    """(charts,) bool: does the whole chart lie in the tile?"""
    assert view.uv is not None
    values = view.uv.values[view.uv.index]
    outside = ~((values >= -1e-6) & (values <= 1 + 1e-6)).all(axis=1)
    inside = np.ones(view.chart_count + 1, bool)
    inside[view.chart[view.owner[outside]]] = False
    return inside[:-1]


def _stacks(view: View) -> Array:
    """(charts,) int32: equal for charts that lie over one another, for which a gutter says nothing."""
    assert view.uv is not None
    chart = view.chart[view.face]
    corners = view.uv.values[view.uv.index[view.triangles]].astype(np.float64)
    found = overlaps_of(corners, view.face, chart)
    parent = np.arange(view.chart_count, dtype=np.int32)
    over = (found.other >= 0) & (chart >= 0)
    for one, two in np.unique(np.stack([chart[over], chart[found.other[over]]], axis=1), axis=0):
        if two >= 0:
            union(parent, one, two)
    stack = np.empty(view.chart_count, np.int32)
    number(parent, stack)
    return stack
