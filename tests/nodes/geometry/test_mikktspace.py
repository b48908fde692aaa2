"""The scheme beside its definition, worked out corner by corner without any table."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from tangentry.nodes.geometry.frames import solve_frames
from tangentry.nodes.geometry.vectors import unit
from tangentry.nodes.model import Frames, Part, Stream


def junk(seed: int, triangles: int = 14) -> Part:
    """Triangles on a few vertices, so that edges have any number of faces of any side, some without area."""
    chance = np.random.default_rng(seed)
    streams = [chance.normal(size=(5, 3)), unit(chance.normal(size=(2, 3))), chance.integers(0, 3, (6, 2))]
    index = [chance.integers(0, len(rows), 3 * triangles).astype(np.int32) for rows in streams]
    index[1], index[2] = index[0] % 2, index[0]  # whole vertices, so that they meet
    points, normals, uvs = (Stream(rows.astype(np.float32), one) for rows, one in zip(streams, index, strict=True))
    return Part("junk", -1, np.arange(triangles + 1, dtype=np.int32) * 3, points, normals, (uvs,))


def by_definition(part: Part) -> tuple[np.ndarray, np.ndarray]:
    """(corners, 3) tangents and (corners,) sides; zero where a face has no area or nothing defines them."""
    p, n, uv = (
        s.values[s.index].astype(np.float64).reshape(-1, 3, s.values.shape[1])
        for s in (part.points, part.normals, part.uvs[0])
    )
    first, second = p[:, 1] - p[:, 0], p[:, 2] - p[:, 0]
    (u1, v1), (u2, v2) = (uv[:, 1] - uv[:, 0]).T, (uv[:, 2] - uv[:, 0]).T
    side = np.sign(u1 * v2 - u2 * v1)
    solid = np.linalg.norm(np.cross(first, second), axis=1) > 0
    tangent = unit((v2[:, None] * first - v1[:, None] * second) * side[:, None])
    own = np.where(np.linalg.norm(tangent, axis=1) > 0, side, 0)
    vertex = part.points.index.reshape(-1, 3)

    def neighbours(f: int) -> list[int]:
        out = []
        for g in range(len(vertex)):
            for i in range(3):
                for j in range(3):
                    edge = (vertex[f, i], vertex[f, (i + 1) % 3])
                    if solid[f] and solid[g] and f != g and edge == (vertex[g, (j + 1) % 3], vertex[g, j]):
                        out.append(g)
        return out

    faces = own.copy()
    while True:
        given = {
            f: sum(faces[g] for g in neighbours(f))
            for f in range(len(faces))
            if solid[f] and faces[f] == 0 and any(faces[g] for g in neighbours(f))
        }
        if not given:
            break
        for f, votes in given.items():
            faces[f] = 1 if votes >= 0 else -1

    corners = [(f, k) for f in range(len(vertex)) for k in range(3) if solid[f]]
    group = {corner: {corner} for corner in corners}
    for f, k in corners:
        for g, j in corners:
            out, into = vertex[f, (k + 1) % 3], vertex[g, (j + 2) % 3]
            if vertex[f, k] == vertex[g, j] and out == into and faces[f] == faces[g]:
                both = group[f, k] | group[g, j]
                for corner in both:
                    group[corner] = both
    tangents, sides = np.zeros((len(vertex), 3, 3)), np.zeros((len(vertex), 3))
    for f, k in corners:
        total = np.zeros(3)
        for g, j in group[f, k]:
            normal = unit(n[g, j][None])[0]
            flat = [
                e - normal * (e @ normal)
                for e in (p[g, (j + 1) % 3] - p[g, j], p[g, (j + 2) % 3] - p[g, j], tangent[g])
            ]
            if own[g] and all(np.linalg.norm(e) > 0 for e in flat):
                a, b, t = (e / np.linalg.norm(e) for e in flat)
                total += np.arccos(np.clip(a @ b, -1, 1)) * t
        if np.linalg.norm(total) > 1e-4:
            tangents[f, k], sides[f, k] = total / np.linalg.norm(total), faces[f]
    return tangents.reshape(-1, 3), sides.ravel()


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_frames_are_those_of_the_definition(seed):
    part = junk(seed)
    tangents, sides = by_definition(part)

    made: Frames = solve_frames(part, part.uvs[0], 0, False, "mikktspace")

    defined = sides != 0
    assert_allclose(made.tangents[made.index][defined], tangents[defined], atol=1e-4)
    assert (made.sides[made.index] == sides)[defined].all()
