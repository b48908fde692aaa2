"""Findings on a mesh in motion: how far skew and stretch grow while its file's animations play."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import NamedTuple

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.formats.gltf_motion import Moment, Motion
from tangentry.nodes.geometry.directions import triangle_directions
from tangentry.nodes.geometry.stretch import singular_values
from tangentry.nodes.geometry.vectors import angle_between
from tangentry.nodes.model import Part
from tangentry.pipeline.flow import Array, Finding

Facts = dict[str, float | str]


class Lie(NamedTuple):
    """How the UVs lie on a part's triangles in one pose."""

    skew: Array  # (triangles,) degrees that tangent and bitangent are from square; NaN where there are none
    stretch: Array  # (triangles,) L-infinity stretch, 1 where a texel is as long as the part's mean; NaN likewise


class Growth:
    """How far one figure has grown, triangle by triangle, and where it grew most."""

    def __init__(self, triangles: int, least: float) -> None:
        self.most = np.full(triangles, least)
        self.top, self.where = least, (0, "", 0.0, 0)

    def take(self, grown: Array, moment: Moment) -> None:
        """Take in what has grown at a moment."""
        grown = np.where(np.isfinite(grown), grown, self.most)
        np.maximum(self.most, grown, out=self.most)
        worst = int(np.argmax(grown)) if len(grown) else 0
        if len(grown) and grown[worst] > self.top:
            self.top, self.where = float(grown[worst]), (worst, moment.animation, moment.time, moment.number)


def motion_findings(views: list[View], samples: int, skew: float, stretch: float) -> tuple[list[Finding], Facts]:
    """Findings on all parts, and the greatest growth among them; none where nothing is animated.

    samples   moments of each animation that are looked at
    skew      degrees by which skew may grow
    stretch   factor by which stretch may grow
    """
    asset = views[0].asset if views else None
    if samples < 1 or asset is None or asset.document is None or asset.document.kind != "gltf":
        return [], {}
    motion = Motion(asset, asset.document)
    found: list[Finding] = []
    tops: list[tuple[float, float]] = []
    for view in views:
        with np.errstate(all="ignore"):  # what becomes infinite is left out of account
            grown = _grown(view, motion, samples)
        if grown is not None:
            found += _judged(view, *grown, samples, (skew, stretch))
            tops.append((grown[0].top, grown[1].top))
    if not tops:
        return found, {}
    most = np.max(tops, axis=0)
    return found, {
        "skew growth in motion": float(f"{most[0]:.4g}"),
        "stretch growth in motion": float(f"{most[1]:.4g}"),
    }


def _grown(view: View, motion: Motion, samples: int) -> tuple[Growth, Growth] | None:
    """How far a part's skew and stretch grow; None where it has no UVs or does not move."""
    if view.uv is None or view.part.source is None or not len(view.triangles):
        return None
    rest, moves = _lie(view, view.part), False
    skew, stretch = Growth(len(view.triangles), 0.0), Growth(len(view.triangles), 1.0)
    for animation in motion.animations:
        places = motion.places(view.part, animation)
        for moment in motion.moments(animation, samples) if places else ():
            for node in places:
                moves = True
                now = _lie(view, replace(view.part, points=motion.moved(view.part, node, moment)))
                skew.take(now.skew - rest.skew, moment)
                stretch.take(now.stretch / rest.stretch, moment)
    return (skew, stretch) if moves else None


def _lie(view: View, part: Part) -> Lie:
    assert view.uv is not None
    found = triangle_directions(part, view.triangles, view.uv, view.asset.v_down)
    sound = (found.side != 0) & (found.area > 0) & np.isfinite(found.area)
    skew, stretch = np.full(len(sound), np.nan), np.full(len(sound), np.nan)
    skew[sound] = np.abs(90 - angle_between(found.tangent[sound], found.bitangent[sound]))
    greatest, _ = singular_values(view.triangles[sound], part.points, view.uv)
    total = found.area[sound].sum(dtype=np.float64), found.uv_area[sound].sum(dtype=np.float64)
    stretch[sound] = greatest * np.sqrt(total[1] / total[0]) if sound.any() else 1.0
    return Lie(skew, stretch)


def _judged(view: View, skew: Growth, stretch: Growth, samples: int, limits: tuple[float, float]) -> Iterator[Finding]:
    advice = "spread weights over more joints there, or bake and decode with frames of the moved mesh"
    for id, growth, limit, told in (
        (
            "motion-skew",
            skew,
            limits[0],
            "tangent and bitangent get up to {:.1f} degrees further from square than at rest",
        ),
        ("motion-stretch", stretch, limits[1], "texels get up to {:.3g} times as long as at rest"),
    ):
        beyond = growth.most > limit
        if beyond.any():
            triangle, animation, time, number = growth.where
            faces, worst = view.worst_of(beyond, growth.most)
            yield view.finding(
                id,
                "warning",
                f"{told.format(growth.top)} (limit {limit:g}); worst at face {view.face[triangle]},"
                f' {time:.3f} s into "{animation}" (sample {number} of {samples})',
                advice,
                "face",
                faces,
                worst,
                limit,
            )
