"""Baking: a detailed mesh as maps of a target mesh."""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

import numpy as np
from tangentry.nodes.model import Asset, Map, Part, Sheet
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

if TYPE_CHECKING:
    from tangentry.nodes.maps.bake import Detail, Recipe

LARGEST = 16384
REACH = 0.02  # of the target's size, where no distance is set
ENDINGS = ("low", "high", "lo", "hi", "lp", "hp", "target", "detail", "detailed")


def bake(
    target: Asset,
    detail: Asset,
    *,
    size: int | tuple[int, int] = 1024,
    distance: float | None = None,
    distance_by: Literal["asset", "vertex colour"] = "asset",
    gives: Literal["normal", "object normal", "height", "occlusion", "hits"] = "normal",
    hit: Literal["outermost", "nearest"] = "outermost",
    aim: Literal["smoothed", "straight", "own"] = "smoothed",
    pairs: Literal["all", "name"] = "all",
    samples: Literal[1, 4, 16] = 1,
    gutter: int = 16,
    decoder: Literal["pixel", "pixel-unit", "pixel-square", "vertex", "vertex-unit", "vertex-square"] = "pixel",
) -> Map:
    """Maps of the target, one sheet for each of its materials, with what rays find on the detailed mesh.

    size         of each sheet: texels along both sides, or width and height
    distance     how far from the target's surface rays start and end, in its unit; by default 2 % of the target's size
    distance_by  vertex colour: the distance is scaled at each vertex by the red of its first colour set
    gives        normal: the detail's normals in the target's frames; object normal: in the mesh's own space; height:
                 along the ray, in the asset's unit; occlusion: share of the sky that is seen; hits: a picture of what
                 became of each texel: green hit, red missed, blue hit from behind, black outside all charts
    hit          outermost: the first surface met from outside; nearest: the one nearest to the target, either way
    aim          smoothed: rays follow normals averaged over hard edges, so nothing is left out; straight: on flat faces
                 they turn to the face's normal away from the edges; own: they follow the target's own normals
    pairs        name: a target part sees only detailed parts of its name; endings such as _low and _high don't count
    samples      rays for each texel
    gutter       how many texels around the charts are filled from the nearest inside
    decoder      how the target's decoder builds its frame, as in `reencode`

    Values are float32; `encode` gives normals their codes. Raises InputError where the target lacks UVs or frames, or
    a target part has no detailed part of its name.
    """
    from tangentry.nodes.maps.bake import Recipe

    width, height = (size, size) if isinstance(size, int) else size
    if not (1 <= width <= LARGEST and 1 <= height <= LARGEST):
        raise InputError(target.name, "", f"a map of {width} x {height}", f"from 1 to {LARGEST} texels along a side")
    recipe = Recipe(gives, hit, decoder, {1: 1, 4: 2, 16: 4}[samples], max(0, gutter))
    reach = _reach(target, distance)
    return Map(tuple(_sheets(target, detail, (width, height), reach, distance_by, aim, pairs, recipe)))


def _reach(target: Asset, distance: float | None) -> float:
    if distance is not None:
        if not distance > 0:
            raise InputError(
                target.name, "", f"a distance of {distance:g} from the surface", "make it more than nothing"
            )
        return distance
    points = [part.points.values[part.points.index] for part in target.parts if part.corner_count]
    if not points:
        raise InputError(target.name, "", "it has no faces", "export it again")
    every = np.concatenate(points)
    return REACH * float(np.linalg.norm(np.nanmax(every, axis=0) - np.nanmin(every, axis=0)))


