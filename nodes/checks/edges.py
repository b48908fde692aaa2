"""Findings on edges: how many faces meet there, their turns, and whether hard edges and chart borders go together."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.geometry.edges import same_across
from tangentry.nodes.geometry.junctions import junctions_of
from tangentry.nodes.geometry.vectors import angle_between
from tangentry.pipeline.flow import Array, Finding

BENT = 1.0  # degrees between the normals of an edge's two faces from which it is hard


def edge_findings(view: View, hard: float) -> Iterator[Finding]:
    """Findings on one part's edges; `hard`: the degrees between faces from which a border should be hard."""
    yield from _non_manifold(view)
    yield from _winding(view)
    yield from _junctions(view)
    if view.part.normals is not None and view.uv is not None and len(view.edges.pairs):
        yield from _shading(view, hard)


def _non_manifold(view: View) -> Iterator[Finding]:
    count = view.edges.faces
    many = (view.edges.edge >= 0) & (count[view.edges.edge] > 2) if len(count) else np.zeros(0, bool)
    if many.any():
        corners, edges = np.flatnonzero(many), int((count > 2).sum())
        yield view.finding(
            "edge-non-manifold",
            "warning",
            f"{edges} edge{'s' if edges > 1 else ''} with more than two faces, up to {int(count.max())}",
            "separate the faces that should not share the edge",
            "corner",
            corners,
            count[view.edges.edge[corners]],
            2.0,
        )


def _winding(view: View) -> Iterator[Finding]:
    one, two = view.edges.pairs.T
    against = view.point[one] == view.point[two]
    if against.any():
        yield view.finding(
            "winding-inconsistent",
            "warning",
            "edges whose two faces are wound against each other",
            "make the winding consistent",
            "corner",
            one[against],
        )


def _junctions(view: View) -> Iterator[Finding]:
    """Open edges on which a corner of another face lies: cracks show there, and shading jumps."""
    edges = view.edges
    if not len(edges.faces):
        return
    corners = np.flatnonzero((edges.edge >= 0) & (edges.faces[edges.edge] == 1))
    points = view.part.points.values[view.part.points.index]
    held = corners[junctions_of(points[corners], points[edges.following[corners]])]
    if len(held):
        yield view.finding(
            "edge-t-junction",
            "warning",
            "open edges with the end of another open edge on them",
            "cut the face there, or join the points: weld",
            "corner",
            held,
        )


def _shading(view: View, hard: float) -> Iterator[Finding]:
    """The two classic causes of seams that show: hard edges inside a chart, soft normals across a sharp border."""
    assert view.part.normals is not None
    edges, faces = view.edges, view.owner[view.edges.pairs]
    normal = view.part.normals.values[view.part.normals.index]
    corner = edges.pairs[:, 0]
    bend = np.maximum(
        angle_between(normal[corner], normal[edges.opposite[:, 0]]),
        angle_between(normal[edges.following[corner]], normal[edges.opposite[:, 1]]),
    )
    inside = same_across(edges, view.uv_label) & (view.side[faces] != 0).all(axis=1)
    yield from _hard_inside(view, corner, bend, inside & (bend > BENT))
    across = angle_between(view.face_normal[faces[:, 0]], view.face_normal[faces[:, 1]])
    yield from _soft_border(view, corner, across, ~inside & (bend <= BENT) & (across > hard), hard)


def _hard_inside(view: View, corner: Array, bend: Array, guilty: Array) -> Iterator[Finding]:
    if guilty.any():
        yield view.finding(
            "edge-hard-in-chart",
            "warning",
            f"hard edges inside a chart, normals up to {bend[guilty].max():.0f} degrees apart: texels blend over them",
            "cut the chart along these edges, or make them soft",
            "corner",
            corner[guilty],
            bend[guilty],
            BENT,
        )


def _soft_border(view: View, corner: Array, across: Array, guilty: Array, limit: float) -> Iterator[Finding]:
    if guilty.any():
        yield view.finding(
            "edge-soft-on-border",
            "note",
            f"soft normals where a chart ends at a sharp edge, faces up to {across[guilty].max():.0f} degrees apart"
            f" (limit {limit:g}): the map must undo the bend on both sides alike",
            "make these edges hard",
            "corner",
            corner[guilty],
            across[guilty],
            limit,
        )
