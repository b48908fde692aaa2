"""Findings on faces that lie over one another in UV space, within a part and between parts of one material."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.geometry.overlap import Overlaps, overlaps_of
from tangentry.pipeline.flow import Array, Finding


def overlap_findings(views: list[View], limit: float) -> Iterator[Finding]:
    """Findings on overlaps; `limit` is the share of a face that may lie over others."""
    groups: dict[tuple[int, int], list[View]] = {}
    for number, view in enumerate(views):
        if view.uv is not None:
            material = view.part.material if view.part.material >= 0 else -1 - number  # nothing says they share a map
            groups.setdefault((material, view.uv_set), []).append(view)
    for group in groups.values():
        yield from _within(group, limit)


def _within(group: list[View], limit: float) -> Iterator[Finding]:
    corners = np.concatenate([_uv_corners(view) for view in group])
    first_face = np.cumsum([0, *(view.part.face_count for view in group)])
    first_chart = np.cumsum([0, *(view.chart_count for view in group)])
    face = np.concatenate([view.face + start for view, start in zip(group, first_face, strict=False)])
    chart = np.concatenate(
        [
            np.where(view.chart >= 0, view.chart + start, -1)[view.face]
            for view, start in zip(group, first_chart, strict=False)
        ]
    )
    found = overlaps_of(corners, face.astype(np.int32), chart.astype(np.int32))
    if (found.other < 0).all():
        return
    count = int(first_face[-1])
    share = np.bincount(face, found.shared, count) / np.maximum(np.bincount(face, found.pixels, count), 1)
    under = np.full(count, -1)
    under[face[found.other >= 0]] = face[found.other[found.other >= 0]]
    own = np.zeros(count, bool)
    own[face[found.own]] = True
    beyond = (under >= 0) & (share > limit)
    for view, start, end in zip(group, first_face[:-1], first_face[1:], strict=True):
        for itself in (True, False):
            faces = np.flatnonzero(beyond[start:end] & (own[start:end] == itself))
            if len(faces):
                told = _told(group, first_face, int(start), faces, share, under)
                yield _finding(view, itself, faces, share[start:end][faces], told, found, limit)


def _uv_corners(view: View) -> Array:
    assert view.uv is not None
    corners: Array = view.uv.values[view.uv.index[view.triangles]].astype(np.float64)
    corners[view.copies[view.face]] = np.nan  # a copy of a face has a finding of its own
    return corners


def _told(group: list[View], first_face: Array, start: int, faces: Array, share: Array, under: Array) -> str:
    """The worst pair, both faces by name."""
    worst = int(faces[np.argmax(share[start + faces])])
    other = int(under[start + worst])
    part = int(np.searchsorted(first_face, other, side="right")) - 1
    where = "" if int(first_face[part]) == start else f' of part "{group[part].part.name}"'
    return f"{share[start + worst]:.0%} of face {worst} lies over face {other - int(first_face[part])}{where}"


def _finding(view: View, itself: bool, faces: Array, share: Array, told: str, found: Overlaps, limit: float) -> Finding:
    grid = f"seen on a grid of {found.resolution} pixels"
    if itself:
        return view.finding(
            "uv-overlapping-itself",
            "warning",
            f"faces that lie over others of their own chart; {told} ({grid})",
            "cut the chart, or unwrap it again",
            "face",
            faces,
            share,
            limit,
        )
    return view.finding(
        "uv-overlapping",
        "note",
        f"faces that lie over those of other charts; {told} ({grid})",
        "nothing, if they are meant to share texels; what is baked there can be right for one only",
        "face",
        faces,
        share,
        limit,
    )
