"""Facts about a mesh or an image."""

from __future__ import annotations

import numpy as np
from tangentry.nodes.model import Asset, Part, Sheet
from tangentry.pipeline.flow import Array, Findings, InputFile

Facts = dict[str, float | str]


def inspect(file: InputFile | str) -> Findings:
    """The facts of a mesh or an image file, and what the checks find on a mesh.

    file  OBJ, PLY, glTF or GLB; PNG, JPEG, WebP, TIFF or EXR

    Raises InputError where the file can't be read.
    """
    from tangentry.nodes.check import check
    from tangentry.nodes.formats.image_headers import is_image
    from tangentry.nodes.load import load

    file = InputFile.of(file)
    content = file.bytes()
    if is_image(content):
        return Findings(file.path, (), _image_facts(file.path, content))
    asset = load(file)
    assert asset is not None
    return Findings(file.path, check(asset).items, _mesh_facts(asset))


def _image_facts(name: str, content: Array) -> Facts:
    from tangentry.nodes.formats.image_headers import read_header, tag_of
    from tangentry.nodes.formats.images import read_image
    from tangentry.nodes.maps.conventions import measure_green
    from tangentry.nodes.maps.judging import map_findings

    texels = read_image(content, name)
    facts: Facts = {
        "format": read_header(content, name).format,
        "width": texels.shape[1],
        "height": texels.shape[0],
        "channels": texels.shape[2],
        "bits a channel": texels.dtype.itemsize * 8,
        "mean": " ".join(
            f"{value:.3f}"
            for value in texels.mean(axis=(0, 1)) / (1 if texels.dtype.kind == "f" else np.iinfo(texels.dtype).max)
        ),
    }
    if texels.shape[2] >= 3 and texels.dtype.kind == "u":
        vectors = texels[..., :3].astype(np.float32) * np.float32(2 / np.iinfo(texels.dtype).max) - 1
        low, middle, high = np.percentile(np.linalg.norm(vectors, axis=2), [5, 50, 95])
        green = measure_green(texels)
        facts["length as normals"] = f"median {middle:.3f}, 5 % below {low:.3f}, 5 % above {high:.3f}"
        facts["green as normals"] = f"{green.verdict} (correlation {green.correlation:.3f})"
        sheet = Sheet("", texels, "normal", "tangent", green.verdict, name=name, tagged=tag_of(content))
        facts |= {f"as normals, {item.id}": item.what for item in map_findings(sheet)}
    return facts


def _mesh_facts(asset: Asset) -> Facts:
    sizes = np.concatenate([np.diff(part.starts) for part in asset.parts])
    by_size = ", ".join(f"{count} of {size}" for size, count in zip(*np.unique(sizes, return_counts=True), strict=True))
    facts: Facts = {
        "parts": len(asset.parts),
        "materials": ", ".join(material.name or "(no name)" for material in asset.materials) or "none",
        "faces by corners": by_size,
        "corners": int(sizes.sum()),
        "points": sum(len(part.points.values) for part in asset.parts),
        "UV sets": max(len(part.uvs) for part in asset.parts),
        "parts with normals": sum(part.normals is not None for part in asset.parts),
        "parts with stored tangents": sum(part.frames is not None for part in asset.parts),
        "morph targets": max(len(part.morphs) for part in asset.parts),
        "v grows": "down" if asset.v_down else "up",
    }
    facts |= _size(asset) | _orientation(asset) | _agreement(asset)
    for material in asset.materials:
        for use in material.maps:
            image = asset.images[use.image]
            there = "" if len(image.content) else ", not there"
            facts[f"{material.name}: {use.role}"] = f"{image.name}, UV set {use.uv}{there}"
    for number, note in enumerate(asset.notes, 1):
        facts[f"note {number}"] = note
    return facts


def _size(asset: Asset) -> Facts:
    points = np.concatenate([part.points.values for part in asset.parts])
    return {"size": " x ".join(f"{side:.6g}" for side in points.max(axis=0) - points.min(axis=0))}


def _orientation(asset: Asset) -> Facts:
    """Triangles by the side from which they are seen in UV space, v upward."""
    from tangentry.nodes.geometry.directions import triangle_directions
    from tangentry.nodes.geometry.triangles import triangulate

    sides = [
        triangle_directions(part, triangulate(part)[0], part.uvs[0], asset.v_down).side
        for part in asset.parts
        if part.uvs
    ]
    side = np.concatenate(sides) if sides else np.zeros(0, np.int8)
    if not len(side):
        return {}
    return {
        "triangles as wound in UV space": int((side > 0).sum()),
        "triangles mirrored in UV space": int((side < 0).sum()),
        "triangles that define no tangent": int((side == 0).sum()),
    }


def _agreement(asset: Asset) -> Facts:
    """How far stored tangents are from what the rule gives, all together and in each part."""
    found = {
        number: pair for number, part in enumerate(asset.parts) if (pair := _against_rule(asset, part)) is not None
    }
    if not found:
        return {}
    angle = np.concatenate([angle for angle, _ in found.values()])
    same = np.concatenate([same for _, same in found.values()])
    facts: Facts = {
        "stored tangents, degrees from MikkTSpace": _spread(angle),
        "stored tangents within 1 degree": f"{(angle <= 1).mean():.2%}",
        "stored sides as the rule has them": f"{same.mean():.2%}",
    }
    if len(found) > 1:
        for number, (angle, same) in found.items():
            place = f"part {number}, {asset.parts[number].name}: stored tangents"
            facts[place] = f"{_spread(angle)} degrees from MikkTSpace; {same.mean():.2%} of the sides as the rule"
    return facts


def _spread(angle: Array) -> str:
    middle, high = np.percentile(angle, [50, 95])
    return f"median {middle:.3g}, 5 % above {high:.3g}"


def _against_rule(asset: Asset, part: Part) -> tuple[Array, Array] | None:
    from tangentry.nodes.geometry.frames import solve_frames
    from tangentry.nodes.geometry.vectors import angle_between, unit

    stored = part.frames
    if stored is None or stored.uv < 0 or part.normals is None:
        return None
    solved = solve_frames(part, part.uvs[stored.uv], stored.uv, asset.v_down, "mikktspace")
    tangent = unit(np.nan_to_num(stored.tangents).astype(np.float64))
    angle = angle_between(tangent[stored.index], solved.tangents[solved.index])
    return angle, stored.sides[stored.index] == solved.sides[solved.index]
