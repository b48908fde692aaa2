"""What can be wrong with a prop: made so, to be found and sent back."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
from tangentry.graphs.ferry_terminal.making.modelling import Mesh, each_part, oblong, with_stored_frames
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.geometry.corners import distinct_corners
from tangentry.nodes.model import Asset, Frames, Image, MapUse, Part, Stream
from tangentry.pipeline.flow import OutFile


def with_map(asset: Asset) -> Asset:
    """The asset with a flat normal map in each material, so that its file says that frames are needed."""
    flat = np.full((4, 4, 3), (128, 128, 255), np.uint8)
    image = Image("flat_normal.png", "image/png", write_png(flat))
    return replace(
        asset, materials=tuple(replace(one, maps=(MapUse("normal", 0),)) for one in asset.materials), images=(image,)
    )


def stored(asset: Asset, change: Callable[[Part, Frames], Frames]) -> Asset:
    """The asset with a map that needs frames, and wrong ones, as if its file had brought them."""
    return with_stored_frames(with_map(asset), change)


def shared_across_the_mirror(part: Part, made: Frames) -> Frames:
    """One frame for every point, normal and UV, whichever side its faces are seen from."""
    assert part.normals is not None
    same = distinct_corners(part.points, part.normals, part.uvs[0]).label
    first = np.zeros(int(same.max()) + 1, np.int32)
    first[same[::-1]] = made.index[::-1]
    return Frames(made.tangents[first], None, made.sides[first], made.fallback[first], same, made.uv, made.method)


def zeroed(part: Part, made: Frames) -> Frames:
    """Every seventh tangent of no length."""
    tangents = made.tangents.copy()
    tangents[::7] = 0
    return replace(made, tangents=tangents)


def sheared(asset: Asset, degrees: float) -> Asset:
    """The asset with its UVs sheared along u."""
    shear = np.array([[1, 0], [np.tan(np.radians(degrees)), 1]], np.float32)

    def leaning(part: Part) -> Part:
        (uv,) = part.uvs
        return replace(part, uvs=(Stream((uv.values * np.float32(0.3)) @ shear, uv.index),))

    return each_part(asset, leaning)


def flattened(asset: Asset) -> Asset:
    """The asset with all UVs of its second material in one place."""
    part = asset.parts[1]
    lost = replace(part, uvs=(Stream(np.full_like(part.uvs[0].values, 0.5), part.uvs[0].index),))
    return replace(asset, parts=(asset.parts[0], lost, *asset.parts[2:]))


def inside_out(asset: Asset) -> Asset:
    """The asset with its normals turned inward."""

    def turned(part: Part) -> Part:
        assert part.normals is not None
        return replace(part, normals=Stream(-part.normals.values, part.normals.index))

    return each_part(asset, turned)


def with_a_fin() -> Asset:
    """A crate with a third face on one of its edges."""
    mesh = Mesh("crate_with_a_fin")
    mesh.box((-0.4, 0.0, -0.4), (0.4, 0.6, 0.4), "planks")
    mesh.points += [(0.7, 0.0, 0.7), (0.7, 0.6, 0.7)]
    mesh.panel([5, 8, 9, 7], oblong(0.42, 0.6), "planks")
    return mesh.asset()


def without_uvs(asset: Asset) -> Asset:
    """The asset before it was unwrapped."""
    return each_part(asset, lambda part: replace(part, uvs=()))


def robbed(file: OutFile) -> OutFile:
    """An OBJ file that lost its last four positions."""
    lines = file.content.tobytes().splitlines(keepends=True)
    last = max(k for k, line in enumerate(lines) if line.startswith(b"v "))
    kept = b"".join(lines[: last - 3] + lines[last + 1 :])
    return replace(file, content=np.frombuffer(kept, np.uint8))
