"""Maps as image files."""

from __future__ import annotations

import re
from pathlib import PurePosixPath

import numpy as np
from tangentry.nodes.model import Map, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, Files, OutFile, OutputFile


def write(map: Map, *, file: OutputFile | str) -> Files:
    """The sheets of a map as PNG files.

    file  where to; `*` in its name stands for the name of each sheet's material

    Float sheets of normals are encoded with 8 bits, green up; other float sheets go from 0 to 1 over 16 bits. Raises
    InputError for other formats, and for several sheets without a `*`.
    """
    if PurePosixPath(file).suffix.lower() != ".png":
        raise InputError(file, "", "only PNG is written", "end its name with .png")
    if len(map.sheets) > 1 and "*" not in file:
        raise InputError(
            file, "", f"{len(map.sheets)} sheets for one file", "put * into its name, for each material's name"
        )
    return Files(tuple(OutFile(file.replace("*", _plain(sheet.material)), _png(sheet)) for sheet in map.sheets))


def _plain(material: str) -> str:
    return re.sub(r"[^\w.-]", "_", material) or "all"


def _png(sheet: Sheet) -> Array:
    from tangentry.nodes.formats.images import write_png
    from tangentry.nodes.maps.encodings import encoded

    if sheet.texels.dtype.kind != "f":
        return write_png(sheet.texels)
    if sheet.holds == "normal":
        return write_png(encoded(sheet, "unorm", 8, "up").texels)
    return write_png(np.rint(np.clip(sheet.texels, 0, 1) * 65535).astype(np.uint16))
