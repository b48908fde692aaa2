"""Findings on the shape itself: values, faces, normals."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.geometry.vectors import angle_between, dot
from tangentry.pipeline.flow import Array, Finding


def shape_findings(view: View, normal: float) -> Iterator[Finding]:
    """All findings on one part's shape."""
    yield from _non_finite(view)
    yield from _zero_area(view)
    yield from _copies(view)
    yield from _normals(view, normal)


def _non_finite(view: View) -> Iterator[Finding]:
    part = view.part
    streams = {"positions": part.points, "normals": part.normals} | {f"UV set {n}": uv for n, uv in enumerate(part.uvs)}
    for name, stream in streams.items():
        if stream is not None and not np.isfinite(stream.values).all():
            bad = ~np.isfinite(stream.values).all(axis=1)[stream.index]
            yield view.finding(
                "value-not-finite",
                "fault",
                f"{name} that are not finite numbers",
                "export the mesh again",
                "corner",
                np.flatnonzero(bad),
            )
    if part.frames is not None and not np.isfinite(part.frames.tangents).all():
        bad = ~np.isfinite(part.frames.tangents).all(axis=1)[part.frames.index]
        yield view.finding(
            "value-not-finite",
            "fault",
            "tangents that are not finite numbers",
            "solve the frames again: stored: replace",
            "corner",
            np.flatnonzero(bad),
        )


def _zero_area(view: View) -> Iterator[Finding]:
    total = view.face_area
    empty = np.flatnonzero(total <= 1e-12 * max(float(total.max(initial=0)), 1e-300))
    if len(empty):
        yield view.finding("face-zero-area", "warning", "faces without area", "remove them", "face", empty)


def _copies(view: View) -> Iterator[Finding]:
    copies = np.flatnonzero(view.copies)
    if len(copies):
        yield view.finding(
            "face-duplicate",
            "warning",
            "faces that lie exactly on an earlier one and look the same way: they flicker",
            "remove them",
            "face",
            copies,
        )


def _normals(view: View, limit: float) -> Iterator[Finding]:
    part = view.part
    if part.normals is None:
        return
    corner = view.triangles.ravel()
    row = part.normals.index[corner]
    length = np.sqrt(dot(part.normals.values, part.normals.values))
    unfit = (np.abs(length - 1) > 0.01)[row]
    if unfit.any():
        yield view.finding(
            "normal-non-unit",
            "fault",
            "normals that are not of length one",
            "normalise them on export, or rebuild them: normals",
            "corner",
            np.unique(corner[unfit]),
            None,
            0.01,
        )
    face_normal = np.repeat(view.triangle_normal.astype(np.float32), 3, axis=0)
    area = np.repeat(view.area, 3)
    angle = angle_between(part.normals.values[row], face_normal)
    far = ~unfit & (area > 0) & (angle > limit)
    if far.any():
        share = float(area[far].sum() / max(area.sum(), 1e-300))
        where, worst = _worst(corner[far], angle[far])
        inverted = share > 0.5
        yield view.finding(
            "normal-inverted" if inverted else "normal-far",
            "fault" if inverted else "warning",
            f"normals up to {worst.max():.0f} degrees from their face (limit {limit:g}), {share:.0%} of the surface",
            "turn the faces or the normals over" if inverted else "look at the shading there, or rebuild them: normals",
            "corner",
            where,
            worst,
            limit,
        )


def _worst(where: Array, value: Array) -> tuple[Array, Array]:
    """Each place once, with its greatest value."""
    places, row = np.unique(where, return_inverse=True)
    worst = np.zeros(len(places))
    np.maximum.at(worst, row, value)
    return places, worst
