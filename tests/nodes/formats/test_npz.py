"""NPZ: plain arrays, readable without pickles; normals and tangents come back from every form."""

from __future__ import annotations

import io
from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_array_equal
from shapes import asset, half_mirrored, torus_part
from tangentry.nodes.formats.npz import write_npz
from tangentry.nodes.formats.vertices import vertices_of
from tangentry.nodes.frames import frames
from tangentry.nodes.geometry.packing import (
    BYTE,
    SHORT,
    unpack_octahedral,
    unpack_quaternions,
    unpack_vectors,
    unpack_words,
)
from tangentry.nodes.model import Stream
from tangentry.nodes.split import split

DEGREES = {"short": 0.0015, "byte": 0.4, "10-10-10-2": 0.1, "octahedral": 0.0025, "quaternion": 0.004}  # as export says


def solved():
    """A torus, one half of it unwrapped in mirror image, with frames."""
    return frames(split(asset(half_mirrored(torus_part(16, 12), 16, 12))), where="all")


def arrays(made, vectors="float"):
    """What stands in the file."""
    return dict(np.load(io.BytesIO(write_npz(made, vectors).tobytes()), allow_pickle=False))


def unpacked(found, vectors):
    """Normals (n, 3) and tangents (n, 4) of part 0."""
    if vectors == "quaternion":
        return unpack_quaternions(found["0/frames"])
    normals, tangents = found["0/normals"], found["0/tangents"]
    if vectors == "octahedral":
        return unpack_octahedral(normals), np.column_stack([unpack_octahedral(tangents), found["0/sides"]])
    if vectors == "10-10-10-2":
        return unpack_words(normals)[:, :3], unpack_words(tangents)
    most = SHORT if vectors == "short" else BYTE
    return unpack_vectors(normals, most), unpack_vectors(tangents, most)


def largest_angle(one, other):
    """In degrees, between rows."""
    one, other = one.astype(float), other.astype(float)
    across = np.linalg.norm(np.cross(one, other), axis=1)
    return np.degrees(np.arctan2(across, np.einsum("ij,ij->i", one, other))).max()


@pytest.mark.parametrize("vectors", DEGREES)
def test_normals_and_tangents_come_back_within_the_error_that_is_stated(vectors):
    made = solved()
    wanted, found = vertices_of(made.parts[0]), arrays(made, vectors)

    normals, tangents = unpacked(found, vectors)

    assert found["vectors"] == vectors and set(wanted.tangents[:, 3]) == {-1, 1}
    assert largest_angle(normals, wanted.normals) <= DEGREES[vectors]
    assert largest_angle(tangents[:, :3], wanted.tangents[:, :3]) <= DEGREES[vectors]
    assert_array_equal(np.sign(tangents[:, 3]), wanted.tangents[:, 3])


def test_each_part_has_its_arrays_and_no_other():
    made = solved()
    bare = replace(made.parts[0], name="bare", normals=None, uvs=(), frames=None)
    red = Stream(np.ones((1, 3), np.float32), np.zeros(bare.corner_count, np.int32))
    coloured = replace(made.parts[0], uvs=made.parts[0].uvs * 2, colours=(red,))

    found = arrays(replace(made, parts=(bare, coloured)))

    assert {name for name in found if name.startswith("0/")} == {"0/triangles", "0/points"}
    assert {name.removeprefix("1/") for name in found if name.startswith("1/")} == {
        *("triangles", "points", "normals", "tangents", "uv0", "uv1", "colour0")
    }


def test_the_same_asset_makes_the_same_bytes():
    assert write_npz(solved()).tobytes() == write_npz(solved()).tobytes()
