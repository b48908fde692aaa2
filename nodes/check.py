"""The battery of checks."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

from tangentry.nodes.checks.ids import refuse_unknown
from tangentry.nodes.model import Asset
from tangentry.pipeline.flow import Finding, Findings


def check(
    asset: Asset,
    *,
    skew: float | None = None,
    degenerate: float = 0.05,
    stretch: float = 4.0,
    density: float = 4.0,
    overlap: float = 0.01,
    map_size: int = 0,
    mip: int = 2,
    hard: float = 60.0,
    normal: float = 90.0,
    lean: float = 5.0,
    explained: float = 30.0,
    animations: int = 0,
    motion_skew: float = 15.0,
    motion_stretch: float = 2.0,
    severity: dict[str, Literal["fault", "warning", "note", "off"]] = {},  # noqa: B006
    accept: dict[str, str] = {},  # noqa: B006
) -> Findings:
    """What is wrong with the asset, each finding with its faces or corners and the measured value beside the limit.

    skew        degrees that tangent and bitangent may be away from square; beyond a limit that is set it is a fault
    degenerate  share of a part's surface that may have no UV area before it is a fault
    stretch     how many times as long as the mean of its chart a texel may be on the surface (L-infinity stretch,
                Sander et al. 2001)
    density     factor by which a chart's texel density may differ from that of the middle of the surface
    overlap     share of a face that may lie over other faces in UV space, 0 to 1
    map_size    texels along the side of the map that charts must stay apart on; 0: the size of the material's map
    mip         level of that map, from 0, down to which charts must not blend
    hard        degrees between faces beyond which the border of a chart should be a hard edge
    normal      degrees that a normal may be from its face
    lean        degrees that a tangent may be off the plane of its normal
    explained   degrees that a tangent from the file may be from what the UVs give
    animations  moments at which each animation of the file is looked at, evenly from its first key to its last; 0: none
    motion_skew  degrees by which skew may grow while the mesh moves
    motion_stretch  factor by which stretch may grow while the mesh moves
    severity    of findings, by id: fault, warning, note, or off
    accept      findings that are known, by id, each with the reason

    Only a fault holds an asset back. Raises InputError for an id that no finding has.
    """
    from tangentry.nodes.checks.edges import edge_findings
    from tangentry.nodes.checks.facts import facts_of
    from tangentry.nodes.checks.frames import frame_findings
    from tangentry.nodes.checks.gutter import gutter_findings
    from tangentry.nodes.checks.motion import motion_findings
    from tangentry.nodes.checks.overlap import overlap_findings
    from tangentry.nodes.checks.shape import shape_findings
    from tangentry.nodes.checks.stored import mixed_findings
    from tangentry.nodes.checks.stretch import spread_findings
    from tangentry.nodes.checks.uvs import uv_findings
    from tangentry.nodes.checks.vertices import vertex_findings
    from tangentry.nodes.checks.view import views_of

    refuse_unknown(asset.name, "severity", severity)
    refuse_unknown(asset.name, "accept", accept)
    views = views_of(asset)
    found: list[Finding] = []
    for view in views:
        found += [
            *uv_findings(view, skew, degenerate),
            *spread_findings(view, stretch, density),
            *gutter_findings(view, map_size, mip),
            *shape_findings(view, normal),
            *edge_findings(view, hard),
            *vertex_findings(view),
            *frame_findings(view, lean, explained),
        ]
    moving, growth = motion_findings(views, animations, motion_skew, motion_stretch)
    found += [*overlap_findings(views, overlap), *mixed_findings(asset, found), *moving]
    judged = (_judged(one, severity, accept) for one in found if severity.get(one.id) != "off")
    return Findings(asset.name, tuple(judged), facts_of(views) | growth)


def _judged(
    finding: Finding, severity: dict[str, Literal["fault", "warning", "note", "off"]], accept: dict[str, str]
) -> Finding:
    return replace(finding, severity=severity.get(finding.id, finding.severity), accepted=accept.get(finding.id, ""))
