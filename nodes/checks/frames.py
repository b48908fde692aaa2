"""Findings on tangent frames: their own soundness, and what they share."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.stored import stored_findings
from tangentry.nodes.checks.view import View
from tangentry.nodes.geometry.vectors import angle_between, dot, unit
from tangentry.pipeline.flow import Finding

UNIT = 0.005  # how far from 1 a length may be: a tangent stored in 8 bits keeps within it


def frame_findings(view: View, lean: float, explained: float) -> Iterator[Finding]:
    """All findings on one part's frames."""
    if view.part.frames is None:
        if view.needs_frames and view.uv is not None:
            yield view.finding(
                "frame-missing",
                "fault",
                "the material samples a tangent-space map, but there are no frames",
                "solve them: frames",
                "face",
                np.arange(view.part.face_count),
            )
        return
    yield from _soundness(view, lean)
    yield from _sides(view)
    yield from _shared(view)
    if view.part.frames.fallback.any():
        corners = np.flatnonzero(view.part.frames.fallback[view.part.frames.index])
        yield view.finding(
            "frame-fallback",
            "note",
            "corners whose UVs define no tangent; one was taken from nearby or chosen",
            "unwrap the faces there if they show",
            "corner",
            corners,
        )
    if view.part.frames.method == "stored":
        yield from stored_findings(view, explained)


def _soundness(view: View, lean: float) -> Iterator[Finding]:
    frames, part = view.part.frames, view.part
    assert frames is not None
    tangents = np.nan_to_num(frames.tangents).astype(np.float64)
    length = np.sqrt(dot(tangents, tangents))[frames.index]
    zero = length < 1e-6
    if zero.any():
        yield view.finding(
            "tangent-zero",
            "fault",
            "tangents of no length",
            "solve the frames again: stored: replace",
            "corner",
            np.flatnonzero(zero),
        )
    unfit = ~zero & (np.abs(length - 1) > UNIT)
    if unfit.any():
        yield view.finding(
            "tangent-non-unit",
            "fault",
            "tangents that are not of length one",
            "solve the frames again: stored: replace",
            "corner",
            np.flatnonzero(unfit),
            length[unfit],
            UNIT,
        )
    if part.normals is None:
        return
    if frames.bitangents is not None:
        return  # skew is kept on purpose
    normals = unit(part.normals.values.astype(np.float64)).astype(np.float32)
    tangent = unit(tangents).astype(np.float32)[frames.index]
    off = np.abs(90 - angle_between(tangent, normals[part.normals.index]))
    leaning = ~zero & (off > lean)
    if leaning.any():
        yield view.finding(
            "tangent-leaning",
            "warning",
            f"tangents up to {off[leaning].max():.1f} degrees off the plane of their normal (limit {lean:g})",
            "square them: orthogonalise",
            "corner",
            np.flatnonzero(leaning),
            off[leaning],
            lean,
        )


def _sides(view: View) -> Iterator[Finding]:
    frames = view.part.frames
    assert frames is not None
    side = frames.sides[frames.index]
    if (side == 0).any():
        yield view.finding(
            "side-invalid",
            "fault",
            "frames whose side is neither +1 nor -1",
            "solve the frames again: stored: replace",
            "corner",
            np.flatnonzero(side == 0),
        )
    mixed = view.side_mixed
    if mixed.any():
        yield view.finding(
            "side-mixed",
            "fault",
            "triangles whose corners are of different sides: the bitangent turns over inside them",
            "split mirrored charts and solve again: split, frames with stored: replace",
            "face",
            view.faces_of(mixed),
        )


def _shared(view: View) -> Iterator[Finding]:
    """Frames that faces seen from both sides in UV space share: right for one side at most."""
    frames = view.part.frames
    if frames is None or view.uv is None:
        return
    side = np.where(view.side > 0, 1, np.where(view.side < 0, 2, 0)).astype(np.int8)
    seen = np.zeros(len(frames.tangents), np.int8)
    np.bitwise_or.at(seen, frames.index, np.repeat(side, np.diff(view.part.starts)))
    both = seen == 3
    if both.any():
        yield view.finding(
            "frame-shared",
            "fault",
            f"{int(both.sum())} frames shared by faces of mirrored charts: a seam will show",
            "split mirrored charts and solve again: split, frames with stored: replace",
            "corner",
            np.flatnonzero(both[frames.index]),
        )
