"""Findings on UVs: missing, without area, mirrored, skewed, stretched, outside the tile."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.geometry.vectors import angle_between
from tangentry.pipeline.flow import Array, Finding

SKEW_NOTICED = 60.0  # degrees from square at which skew is worth a word where no limit is set
AGAINST_SPACE = 1e-10  # a triangle whose UV area is below this share of what its surroundings have holds no texels


def uv_findings(view: View, skew: float | None, degenerate: float, stretch: float) -> Iterator[Finding]:
    """All findings on one part's UVs."""
    if view.uv is None:
        if view.needs_frames:
            every = np.arange(view.part.face_count)
            yield view.finding(
                "uv-missing",
                "fault",
                "the material samples a tangent-space map, but there are no UVs",
                "unwrap the mesh",
                "face",
                every,
            )
        return
    yield from _degenerate(view, degenerate)
    yield from _mirrored(view)
    yield from _skewed(view, skew)
    yield from _stretched(view, stretch)
    yield from _out_of_tile(view)


def without_uv_area(view: View) -> Array:
    """(triangles,) bool: with area in space and none in UV space."""
    assert view.directions is not None
    real = view.area > 1e-12 * max(float(view.area.max(initial=0)), 1e-300)
    uv_area = view.directions.uv_area
    flat = (view.directions.side == 0) | (uv_area <= AGAINST_SPACE * float(uv_area.max(initial=0)))
    both: Array = real & flat
    return both


def _degenerate(view: View, limit: float) -> Iterator[Finding]:
    flat = without_uv_area(view)
    if flat.any():
        share = float(view.area[flat].sum() / view.area.sum())
        severity = "fault" if share > limit else "warning"
        yield view.finding(
            "uv-degenerate",
            severity,
            f"faces whose UVs have no area, {share:.1%} of the surface: nothing defines a tangent there",
            "unwrap these faces",
            "face",
            view.faces_of(flat),
            None,
            limit,
        )


def _mirrored(view: View) -> Iterator[Finding]:
    assert view.directions is not None
    side, weight = view.directions.side, view.area
    majority = 1 if weight[side > 0].sum() >= weight[side < 0].sum() else -1
    mirrored = side == -majority
    if mirrored.any():
        yield view.finding(
            "uv-mirrored",
            "note",
            "faces seen from the other side in UV space than most",
            "nothing, if they are meant to share texels",
            "face",
            view.faces_of(mirrored),
        )


def _skewed(view: View, limit: float | None) -> Iterator[Finding]:
    found = view.directions
    assert found is not None
    sound = found.side != 0
    off = np.zeros(len(sound))
    off[sound] = np.abs(90 - angle_between(found.tangent[sound], found.bitangent[sound]))
    beyond = sound & (off > (SKEW_NOTICED if limit is None else limit)) & (view.area > 0)
    if beyond.any():
        faces = view.faces_of(beyond)
        worst = np.zeros(view.part.face_count)
        np.maximum.at(worst, view.face[beyond], off[beyond])
        shown = SKEW_NOTICED if limit is None else limit
        yield view.finding(
            "uv-skewed",
            "warning" if limit is None else "fault",
            f"tangent and bitangent up to {worst.max():.1f} degrees away from square (limit {shown:g})",
            "unwrap with less shear, or bake and decode with skewed frames alike",
            "face",
            faces,
            worst[faces],
            shown,
        )


def singular_values(view: View) -> tuple[Array, Array]:
    """(triangles,) the greatest and least stretch of the map from UV space onto the surface (Sander et al. 2001, section 3)."""
    assert view.uv is not None
    p = view.part.points.values[view.part.points.index[view.triangles]].astype(np.float64)
    q = view.uv.values[view.uv.index[view.triangles]].astype(np.float64)
    d1, d2, e1, e2 = p[:, 1] - p[:, 0], p[:, 2] - p[:, 0], q[:, 1] - q[:, 0], q[:, 2] - q[:, 0]
    det = e1[:, 0] * e2[:, 1] - e2[:, 0] * e1[:, 1]
    safe = np.where(det == 0, 1, det)[:, None]
    s, t = (e2[:, 1:] * d1 - e1[:, 1:] * d2) / safe, (e1[:, :1] * d2 - e2[:, :1] * d1) / safe
    a, b, c = (s * s).sum(1), (s * t).sum(1), (t * t).sum(1)
    root = np.sqrt((a - c) ** 2 + 4 * b * b)
    greatest, least = np.sqrt((a + c + root) / 2), np.sqrt(np.maximum(a + c - root, 0) / 2)
    return np.where(det == 0, np.inf, greatest), np.where(det == 0, 0, least)


def _stretched(view: View, limit: float) -> Iterator[Finding]:
    assert view.directions is not None
    sound = ~without_uv_area(view) & (view.area > 0) & (view.directions.side != 0)
    if not sound.any():
        return
    greatest, least = singular_values(view)
    ratio = np.where(sound, greatest / np.maximum(least, 1e-30), 1)
    beyond = sound & (ratio > limit)
    if beyond.any():
        faces = view.faces_of(beyond)
        worst = np.zeros(view.part.face_count)
        np.maximum.at(worst, view.face[beyond], np.minimum(ratio[beyond], 1e30))
        yield view.finding(
            "uv-stretched",
            "warning",
            f"texels up to {worst.max():.3g} times as long as wide on the surface (limit {limit:g})",
            "unwrap with less stretch",
            "face",
            faces,
            worst[faces],
            limit,
        )


def _out_of_tile(view: View) -> Iterator[Finding]:
    assert view.uv is not None
    values = view.uv.values[view.uv.index]
    outside = ((values < -1e-6) | (values > 1 + 1e-6)).any(axis=1)
    if outside.any():
        owner = np.repeat(np.arange(view.part.face_count), np.diff(view.part.starts))
        yield view.finding(
            "uv-out-of-tile",
            "note",
            "faces with UVs outside 0..1",
            "nothing, if the map tiles",
            "face",
            np.unique(owner[outside]),
        )
