"""Two ways of shading held against each other, as figures."""

from __future__ import annotations

from typing import Literal

import numpy as np
from tangentry.nodes.model import Asset, Map
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, Finding, Findings

MOST_LISTED = 1000  # texels that a finding lists, the worst first


def compare(
    asset: Asset,
    other: Asset | None = None,
    map: Map | None = None,
    other_map: Map | None = None,
    *,
    decoder: Literal["pixel", "pixel-unit", "pixel-square", "vertex", "vertex-unit", "vertex-square"] = "pixel",
    other_decoder: Literal["pixel", "pixel-unit", "pixel-square", "vertex", "vertex-unit", "vertex-square"]
    | None = None,
    limit: float | None = None,
    size: int = 1024,
) -> Findings:
    """The angle between what two decoders shade, texel by texel: mean, median, 99th percentile and largest.

    decoder        how the first's decoder builds its frame, as in `reencode`
    other_decoder  the same of the other; by default the first's
    limit          degrees by which a texel may differ; beyond it is a fault
    size           texels along both sides, where there is no map: each is then taken to lean 45 degrees

    What is left out is the same on both sides: two assets under one map, one asset under two maps or two decoders.
    Raises InputError where nothing differs, or maps are of different sizes or materials. `difference` draws it.
    """
    from tangentry.nodes.maps.shading import compared

    if other is None and other_map is None and other_decoder is None:
        raise InputError(asset.name, "", "nothing to compare it with", "give `other`, `other_map` or `other_decoder`")
    sheets = compared(
        asset, map, decoder, other or asset, map if other_map is None else other_map, other_decoder or decoder, size
    )
    every = np.concatenate([sheet.degrees[np.isfinite(sheet.degrees)] for sheet in sheets])
    items = tuple(_finding(sheet.material, sheet.degrees, limit) for sheet in sheets)
    return Findings(asset.name, items, {"compared texels": float(len(every)), **_figures(every)})


def _figures(degrees: Array) -> dict[str, float | str]:
    if not len(degrees):
        return {}
    named = {"mean": degrees.mean(dtype=np.float64), "median": np.median(degrees)}
    named |= {"p99": np.percentile(degrees, 99), "largest": degrees.max()}
    return {f"{name} difference, degrees": round(float(value), 6) for name, value in named.items()}


def _finding(material: str, degrees: Array, limit: float | None) -> Finding:
    flat = degrees.ravel()
    beyond = np.nonzero(np.isfinite(flat) & (flat > (limit or 0)))[0]
    worst = beyond[np.argsort(-flat[beyond], kind="stable")][:MOST_LISTED]
    sure = flat[np.isfinite(flat)]
    mean, largest = (float(sure.mean(dtype=np.float64)), float(sure.max())) if len(sure) else (0.0, 0.0)
    return Finding(
        "shading-differs",
        "fault" if limit is not None and len(beyond) else "note",
        len(beyond),
        f"shading differs by {mean:.4g} degrees on average, {largest:.4g} at most",
        "re-encode the map for these frames" if len(beyond) else "",
        "",
        material,
        "texel",
        worst.astype(np.int32),
        flat[worst],
        limit,
    )
