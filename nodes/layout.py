"""Drawing UV layouts, with what was found marked on them."""

from __future__ import annotations

import re
from pathlib import PurePosixPath

from tangentry.nodes.model import Asset
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Files, Findings, OutFile, OutputFile


def layout(
    asset: Asset,
    findings: Findings | None = None,
    *,
    file: OutputFile | str,
    size: int = 1024,
    ids: tuple[str, ...] = (),
) -> Files:
    """Pictures of an asset's UV layout, its guilty faces, edges and corners marked in the colour of their severity.

    file  where to, a PNG; `*` in its name stands for a material's name, one picture each; without it all are in one
    size  pixels along a side of the UV tile, 128 to 4096; several tiles in one picture share it
    ids   which findings to mark; by default all

    What lies beyond the tile is drawn where it repeats; v points up, as in the image the UVs belong to. Where faces lie
    over one another the worst is on top. Raises InputError for other formats, a size out of range, an id that no
    finding has, or an asset without UVs.
    """
    from tangentry.nodes.checks.drawing import Sheet, drawn, sheets_of
    from tangentry.nodes.checks.ids import refuse_unknown
    from tangentry.nodes.formats.images import write_png

    if PurePosixPath(file).suffix.lower() != ".png":
        raise InputError(file, "", "only PNG is drawn", "end its name with .png")
    if not 128 <= size <= 4096:
        raise InputError(file, "setting size", f"{size} pixels", "give 128 to 4096")
    refuse_unknown(asset.name, "ids", ids)
    sheets = sheets_of(asset, findings.items if findings is not None else (), ids)
    if not sheets:
        raise InputError(asset.name, "", "no part has UVs", "unwrap it, or leave its layout out")
    if "*" not in file:
        return Files((OutFile(file, write_png(drawn(asset.name, sheets, size))),))

    def name(sheet: Sheet) -> str:
        return file.replace("*", re.sub(r"[^\w.-]", "_", sheet.material) or "all")

    return Files(tuple(OutFile(name(sheet), write_png(drawn(asset.name, [sheet], size))) for sheet in sheets))
