"""Normal maps moved from one set of frames into another."""

from __future__ import annotations

from typing import Literal

from tangentry.nodes.model import Asset, Map, Sheet
from tangentry.pipeline.errors import InputError


def reencode(
    map: Map,
    made_in: Asset,
    wanted_in: Asset,
    *,
    made_for: Literal[
        "pixel", "pixel-unit", "pixel-square", "vertex", "vertex-unit", "vertex-square", "object"
    ] = "pixel",
    wanted_for: Literal[
        "pixel", "pixel-unit", "pixel-square", "vertex", "vertex-unit", "vertex-square", "object"
    ] = "pixel",
    gutter: int = 16,
) -> Map:
    """The normal maps as the wanted frames need them: every texel shades as it did in the frames it was made in.

    made_for    how the decoder that the map was made for builds its frame: pixel: normal and tangent interpolated as
                they are, bitangent = cross(normal, tangent) * side at each pixel; vertex: the bitangent comes from the
                vertices; -unit: each normalised first; -square: made perpendicular too; object: texels are the mesh's
                own normals
    wanted_for  the same of the decoder that the map is wanted for
    gutter      how many texels around the charts are moved along, with the frames of the nearest texel inside

    `wanted_in` may be another mesh with the same UV layout, a lower level of detail for one. Maps of object space start
    from made_for: object. Where charts overlap, the first face's frames count. Encoding and depth stay. Raises
    InputError where a part has no frames, or where it is not known which way a map's green points.
    """
    return Map(
        tuple(
            _moved(sheet, made_in, made_for, wanted_in, wanted_for, gutter) if sheet.holds == "normal" else sheet
            for sheet in map.sheets
        )
    )


def _moved(sheet: Sheet, made_in: Asset, made_for: str, wanted_in: Asset, wanted_for: str, gutter: int) -> Sheet:
    from tangentry.nodes.maps.reencode import reencode_sheet
    from tangentry.nodes.maps.surface import parts_under, surface_of

    _agreed(sheet, made_for)
    before = surface_of(made_in, parts_under(made_in, sheet.material), needs_frames=made_for != "object")
    after = surface_of(wanted_in, parts_under(wanted_in, sheet.material), needs_frames=wanted_for != "object")
    return reencode_sheet(sheet, before, made_for, after, wanted_for, max(0, gutter))


def _agreed(sheet: Sheet, made_for: str) -> None:
    """Raise InputError where the sheet is not of the space that it is to be read in."""
    name = sheet.name or "map"
    if sheet.space == "world":
        raise InputError(
            name, "", "its normals are of world space, and where the mesh stands is not known", "use object space"
        )
    if (sheet.space == "object") != (made_for == "object"):
        raise InputError(
            name,
            "",
            f"its normals are of {sheet.space} space, but made_for is {made_for}",
            "set made_for to fit the map",
        )
    if sheet.space == "tangent" and sheet.green == "undecided":
        raise InputError(
            name, "", "it is not known whether its green points up or down", "state it: texture, green: up or down"
        )