def _sheets(
    target: Asset, detail: Asset, size: tuple[int, int], reach: float, by: str, aim: str, pairs: str, recipe: Recipe
) -> list[Sheet]:
    from tangentry.nodes.maps.bake import bake_sheet
    from tangentry.nodes.maps.bake_aim import Aim, aim_at
    from tangentry.nodes.maps.surface import parts_by_material, surface_of

    groups = parts_by_material(target)
    # The aim is that of the whole target: a point where two materials meet is moved one way.
    whole = surface_of(target, [row for rows in groups.values() for row in rows], needs_frames=recipe.gives == "normal")
    aims = aim_at(whole.positions, whole.frames[..., :3], _reaches(target, groups, reach, by), aim)
    sees, details = _details(target, detail, pairs)
    sheets = []
    for material, rows in groups.items():
        own = np.isin(whole.part, rows)
        texels = bake_sheet(
            type(whole)(*(column[own] for column in whole)),
            Aim(*(column[own] for column in aims)),
            sees[whole.part[own]],
            details,
            *size,
            recipe,
        )
        sheets.append(_sheet(material, texels, recipe.gives))
    return sheets


def _sheet(material: str, texels: Array, gives: str) -> Sheet:
    if gives == "normal":
        return Sheet(material, texels, "normal", "tangent", "up", "float", "bake")
    if gives == "object normal":
        return Sheet(material, texels, "normal", "object", "", "float", "bake")
    holds = {"height": "height", "hits": "colour"}.get(gives, "data")
    return Sheet(material, texels, holds, encoding="float" if texels.dtype.kind == "f" else "unorm", name="bake")


def _reaches(target: Asset, groups: dict[str, list[int]], reach: float, by: str) -> Array:
    """(triangles, 3) float32: how far rays start from each corner of the whole target."""
    from tangentry.nodes.geometry.triangles import triangulate

    rows = [row for group in groups.values() for row in group]
    scales = []
    for part in (target.parts[row] for row in rows):
        triangles, _ = triangulate(part)
        if by == "asset":
            scales.append(np.ones(triangles.shape, np.float32))
        elif part.colours:
            scales.append(part.colours[0].values[part.colours[0].index[triangles], 0])
        else:
            raise InputError(
                target.name,
                f'part "{part.name}"',
                "no vertex colours, which would scale its distance",
                "set distance_by: asset",
            )
    scaled: Array = np.concatenate(scales) * np.float32(reach)
    return scaled


def _details(target: Asset, detail: Asset, pairs: str) -> tuple[Array, list[Detail]]:
    """Which detail each target part sees, (parts,) int32, and the details."""
    if pairs == "all":
        return np.zeros(len(target.parts), np.int32), [_detail(detail, list(detail.parts))]
    by_name: dict[str, list[Part]] = {}
    for part in detail.parts:
        by_name.setdefault(_bare(part.name), []).append(part)
    names = list(by_name)
    for part in target.parts:
        if _bare(part.name) not in by_name:
            raise InputError(
                target.name,
                f'part "{part.name}"',
                f"{detail.name} has no part of its name",
                f"it has {', '.join(sorted(one.name for one in detail.parts)[:8]) or 'none'}",
            )
    sees = np.array([names.index(_bare(part.name)) for part in target.parts], np.int32)
    return sees, [_detail(detail, parts) for parts in by_name.values()]


def _bare(name: str) -> str:
    """A part's name in lower case, without an ending that says which of a pair it is."""
    stem, _, ending = name.lower().replace("-", "_").replace(" ", "_").replace(".", "_").rpartition("_")
    return stem if stem and ending in ENDINGS else name.lower()


def _detail(asset: Asset, parts: list[Part]) -> Detail:
    from tangentry.nodes.geometry.rays import RayScene
    from tangentry.nodes.geometry.triangles import triangulate
    from tangentry.nodes.maps.bake import Detail
    from tangentry.nodes.normals import normals

    positions, corner_normals = [np.zeros((0, 3, 3), np.float32)], [np.zeros((0, 3, 3), np.float32)]
    for part in normals(Asset(asset.name, tuple(parts))).parts:
        triangles, _ = triangulate(part)
        assert part.normals is not None
        positions.append(part.points.values[part.points.index[triangles]])
        corner_normals.append(part.normals.values[part.normals.index[triangles]])
    return Detail(RayScene(np.concatenate(positions)), np.concatenate(corner_normals))
