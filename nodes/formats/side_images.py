"""Images beside a mesh file: those it names, and those that go along with it, under names no other file there has."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import PurePosixPath

import numpy as np
from tangentry.nodes.formats.gltf_reading import sniff
from tangentry.nodes.formats.image_headers import read_header
from tangentry.nodes.formats.scan import shown
from tangentry.nodes.model import Asset, Image, Map, MapUse, Material, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import InputFile, OutFile

STATED = {".png", ".jpg", ".jpeg", ".webp", ".tif", ".tiff"}  # suffixes of what is held against its header
SUFFIXES = {"image/png": ".png", "image/jpeg": ".jpg", "image/webp": ".webp", "image/ktx2": ".ktx2"}


def image_beside(file: InputFile, beside: InputFile, written: str, place: str, notes: list[str]) -> Image:
    """The image that a mesh file names, byte for byte; one that is not there is empty, and noted.

    written   the name as it stands in the mesh file
    place     where it stands, for messages

    Raises InputError for one that can't be read, or whose suffix says PNG, JPEG, WebP or TIFF but not its header.
    """
    if not beside.exists:
        notes.append(f"image {shown(written)} is not there")
        return Image(beside.name, "", np.zeros(0, np.uint8))
    try:
        content = beside.bytes()
        if beside.suffix in STATED:
            read_header(content, beside.path)
    except InputError as error:
        raise InputError(file, f"{place}image {shown(written)}", error.found, error.advice) from None
    return Image(beside.name, sniff(content), content)


def images_beside(images: tuple[Image, ...], *taken: str) -> tuple[list[str], list[OutFile]]:
    """A file name for each image, and the files; an image that was not found keeps its name and makes no file.

    taken   the names of other files there
    """
    lowered = {name.lower() for name in taken}  # some disks do not tell capitals apart
    names = [_name(image, number, lowered) for number, image in enumerate(images)]
    files = [OutFile(name, image.content) for name, image in zip(names, images, strict=True) if len(image.content)]
    return names, files


def _name(image: Image, number: int, taken: set[str]) -> str:
    plain = re.sub(r"[^\w.\- ]", "_", PurePosixPath(image.name.replace("\\", "/")).name).strip() or f"image_{number}"
    suffix = SUFFIXES.get(image.mime, "")
    if suffix and not plain.lower().endswith((suffix, ".jpeg")):
        plain += suffix
    while plain.lower() in taken:
        plain = f"{number}_{plain}"
    taken.add(plain.lower())
    return plain


def with_maps(asset: Asset, maps: Map | None, stem: str) -> Asset:
    """The asset, its materials using these normal maps as PNG images; a sheet's material "" serves all.

    Raises InputError for maps that hold no tangent-space normals, or whose green is undecided.
    """
    if maps is None:
        return asset
    first, made = len(asset.images), {}  # type: int, dict[str, int]
    images = list(asset.images)
    sheets = [sheet for sheet in maps.sheets if sheet.level == 0]
    for number, sheet in enumerate(sheets):
        made[sheet.material] = first + number
        images.append(_image(sheet, asset.name, f"{stem}_normal_{number}" if len(sheets) > 1 else f"{stem}_normal"))
    bare = any(part.material < 0 for part in asset.parts) and "" in made
    parts = tuple(
        replace(part, material=len(asset.materials)) if bare and part.material < 0 else part for part in asset.parts
    )
    materials = [*asset.materials, *([Material("mapped")] if bare else [])]
    return replace(
        asset, parts=parts, images=tuple(images), materials=tuple(_using(material, made) for material in materials)
    )


def _image(sheet: Sheet, asset: str, name: str) -> Image:
    from tangentry.nodes.formats.images import write_png
    from tangentry.nodes.maps.encodings import as_gltf_texels

    return Image(f"{name}.png", "image/png", np.asarray(write_png(as_gltf_texels(sheet, asset, name))))


def _using(material: Material, made: dict[str, int]) -> Material:
    row = made.get(material.name, made.get(""))
    if row is None:
        return material
    before = next((use for use in material.maps if use.role == "normal"), None)
    use = replace(before, image=row) if before is not None else MapUse("normal", row)
    return replace(material, maps=(*(one for one in material.maps if one.role != "normal"), use))
