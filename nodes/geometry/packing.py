"""Normals and frames in few bits, and back.

short, byte   each component as a signed normalised integer: c = round(n * most), n = c / most, most 32767 or 127
10-10-10-2    the same with 10 bits each in one word, x lowest; two bits on top hold the side: 1 or -1
octahedral    two signed 16-bit numbers, the octahedron unfolded, see octahedron.py
quaternion    the rotation that turns x, y, z into tangent, bitangent and normal of the right-handed frame, signed
              16-bit, its w never 0: the sign of w is the side (the rotation of q and -q is one; Shoemake 1985)
"""

from __future__ import annotations

import numpy as np
from tangentry.nodes.geometry.octahedron import octahedral_codes, octahedral_directions
from tangentry.pipeline.flow import Array

SHORT, BYTE, TEN = 32767, 127, 511


def pack_vectors(vectors: Array, most: int) -> Array:
    """(n, width) int16, or int8 where most is 127, of vectors in -1..1."""
    codes: Array = np.rint(np.clip(vectors, -1, 1) * most).astype(np.int16 if most > BYTE else np.int8)
    return codes


def unpack_vectors(codes: Array, most: int) -> Array:
    """(n, width) float32: the inverse of `pack_vectors`."""
    return (codes / np.float32(most)).astype(np.float32)


def pack_words(vectors: Array) -> Array:
    """(n,) uint32: 10-10-10-2 words of (n, 3) vectors, or of (n, 4) tangents with their sides."""
    codes = np.rint(np.clip(vectors[:, :3], -1, 1) * TEN).astype(np.int32) & 0x3FF
    side = np.sign(vectors[:, 3]).astype(np.int32) & 3 if vectors.shape[1] == 4 else np.zeros(len(vectors), np.int32)
    words: Array = (codes[:, 0] | codes[:, 1] << 10 | codes[:, 2] << 20 | side << 30).astype(np.uint32)
    return words


def unpack_words(words: Array) -> Array:
    """(n, 4) float32: the inverse of `pack_words`, the side last (0 where there was none)."""
    shifted = words.view(np.int32)[:, None] << np.array(
        [22, 12, 2, 0], np.int32
    )  # each number to the top, sign and all
    return (shifted >> np.array([22, 22, 22, 30], np.int32)) / np.array([TEN, TEN, TEN, 1], np.float32)


def pack_octahedral(vectors: Array) -> Array:
    """(n, 2) int16 of (n, 3) unit vectors."""
    return (octahedral_codes(vectors, 2 * SHORT) - SHORT).astype(np.int16)


def unpack_octahedral(codes: Array) -> Array:
    """(n, 3) float32, unit: the inverse of `pack_octahedral`."""
    return octahedral_directions(codes.astype(np.int32) + SHORT, 2 * SHORT)


def pack_quaternions(normals: Array, tangents: Array) -> Array:
    """(n, 4) int16 x y z w of (n, 3) unit normals and (n, 4) tangents with their sides, which are made square first."""
    n = normals.astype(np.float64)
    t = tangents[:, :3] - n * np.einsum("ij,ij->i", tangents[:, :3], n)[:, None]
    t /= np.maximum(np.sqrt(np.einsum("ij,ij->i", t, t)), 1e-30)[:, None]
    q = _quaternions(np.stack([t, np.cross(n, t), n], axis=2))
    least = 1 / SHORT
    q *= np.where(q[:, 3:] < 0, -1, 1)
    small = q[:, 3] < least
    q[small, :3] *= np.sqrt(1 - least**2)
    q[small, 3] = least
    return pack_vectors(q * np.where(tangents[:, 3:] < 0, -1, 1), SHORT)


def unpack_quaternions(codes: Array) -> tuple[Array, Array]:
    """Normals (n, 3) and tangents (n, 4) float32: the inverse of `pack_quaternions`."""
    q = codes.astype(np.float64)
    side = np.where(q[:, 3:] < 0, -1.0, 1.0)
    q /= np.sqrt(np.einsum("ij,ij->i", q, q))[:, None]
    x, y, z, w = q.T
    tangent = np.stack([1 - 2 * (y * y + z * z), 2 * (x * y + z * w), 2 * (x * z - y * w)], axis=1)
    normal = np.stack([2 * (x * z + y * w), 2 * (y * z - x * w), 1 - 2 * (x * x + y * y)], axis=1)
    return normal.astype(np.float32), np.concatenate([tangent, side], axis=1).astype(np.float32)


def _quaternions(turns: Array) -> Array:
    """(n, 4) x y z w of (n, 3, 3) rotations, from the largest of the four, so that nothing small is divided by."""
    m = turns
    trace = np.einsum("nii->n", m)
    four = np.stack([*(1 + 2 * m[:, k, k] - trace for k in range(3)), 1 + trace], axis=1)  # 4 q_k squared
    x, y, z, w = range(4)
    products = np.empty((len(m), 4, 4))  # 4 q_j q_k
    for k in range(4):
        products[:, k, k] = four[:, k]
    for a, b, value in (
        (x, y, m[:, 0, 1] + m[:, 1, 0]),
        (x, z, m[:, 0, 2] + m[:, 2, 0]),
        (y, z, m[:, 1, 2] + m[:, 2, 1]),
        (x, w, m[:, 2, 1] - m[:, 1, 2]),
        (y, w, m[:, 0, 2] - m[:, 2, 0]),
        (z, w, m[:, 1, 0] - m[:, 0, 1]),
    ):
        products[:, a, b] = products[:, b, a] = value
    rows = products[np.arange(len(m)), four.argmax(axis=1)]
    out: Array = rows / np.sqrt(np.einsum("ij,ij->i", rows, rows))[:, None]
    return out
