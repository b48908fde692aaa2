"""Plain numpy arrays, one set for each part."""

from __future__ import annotations

import io
import zipfile

import numpy as np
from tangentry.nodes.formats.vertices import vertices_of
from tangentry.nodes.model import Asset
from tangentry.pipeline.flow import Array

EPOCH = (1980, 1, 1, 0, 0, 0)  # the same asset makes the same bytes


def write_npz(asset: Asset) -> Array:
    """An .npz file, (size,) uint8: for part k the arrays k/triangles, k/points, k/normals, k/uv0 ..., k/tangents.

    Triangles are (n, 3) int32 rows of the vertex arrays; tangents (vertices, 4) float32 with the side last; v as the
    asset has it, told by the array `v_down`.
    """
    arrays: dict[str, Array] = {
        "v_down": np.array(asset.v_down),
        "names": np.array([part.name for part in asset.parts]),
    }
    for k, part in enumerate(asset.parts):
        found = vertices_of(part)
        arrays |= {f"{k}/triangles": found.triangles, f"{k}/points": found.points}
        arrays |= {f"{k}/uv{n}": uv for n, uv in enumerate(found.uvs)} | {
            f"{k}/colour{n}": one for n, one in enumerate(found.colours)
        }
        if found.normals is not None:
            arrays[f"{k}/normals"] = found.normals
        if found.tangents is not None:
            arrays[f"{k}/tangents"] = found.tangents
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w") as archive:
        for name, array in arrays.items():
            with archive.open(zipfile.ZipInfo(f"{name}.npy", EPOCH), "w") as entry:
                np.lib.format.write_array(entry, np.ascontiguousarray(array), allow_pickle=False)
    return np.frombuffer(out.getvalue(), np.uint8)
