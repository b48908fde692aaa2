"""Maps as image files."""

from __future__ import annotations

import re
from pathlib import PurePosixPath

import numpy as np
from tangentry.nodes.model import Map, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, Files, OutFile, OutputFile

WRITTEN = (".png", ".tif", ".tiff", ".exr")


def write(map: Map, *, file: OutputFile | str, half: bool = False) -> Files:
    """The sheets of a map as image files.

    file  where to; its suffix says the format: .png, .tif, .exr; `*` in its name stands for the name of each sheet's
          material; the levels of a mip chain add their numbers: stone_1.png
    half  EXR: 16-bit floats instead of 32-bit ones

    Codes go out as they are, directions in two channels with an empty third. What is held as floats goes into TIFF and
    EXR as it is; for PNG, normals are encoded with 8 bits, green up, and all else from 0 to 1 over 16 bits. Raises
    InputError for other formats, and for several sheets without a `*`.
    """
    suffix = PurePosixPath(file).suffix.lower()
    if suffix not in WRITTEN:
        raise InputError(file, "", f'suffix "{suffix}" names no image format', f"write one of {', '.join(WRITTEN)}")
    names = [_name(file, sheet) for sheet in map.sheets]
    if len({name.lower() for name in names}) < len(names):
        raise InputError(file, "", f"{len(names)} sheets for one file", "put * into its name, for each material's name")
    sheets = zip(names, map.sheets, strict=True)
    return Files(tuple(OutFile(name, _image(sheet, suffix, half, name)) for name, sheet in sheets))


def _name(file: str, sheet: Sheet) -> str:
    name = PurePosixPath(file.replace("*", _plain(sheet.material)))
    return str(name.with_stem(f"{name.stem}_{sheet.level}") if sheet.level else name)


def _plain(material: str) -> str:
    return re.sub(r"[^\w.-]", "_", material) or "all"


def _image(sheet: Sheet, suffix: str, half: bool, name: str) -> Array:
    from tangentry.nodes.formats.exr import write_exr
    from tangentry.nodes.formats.images import write_png, write_tiff

    texels = sheet.texels
    if texels.shape[2] == 2 and sheet.holds == "normal":
        texels = np.concatenate([texels, np.zeros_like(texels[..., :1])], axis=2)
    if suffix == ".exr":
        return write_exr(texels if texels.dtype.kind == "f" else texels / np.iinfo(texels.dtype).max, half, name)
    if suffix != ".png":
        return write_tiff(texels)
    return write_png(texels if texels.dtype.kind != "f" else _coded(sheet))


def _coded(sheet: Sheet) -> Array:
    from tangentry.nodes.maps.encodings import encoded

    if sheet.holds == "normal":
        return encoded(sheet, "unorm", 8, "up").texels
    codes: Array = np.rint(np.clip(sheet.texels, 0, 1) * 65535).astype(np.uint16)
    return codes
