"""Normal maps as plain directions."""

from __future__ import annotations

from dataclasses import replace

from tangentry.nodes.model import Map


def decode(map: Map) -> Map:
    """The normal maps as unit vectors, float32, y up; sheets that hold no normals are passed on as they are."""
    from tangentry.nodes.maps.encodings import decoded

    return Map(
        tuple(
            replace(sheet, texels=decoded(sheet), encoding="float", green="up") if sheet.holds == "normal" else sheet
            for sheet in map.sheets
        )
    )
