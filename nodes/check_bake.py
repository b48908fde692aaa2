"""What rays did not find."""

from __future__ import annotations

import numpy as np
from tangentry.nodes.model import Map, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Finding, Findings


def check_bake(hits: Map, *, missed: float = 0.0, behind: float = 0.0) -> Findings:
    """How many texels of a bake met nothing, or the detail's back, told beside the limits.

    missed  share of a sheet's texels inside charts that may meet nothing, 0 to 1; beyond it is a warning
    behind  the same of texels that meet the detail from behind

    `hits` comes from `bake` with gives: hits, whose picture shows where they are. Raises InputError for other maps.
    """
    found: list[Finding] = []
    facts: dict[str, float | str] = {}
    for sheet in hits.sheets:
        counts = _counts(sheet)
        inside = max(1, sum(counts.values()))
        facts |= {f"{sheet.material or 'map'}: texels that {name}": count for name, count in counts.items()}
        for id, name, limit, advice in (
            ("bake-missed", "met nothing", missed, "set a greater distance, or mend the detail there"),
            ("bake-behind", "met the detail from behind", behind, "set a smaller distance, or turn its faces over"),
        ):
            share = counts[name] / inside
            if counts[name]:
                found.append(
                    _finding(id, sheet, counts[name], f"{share:.2%} of the texels {name}", advice, share, limit)
                )
    return Findings(hits.sheets[0].name if hits.sheets else "bake", tuple(found), facts)


def _counts(sheet: Sheet) -> dict[str, int]:
    from tangentry.nodes.maps.bake import BEHIND, COLOURS, HIT, MISSED, OUTSIDE

    texels, states = sheet.texels, {"met the detail": HIT, "met nothing": MISSED, "met the detail from behind": BEHIND}
    counts = {}
    if texels.shape[2] == 3:
        counts = {state: int((texels == COLOURS[state]).all(axis=2).sum()) for state in (OUTSIDE, *states.values())}
    if sum(counts.values()) != texels.shape[0] * texels.shape[1]:
        raise InputError(sheet.name or "map", "", "it is no picture of hits", "bake it with gives: hits")
    return {name: counts[state] for name, state in states.items()}


def _finding(id: str, sheet: Sheet, count: int, what: str, advice: str, share: float, limit: float) -> Finding:
    severity, none = "warning" if share > limit else "note", np.zeros(1, np.int32)
    return Finding(
        id, severity, count, what, advice, sheet.name, sheet.material, "", none, np.array([share], np.float32), limit
    )
