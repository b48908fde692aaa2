"""Normals kept, or built anew."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

from tangentry.nodes.model import Asset, Part


def normals(
    asset: Asset,
    *,
    method: Literal["keep", "face", "area", "angle", "crease", "smoothing"] = "keep",
    crease: float = 30.0,
) -> Asset:
    """The asset with a normal at every corner.

    method   keep: authored normals stay, parts without get them by their smoothing groups, else by face as glTF 2.0
             (3.7.2.1) wants; face, area, angle, crease, smoothing: built anew
    crease   for `crease`: edges whose faces stand at more than this many degrees are hard

    Frames that a part had are dropped with its normals. Sources: Thuermer & Wuethrich 1998 (angle), Max 1999 (area).
    """
    return replace(asset, parts=tuple(_with_normals(part, method, crease) for part in asset.parts))


def _with_normals(part: Part, method: str, crease: float) -> Part:
    from tangentry.nodes.geometry.normals import build_normals

    if method == "keep":
        if part.normals is not None:
            return part
        method = "smoothing" if part.smoothing is not None and part.smoothing.any() else "face"
    return replace(part, normals=build_normals(part, method, crease), frames=None, vertices=None)
