"""Findings on tangents that a file brought: do its UVs explain them, and their sides?"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.geometry.vectors import angle_between, dot, unit
from tangentry.nodes.model import Asset
from tangentry.pipeline.flow import Array, Finding

FLIPPED = 0.9  # share of corners above which opposite sides are a convention, not a mistake
JUNK = 0.25  # share of corners above which unexplained tangents make the part's shading wrong as a whole


def stored_findings(view: View, limit: float) -> Iterator[Finding]:
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
            f"tangents more than {limit:g} degrees from what the UVs give, {share:.1%} of the corners"
            f" (median {np.median(angle[defined]):.1f} degrees)",
            "solve the frames again: stored: replace, unless the maps were made in these",
            "corner",
            np.flatnonzero(off),
            angle[off],
            limit,
        )
    opposite = frames.sides[frames.index] == -solved.sides[solved.index]
    yield from _flipped(view, defined, opposite)
    yield from _green(view, defined, opposite)


def _flipped(view: View, defined: Array, opposite: Array) -> Iterator[Finding]:
    wrong = defined & opposite
    if not wrong.any():
        return
    if wrong.sum() <= FLIPPED * defined.sum():
        yield from _wrong(view, wrong)
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


def _wrong(view: View, wrong: Array) -> Iterator[Finding]:
    """Whole triangles of the wrong side; one that is of both sides has a finding of its own."""
    mixed = np.zeros(view.part.corner_count, bool)
    mixed[view.triangles[view.side_mixed]] = True
    corners = np.flatnonzero(wrong & ~mixed)
    if len(corners):
        yield view.finding(
            "side-wrong",
            "warning",
            "sides opposite to what the UVs give",
            "split mirrored charts and solve again",
            "corner",
            corners,
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


def mixed_findings(asset: Asset, found: list[Finding]) -> Iterator[Finding]:
    """Parts whose sides follow the rule beside parts whose sides are its opposite."""
    flipped = sum(one.id == "side-flipped" for one in found)  # one for each part; names may be common to several
    stored = sum(part.frames is not None and part.frames.method == "stored" and bool(part.uvs) for part in asset.parts)
    if 0 < flipped < stored:
        yield Finding(
            "convention-mixed",
            "warning",
            flipped,
            f"sides are opposite to the rule on {flipped} parts and follow it on {stored - flipped}",
            "export all parts alike",
            "",
            "",
            "",
            np.zeros(0, np.int32),
            np.zeros(0, np.float32),
            None,
        )
