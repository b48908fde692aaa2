"""Findings on tangent frames: their own soundness, what they share, and whether the UVs explain those that a file brought."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.geometry.vectors import angle_between, dot, unit
from tangentry.pipeline.flow import Array, Finding

UNIT = 0.005  # how far from 1 a length may be: a tangent stored in 8 bits keeps within it
FLIPPED = 0.9  # share of corners above which opposite sides are a convention, not a mistake
JUNK = 0.25  # share of corners above which unexplained tangents make the part's shading wrong as a whole


def frame_findings(view: View, lean: float, explained: float) -> Iterator[Finding]:
    """All findings on one part's frames."""
    if view.part.frames is None:
        if view.needs_frames:
            every = np.arange(view.part.face_count)
            yield view.finding(
                "frame-missing",
                "fault",
                "the material samples a tangent-space map, but there are no frames",
                "solve them: frames",
                "face",
                every,
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
        yield from _explained(view, explained)


def _soundness(view: View, lean: float) -> Iterator[Finding]:
    frames, part = view.part.frames, view.part
    assert frames is not None
    tangent = np.nan_to_num(frames.tangents[frames.index]).astype(np.float64)
    length = np.sqrt(dot(tangent, tangent))
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
    off = np.abs(90 - angle_between(unit(tangent), unit(part.normals.values[part.normals.index].astype(np.float64))))
    leaning = ~zero & (off > lean) & (frames.bitangents is None)
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
    each = side[view.triangles]
    mixed = (each != each[:, :1]).any(axis=1) & (each != 0).all(axis=1)
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
    frames, found = view.part.frames, view.directions
    if frames is None or found is None:
        return
    turned = np.zeros(view.part.face_count)
    np.add.at(turned, view.face, found.side * found.uv_area)  # a polygon is seen from the side of most of its UV area
    side = np.where(turned > 0, 1, np.where(turned < 0, 2, 0)).astype(np.int8)
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


def _explained(view: View, limit: float) -> Iterator[Finding]:
    """Do the UVs explain the tangents that a file brought, and their sides?"""
    frames, solved = view.part.frames, view.solved
    assert frames is not None
    if solved is None:
        if view.uv is None:
            yield view.finding(
                "tangent-without-uv",
                "warning",
                "the file brings tangents, but no UVs they could follow",
                "leave the tangents out, or add the UVs",
                "corner",
                np.arange(view.part.corner_count),
            )
        return
    has_length = dot(frames.tangents.astype(np.float64), frames.tangents.astype(np.float64)) > 1e-12
    defined = ~solved.fallback[solved.index] & has_length[frames.index]
    angle = angle_between(
        unit(np.nan_to_num(frames.tangents).astype(np.float64))[frames.index], solved.tangents[solved.index]
    )
    off = defined & (angle > limit)
    if off.any():
        share = float(off.sum() / max(defined.sum(), 1))
        yield view.finding(
            "tangent-unexplained",
            "fault" if share > JUNK else "warning",
            f"tangents more than {limit:g} degrees from what the UVs give, {share:.1%} of the corners (median {np.median(angle[defined]):.1f} degrees)",
            "solve the frames again: stored: replace, unless the maps were made in these",
            "corner",
            np.flatnonzero(off),
            angle[off],
            limit,
        )
    opposite = frames.sides[frames.index] != solved.sides[solved.index]
    yield from _flipped(view, defined, opposite)
    yield from _green(view, defined, opposite)


def _flipped(view: View, defined: Array, opposite: Array) -> Iterator[Finding]:
    wrong = defined & opposite
    if not wrong.any():
        return
    if wrong.sum() <= FLIPPED * defined.sum():
        yield view.finding(
            "side-wrong",
            "warning",
            "sides opposite to what the UVs give",
            "split mirrored charts and solve again",
            "corner",
            np.flatnonzero(wrong),
        )
        return
    green = view.green.verdict if view.green is not None else "undecided"
    severity, told, advice = {
        "down": (
            "note",
            "the map's green points down, which makes that right",
            "keep sides and map together; before solving again, turn green over",
        ),
        "up": (
            "fault",
            "the map's green points up, so light comes out inverted",
            "solve the frames again: stored: replace",
        ),
        "undecided": (
            "warning",
            "a map whose green points down would make that right",
            "look which way green points; keep sides and map together",
        ),
    }[green]
    yield view.finding(
        "side-flipped",
        severity,
        f"sides opposite to the rule on {wrong.sum() / defined.sum():.1%} of the corners; {told}",
        advice,
        "corner",
        np.flatnonzero(wrong),
    )


def _green(view: View, defined: Array, opposite: Array) -> Iterator[Finding]:
    """Sides that follow the rule beside a map whose green points down."""
    if view.green is None or view.green.verdict != "down" or (defined & opposite).sum() > FLIPPED * defined.sum():
        return
    yield view.finding(
        "map-green-down",
        "warning",
        f"sides follow the rule, but the map's green seems to point down (correlation {view.green.correlation:.2f})",
        "turn green over: texture, encode with green: up",
        "",
        np.zeros(0, np.int32),
        np.array([view.green.correlation]),
    )
