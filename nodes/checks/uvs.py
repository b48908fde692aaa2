"""Findings on UVs: missing, without area, mirrored, skewed, outside the tile."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.geometry.vectors import angle_between
from tangentry.pipeline.flow import Finding

SKEW_NOTICED = 60.0  # degrees from square at which skew is worth a word where no limit is set


def uv_findings(view: View, skew: float | None, degenerate: float) -> Iterator[Finding]:
    """Findings on one part's UVs as they are, face by face."""
    if view.uv is None:
        if view.needs_frames:
            yield view.finding(
                "uv-missing",
                "fault",
                "the material samples a tangent-space map, but there are no UVs",
                "unwrap the mesh",
                "face",
                np.arange(view.part.face_count),
            )
        return
    yield from _degenerate(view, degenerate)
    yield from _mirrored(view)
    yield from _skewed(view, skew)
    yield from _out_of_tile(view)


def _degenerate(view: View, limit: float) -> Iterator[Finding]:
    flat = view.uv_flat
    if flat.any():
        share = float(view.area[flat].sum() / view.area.sum())
        yield view.finding(
            "uv-degenerate",
            "fault" if share > limit else "warning",
            f"faces whose UVs have no area, {share:.1%} of the surface: nothing defines a tangent there",
            "unwrap these faces",
            "face",
            view.faces_of(flat),
            None,
            limit,
        )


def _mirrored(view: View) -> Iterator[Finding]:
    """glTF's v points down: only the majority says which side is the plain one."""
    weight = view.face_area
    majority = 1 if weight[view.side > 0].sum() >= weight[view.side < 0].sum() else -1
    mirrored = np.flatnonzero(view.side == -majority)
    if len(mirrored):
        charts = len(np.unique(view.chart[mirrored]))
        yield view.finding(
            "uv-mirrored",
            "note",
            f"faces seen from the other side in UV space than most, in {charts} of {view.chart_count} charts",
            "nothing, if they are meant to share texels",
            "face",
            mirrored,
        )


def _skewed(view: View, limit: float | None) -> Iterator[Finding]:
    found = view.directions
    assert found is not None
    sound = found.side != 0
    off = np.zeros(len(sound))
    off[sound] = np.abs(90 - angle_between(found.tangent[sound], found.bitangent[sound]))
    shown = SKEW_NOTICED if limit is None else limit
    beyond = sound & (off > shown) & (view.area > 0)
    if beyond.any():
        faces, worst = view.worst_of(beyond, off)
        yield view.finding(
            "uv-skewed",
            "warning" if limit is None else "fault",
            f"tangent and bitangent up to {worst.max():.1f} degrees away from square (limit {shown:g})",
            "unwrap with less shear, or bake and decode with skewed frames alike",
            "face",
            faces,
            worst,
            shown,
        )


def _out_of_tile(view: View) -> Iterator[Finding]:
    assert view.uv is not None
    values = view.uv.values[view.uv.index]
    outside = ((values < -1e-6) | (values > 1 + 1e-6)).any(axis=1)
    if outside.any():
        yield view.finding(
            "uv-out-of-tile",
            "note",
            "faces with UVs outside 0..1",
            "nothing, if the map tiles",
            "face",
            np.unique(view.owner[outside]),
        )
