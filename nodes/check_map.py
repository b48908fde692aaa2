"""What is wrong with normal maps."""

from __future__ import annotations

from dataclasses import replace
from typing import Literal

import numpy as np
from tangentry.nodes.model import Map, Sheet
from tangentry.pipeline.flow import Finding, Findings


def check_map(
    map: Map,
    made_from: Map | None = None,
    *,
    lost: float = 1.0,
    severity: dict[str, Literal["fault", "warning", "note", "off"]] = {},  # noqa: B006
    accept: dict[str, str] = {},  # noqa: B006
) -> Findings:
    """What is wrong with the normal maps, as their own texels tell, and how much an encoding cost.

    lost      degrees that a texel may have turned since `made_from`; beyond them it is a warning
    severity  of findings, by id: fault, warning, note, or off
    accept    findings that are known, by id, each with the reason

    Told are: maps that are something else (heights, object space, two channels), normals that are not unit or point
    into the surface, an sRGB mistake, losses and blocks of a compression, a flat colour off 128, and green that points
    the other way than was stated. `made_from` is the map before it was encoded: the angle between the two is told as
    mean and largest; or the heights that it came from: then only sizes are compared. Raises InputError for an id that
    no finding has.
    """
    from tangentry.nodes.checks.ids import refuse_unknown
    from tangentry.nodes.maps.judging import MAP_IDS, map_findings

    name = map.sheets[0].name if map.sheets else "map"
    refuse_unknown(name, "severity", severity, MAP_IDS)
    refuse_unknown(name, "accept", accept, MAP_IDS)
    found: list[Finding] = []
    facts: dict[str, float | str] = {}
    for sheet in (one for one in map.sheets if one.holds == "normal"):
        found += map_findings(sheet)
        before = _before(sheet, made_from)
        if before is not None and before.texels.shape[:2] != sheet.texels.shape[:2]:
            found.append(_mismatch(sheet, before))
        elif before is not None and before.holds == "normal":
            found.append(_error(sheet, before, lost))
        facts |= {f"{sheet.material or 'map'}: size": f"{sheet.texels.shape[1]} x {sheet.texels.shape[0]}"}
    judged = (
        replace(one, severity=severity.get(one.id, one.severity), accepted=accept.get(one.id, ""))
        for one in found
        if severity.get(one.id) != "off"
    )
    return Findings(name, tuple(judged), facts)


def _before(sheet: Sheet, made_from: Map | None) -> Sheet | None:
    sheets = made_from.sheets if made_from is not None else ()
    return next((one for one in sheets if (one.material, one.level) == (sheet.material, sheet.level)), None)


def _mismatch(sheet: Sheet, before: Sheet) -> Finding:
    (height, width), (rows, columns) = sheet.texels.shape[:2], before.texels.shape[:2]
    return Finding(
        "map-size",
        "warning",
        1,
        f"it has {width} x {height} texels, what it was made from {columns} x {rows}",
        "make it at the size of its source",
        sheet.name,
        sheet.material,
        "",
        np.zeros(0, np.int32),
        np.zeros(0, np.float32),
        None,
    )


def _error(sheet: Sheet, before: Sheet, lost: float) -> Finding:
    from tangentry.nodes.geometry.vectors import angle_between
    from tangentry.nodes.maps.encodings import decoded

    degrees = angle_between(decoded(before).reshape(-1, 3), decoded(sheet).reshape(-1, 3))
    largest, mean = float(degrees.max()), float(degrees.mean())
    return Finding(
        "map-error",
        "warning" if largest > lost else "note",
        int((degrees > lost).sum()) or 1,
        f"encoded as {sheet.encoding}, its normals are {mean:.4g} degrees off on average, {largest:.4g} at most",
        "take more bits or another encoding" if largest > lost else "",
        sheet.name,
        sheet.material,
        "texel",
        np.array([int(degrees.argmax())], np.int32),
        np.array([largest], np.float32),
        lost,
    )
