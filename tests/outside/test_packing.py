"""What few bits cost, as angles: figures that an independent program found in float64 for a million uniform normals
of the hemisphere (PCG64, seed 0). The forms are those of Cigolle et al., JCGT 2014, and of the glTF extension
KHR_mesh_quantization; for those that nobody tabulated, half a step of the code bounds the angle."""

from __future__ import annotations

import numpy as np
import pytest
from tangentry.nodes.geometry.packing import (
    BYTE,
    SHORT,
    pack_octahedral,
    pack_quaternions,
    pack_vectors,
    pack_words,
    unpack_octahedral,
    unpack_quaternions,
    unpack_vectors,
    unpack_words,
)


@pytest.fixture(scope="module")
def normals():
    chance = np.random.Generator(np.random.PCG64(0))
    z, turn = chance.random(1_000_000), 2 * np.pi * chance.random(1_000_000)
    r = np.sqrt(1 - z * z)
    return np.stack([r * np.cos(turn), r * np.sin(turn), z], axis=1)


def apart(one, other):
    one, other = (x / np.linalg.norm(x, axis=1, keepdims=True) for x in (one.astype(float), other.astype(float)))
    return np.degrees(2 * np.arctan2(np.linalg.norm(one - other, axis=1), np.linalg.norm(one + other, axis=1)))


@pytest.mark.parametrize(
    ("there_and_back", "mean", "p99", "largest"),
    [
        (lambda n: unpack_vectors(pack_vectors(n, BYTE), BYTE), 0.17006, 0.31862, 0.38417),
        (lambda n: unpack_words(pack_words(n))[:, :3], 0.04230, 0.07921, 0.09655),
        (lambda n: unpack_octahedral(pack_octahedral(n)), 0.001219, 0.002150, 0.002454),
    ],
    ids=["byte", "10-10-10-2", "octahedral"],
)
def test_the_error_is_that_of_the_table(normals, there_and_back, mean, p99, largest):
    error = apart(there_and_back(normals), normals)

    assert error.mean() == pytest.approx(mean, rel=0.01)
    assert np.percentile(error, 99) == pytest.approx(p99, rel=0.01)
    assert error.max() == pytest.approx(largest, rel=0.06)  # the largest of a million hangs on the draw


def frames_about(normals, chance):
    other = chance.normal(size=normals.shape)
    tangent = other - normals * np.einsum("ij,ij->i", other, normals)[:, None]
    tangent /= np.linalg.norm(tangent, axis=1, keepdims=True)
    return np.concatenate([tangent, chance.choice([-1.0, 1.0], (len(normals), 1))], axis=1)


def test_a_frame_in_four_shorts_keeps_its_side_and_turns_by_less_than_its_step(normals):
    """A change of a unit quaternion by e turns the frame by 2 e; each of four components is off by 1/2 step at most,
    and a w next to nothing is moved by up to one step to have a sign."""
    chance = np.random.default_rng(1)
    normals = normals * chance.choice([-1, 1], (len(normals), 1))
    tangents = frames_about(normals, chance)

    normal, tangent = unpack_quaternions(pack_quaternions(normals, tangents))
    bound = np.degrees(2 * (np.sqrt(4) * 0.5 + 1) / SHORT)

    assert apart(normal, normals).max() < bound and apart(tangent[:, :3], tangents[:, :3]).max() < bound
    assert (tangent[:, 3] == tangents[:, 3]).all()


def test_half_turns_keep_their_side():
    """Rotations by 180 degrees have w = 0, where a sign says nothing."""
    normals = np.array([[0, 0, -1], [0, 0, -1], [0, -1, 0], [0, 0, 1]], float)
    tangents = np.array([[1, 0, 0, -1], [0, 1, 0, 1], [-1, 0, 0, -1], [-1, 0, 0, -1]], float)

    normal, tangent = unpack_quaternions(pack_quaternions(normals, tangents))

    assert np.abs(normal - normals).max() < 1e-4 and np.abs(tangent - tangents).max() < 1e-4


def test_words_keep_the_side(normals):
    tangents = frames_about(normals[:1000], np.random.default_rng(2))

    assert (unpack_words(pack_words(tangents))[:, 3] == tangents[:, 3]).all()


def test_shorts_are_off_by_half_a_step(normals):
    assert np.abs(unpack_vectors(pack_vectors(normals, SHORT), SHORT) - normals).max() <= 0.5 / SHORT + 1e-7
