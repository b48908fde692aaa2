"""Normal maps in the encoding that a target expects."""

from __future__ import annotations

from typing import Literal

from tangentry.nodes.model import Map, Sheet
from tangentry.pipeline.errors import InputError


def encode(
    map: Map,
    *,
    encoding: Literal["unorm", "snorm", "xy", "octahedral", "hemi-octahedral", "float"] = "unorm",
    bits: Literal[8, 16] = 8,
    green: Literal["up", "down"] = "up",
    dither: Literal["none", "diffused"] = "none",
) -> Map:
    """The normal maps in one encoding; sheets that hold no normals are passed on as they are.

    encoding  unorm: three channels, -1..1 over all codes; snorm: offset by half, 0 exact; xy: two channels, z rebuilt
              by the decoder; octahedral: two channels (Cigolle et al. 2014), hemi-octahedral: likewise, finer, for
              normals that face outward; float: as they are
    bits      of each channel
    green     up: y grows up the image, as glTF 2.0 has it; down
    dither    diffused: what rounding loses is handed on to the texels that follow (Floyd & Steinberg 1976), so that
              gentle slopes show no steps; not for octahedral codes

    Where only green changes, codes are flipped exactly. Angles lost, over all directions: at most 0.39 degrees for 8
    bits unorm or snorm, 0.0015 for 16; 0.64 and 0.0025 octahedral, 0.55 in 8 bits
    hemi-octahedral; 5.8 and 0.4 for xy, near the rim. Raises InputError where a map's green is undecided.
    """
    return Map(
        tuple(
            _encoded(sheet, encoding, bits, green, dither) if sheet.holds == "normal" else sheet for sheet in map.sheets
        )
    )


def _encoded(sheet: Sheet, encoding: str, bits: int, green: str, dither: str) -> Sheet:
    from tangentry.nodes.maps.encodings import encoded

    if sheet.green == "undecided" and sheet.space == "tangent":
        raise InputError(
            sheet.name or "map",
            "",
            "it is not known whether its green points up or down",
            "state it: texture, green: up or down",
        )
    if dither != "none" and encoding in ("octahedral", "float"):
        raise InputError(sheet.name or "map", "setting dither", f"{encoding} codes are not dithered", "leave it out")
    return encoded(sheet, encoding, bits, green, dither == "diffused")
