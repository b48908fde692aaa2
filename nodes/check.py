"""The battery of checks."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import Literal

import numpy as np
from tangentry.nodes.model import Asset
from tangentry.pipeline.errors import InputError, nearest
from tangentry.pipeline.flow import Array, Finding, Findings

IDS = (
    "uv-missing",
    "uv-degenerate",
    "uv-mirrored",
    "uv-skewed",
    "uv-stretched",
    "uv-out-of-tile",
    "value-not-finite",
    "face-zero-area",
    "edge-non-manifold",
    "winding-inconsistent",
    "normal-non-unit",
    "normal-far",
    "normal-inverted",
    "frame-missing",
    "frame-shared",
    "frame-fallback",
    "tangent-zero",
    "tangent-non-unit",
    "tangent-leaning",
    "tangent-unexplained",
    "tangent-without-uv",
    "side-invalid",
    "side-mixed",
    "side-flipped",
    "side-wrong",
    "map-green-down",
    "convention-mixed",
)


def check(
    asset: Asset,
    *,
    skew: float | None = None,
    degenerate: float = 0.05,
    stretch: float = 8.0,
    normal: float = 90.0,
    lean: float = 5.0,
    explained: float = 30.0,
    severity: dict[str, Literal["fault", "warning", "note", "off"]] = {},  # noqa: B006
    accept: dict[str, str] = {},  # noqa: B006
) -> Findings:
    """What is wrong with the asset, each finding with its faces or corners and the measured value beside the limit.

    skew        degrees that tangent and bitangent may be away from square; beyond a limit that is set it is a fault
    degenerate  share of a part's surface that may have no UV area before it is a fault
    stretch     how many times as long as wide a texel may be on the surface
    normal      degrees that a normal may be from its face
    lean        degrees that a tangent may be off the plane of its normal
    explained   degrees that a tangent from the file may be from what the UVs give
    severity    of findings, by id: fault, warning, note, or off
    accept      findings that are known, by id, each with the reason

    Only a fault holds an asset back. Raises InputError for an id that no finding has.
    """
    from tangentry.nodes.checks.frames import frame_findings
    from tangentry.nodes.checks.shape import shape_findings
    from tangentry.nodes.checks.uvs import uv_findings
    from tangentry.nodes.checks.view import View
    from tangentry.nodes.maps.conventions import Green

    _known(asset.name, "severity", severity)
    _known(asset.name, "accept", accept)
    found: list[Finding] = []
    greens: dict[int, Green] = {}
    for view in (View(asset, part, greens) for part in asset.parts):
        found += [
            *uv_findings(view, skew, degenerate, stretch),
            *shape_findings(view, normal),
            *frame_findings(view, lean, explained),
        ]
    found += _mixed(asset, found)
    judged = (_judged(one, severity, accept) for one in found if severity.get(one.id) != "off")
    return Findings(asset.name, tuple(judged), _facts(asset))


def _known(name: str, setting: str, given: dict[str, str]) -> None:
    for id in given:
        if id not in IDS:
            raise InputError(
                name,
                f"setting {setting}",
                f'no finding is called "{id}"',
                f"the ids are {', '.join(IDS)}.{nearest(id, IDS)}",
            )


def _judged(
    finding: Finding, severity: dict[str, Literal["fault", "warning", "note", "off"]], accept: dict[str, str]
) -> Finding:
    return replace(finding, severity=severity.get(finding.id, finding.severity), accepted=accept.get(finding.id, ""))


def _mixed(asset: Asset, found: list[Finding]) -> Iterator[Finding]:
    """Parts whose sides follow the rule beside parts whose sides are its opposite."""
    flipped = {one.part for one in found if one.id == "side-flipped"}
    stored = {
        part.name for part in asset.parts if part.frames is not None and part.frames.method == "stored" and part.uvs
    }
    if flipped and stored - flipped:
        empty: Array = np.zeros(0, np.int32)
        yield Finding(
            "convention-mixed",
            "warning",
            len(flipped),
            f"sides are opposite to the rule on {len(flipped)} parts and follow it on {len(stored - flipped)}",
            "export all parts alike",
            "",
            "",
            "",
            empty,
            np.zeros(0, np.float32),
            None,
        )


def _facts(asset: Asset) -> dict[str, float | str]:
    from tangentry.nodes.formats.vertices import vertices_of

    frames = [part.frames for part in asset.parts if part.frames is not None]
    vertices = [vertices_of(part) for part in asset.parts]
    return {
        "parts": len(asset.parts),
        "materials": len(asset.materials),
        "faces": sum(part.face_count for part in asset.parts),
        "triangles": sum(len(one.triangles) for one in vertices),
        "points": sum(len(part.points.values) for part in asset.parts),
        "vertices": sum(len(one.points) for one in vertices),
        "frames": sum(len(one.tangents) for one in frames),
        "parts without frames": len(asset.parts) - len(frames),
    }
