"""Images as maps."""

from __future__ import annotations

from typing import Literal

from tangentry.nodes.model import Asset, Map, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile


def texture(
    asset: Asset | None = None,
    *,
    file: InputFile | str | None = None,
    holds: Literal["normal", "height", "colour", "data"] = "normal",
    green: Literal["up", "down", "measure"] = "up",
    encoding: Literal["unorm", "snorm", "xy", "octahedral", "hemi-octahedral"] = "unorm",
    if_missing: Literal["fail", "skip"] = "fail",
) -> Map | None:
    """A map from an image file, or the maps that an asset's materials name.

    file        the image; or give an asset instead
    holds       what its texels are; from an asset, which of its materials' maps are wanted
    green       of normals: does green grow up the image or down; measure: as the texels tell, else "undecided"
    encoding    of normals: how directions are stored
    if_missing  skip: leave the map out where there is none

    From an asset comes one sheet for each material that names such a map. Raises InputError where an image is missing
    or can't be read.
    """
    if (asset is None) == (file is None):
        raise InputError("texture", "", "it takes a file or an asset, one of the two", "give one of them")
    found = _of_asset(asset, holds) if asset is not None else _of_file(InputFile.of(file), if_missing)  # type: ignore[arg-type]
    if not found and if_missing == "skip":
        return None
    if not found and asset is not None:
        raise InputError(asset.name, "", f"no material names a {holds} map", "name one, or set if_missing: skip")
    if holds != "normal":
        return Map(
            tuple(Sheet(material, texels, holds, name=name, tagged=tag) for material, texels, name, tag in found)
        )
    return Map(tuple(_normals(*one, green, encoding) for one in found))


def _normals(material: str, texels: Array, name: str, tag: str, green: str, encoding: str) -> Sheet:
    from tangentry.nodes.maps.conventions import measure_green
    from tangentry.nodes.maps.encodings import channels_of

    if texels.shape[2] < channels_of(encoding):
        raise InputError(
            name, "", f"{texels.shape[2]} channels can't hold normals", "is it a height map? then holds: height"
        )
    verdict = measure_green(texels).verdict if green == "measure" else green
    return Sheet(material, texels, "normal", "tangent", verdict, encoding, name, tag)


def _of_file(file: InputFile, if_missing: str) -> list[tuple[str, Array, str, str]]:
    from tangentry.nodes.formats.image_headers import tag_of
    from tangentry.nodes.formats.images import read_image

    if if_missing == "skip" and not file.exists:
        return []
    return [("", read_image(file.bytes(), file.path), file.path, tag_of(file.bytes()))]


def _of_asset(asset: Asset, holds: str) -> list[tuple[str, Array, str, str]]:
    from tangentry.nodes.formats.image_headers import tag_of
    from tangentry.nodes.formats.images import read_image

    found: list[tuple[str, Array, str, str]] = []
    read: dict[int, Array] = {}
    for material in asset.materials:
        use = next((one for one in material.maps if one.role == holds), None)
        if use is None:
            continue
        image = asset.images[use.image]
        if not len(image.content):
            raise InputError(
                asset.name,
                f'material "{material.name}"',
                f"its image {image.name} is not there",
                "put it beside the mesh",
            )
        if use.image not in read:
            read[use.image] = read_image(image.content, f"{asset.name}: {image.name}")
        found.append((material.name, read[use.image], image.name, tag_of(image.content)))
    return found
