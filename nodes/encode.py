"""Normal maps in the encoding that a target expects."""

from __future__ import annotations

from typing import Literal

from tangentry.nodes.model import Map, Sheet
from tangentry.pipeline.errors import InputError


def encode(
    map: Map,
    *,
    encoding: Literal["unorm", "snorm", "xy", "octahedral", "float"] = "unorm",
    bits: Literal[8, 16] = 8,
    green: Literal["up", "down"] = "up",
) -> Map:
    """The normal maps in one encoding; sheets that hold no normals are passed on as they are.

    encoding  unorm: three channels, -1..1 over all codes; snorm: offset by half, 0 exact; xy: two channels, z rebuilt by
              the decoder; octahedral: two channels (Cigolle et al. 2014); float: as they are
    bits      of each channel
    green     up: y grows up the image, as glTF 2.0 has it; down

    Where only green changes, codes are flipped exactly. Raises InputError where a map's green is undecided.
    """
    return Map(
        tuple(_encoded(sheet, encoding, bits, green) if sheet.holds == "normal" else sheet for sheet in map.sheets)
    )


def _encoded(sheet: Sheet, encoding: str, bits: int, green: str) -> Sheet:
    from tangentry.nodes.maps.encodings import encoded

    if sheet.green == "undecided" and sheet.space == "tangent":
        raise InputError(
            sheet.name or "map",
            "",
            "it is not known whether its green points up or down",
            "state it: texture, green: up or down",
        )
    return encoded(sheet, encoding, bits, green)
