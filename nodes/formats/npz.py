"""Plain numpy arrays, one set for each part."""

from __future__ import annotations

import io
import zipfile

import numpy as np
from tangentry.nodes.formats.vertices import Vertices, vertices_of
from tangentry.nodes.geometry.packing import (
    BYTE,
    SHORT,
    pack_octahedral,
    pack_quaternions,
    pack_vectors,
    pack_words,
)
from tangentry.nodes.model import Asset
from tangentry.pipeline.flow import Array

EPOCH = (1980, 1, 1, 0, 0, 0)  # the same asset makes the same bytes


def write_npz(asset: Asset, vectors: str = "float") -> Array:
    """An .npz file, (size,) uint8: for part k the arrays k/triangles, k/points, k/normals, k/uv0 ..., k/tangents.

    Triangles are (n, 3) int32 rows of the vertex arrays; tangents (vertices, 4) float32 with the side last; v as the
    asset has it, told by the array `v_down`.

    vectors  form of normals and tangents, told by the array `vectors`: "float", or as in geometry/packing.py: "short"
             and "byte" (n, 3) and (n, 4), "10-10-10-2" (n,) words, "octahedral" (n, 2) and the array k/sides (n,) int8,
             "quaternion": both in the array k/frames (n, 4)
    """
    arrays: dict[str, Array] = {
        "v_down": np.array(asset.v_down),
        "vectors": np.array(vectors),
        "names": np.array([part.name for part in asset.parts]),
    }
    for k, part in enumerate(asset.parts):
        found = vertices_of(part)
        arrays |= {f"{k}/triangles": found.triangles, f"{k}/points": found.points}
        arrays |= {f"{k}/uv{n}": uv for n, uv in enumerate(found.uvs)} | {
            f"{k}/colour{n}": one for n, one in enumerate(found.colours)
        }
        arrays |= {f"{k}/{name}": array for name, array in _directions(found, vectors).items()}
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w") as archive:
        for name, array in arrays.items():
            with archive.open(zipfile.ZipInfo(f"{name}.npy", EPOCH), "w") as entry:
                np.lib.format.write_array(entry, np.ascontiguousarray(array), allow_pickle=False)
    return np.frombuffer(out.getvalue(), np.uint8)


def _directions(found: Vertices, vectors: str) -> dict[str, Array]:
    """Normals and tangents in the form asked for, by name."""
    normals, tangents = found.normals, found.tangents
    if vectors == "quaternion" and normals is not None and tangents is not None:
        return {"frames": pack_quaternions(normals, tangents)}
    given = {name: one for name, one in (("normals", normals), ("tangents", tangents)) if one is not None}
    if vectors == "octahedral":
        sides = {} if tangents is None else {"sides": tangents[:, 3].astype(np.int8)}
        return {name: pack_octahedral(one[:, :3]) for name, one in given.items()} | sides
    if vectors == "10-10-10-2":
        return {name: pack_words(one) for name, one in given.items()}
    if vectors in ("short", "byte"):
        return {name: pack_vectors(one, SHORT if vectors == "short" else BYTE) for name, one in given.items()}
    return given
