"""Bakes held against surfaces that are known in closed form, and against maps that others baked."""

from __future__ import annotations

from dataclasses import replace
from typing import NamedTuple

import numpy as np
import pytest
from shapes import asset, torus_part, triangulated
from tangentry.nodes.bake import bake
from tangentry.nodes.encode import encode
from tangentry.nodes.frames import frames
from tangentry.nodes.geometry.texels import texel_owners
from tangentry.nodes.load import load
from tangentry.nodes.maps.decoders import WAYS, shade
from tangentry.nodes.maps.encodings import decoded
from tangentry.nodes.maps.surface import surface_of
from tangentry.nodes.model import Stream
from tangentry.nodes.texture import texture

RING, TUBE, HEIGHT, AROUND, ALONG = 2.0, 0.5, 0.06, 30, 6
SIZE = 192


def between(one, other):
    """(n,) degrees between unit vectors."""
    return np.degrees(2 * np.arcsin(np.clip(np.linalg.norm(one - other, axis=1) / 2, 0, 1)))


def height(a, b):
    """The bump and its derivatives along the ring (a) and around the tube (b)."""
    h = HEIGHT * np.sin(AROUND * a) * np.cos(ALONG * b)
    return (
        h,
        HEIGHT * AROUND * np.cos(AROUND * a) * np.cos(ALONG * b),
        -HEIGHT * ALONG * np.sin(AROUND * a) * np.sin(ALONG * b),
    )


def bumpy(a, b):
    """Points and unit normals of P(a, b) = C(a) + (r + h) N(a, b) on a torus whose tube runs round C(a).

    With e(a) the ring's direction outward, N = cos b e + sin b y, and the unit vectors t along a and s along b:
    dP/da = (R + (r + h) cos b) t + h_a N and dP/db = (r + h) s + h_b N, so the normal is along
    N - h_a / (R + (r + h) cos b) t - h_b / (r + h) s.
    """
    h, h_a, h_b = height(a, b)
    zero = np.zeros_like(a)
    e = np.stack([np.cos(a), zero, -np.sin(a)], axis=-1)
    t = np.stack([-np.sin(a), zero, -np.cos(a)], axis=-1)
    y = np.array([0.0, 1.0, 0.0])
    n = np.cos(b)[..., None] * e + np.sin(b)[..., None] * y
    s = -np.sin(b)[..., None] * e + np.cos(b)[..., None] * y
    normal = n - (h_a / (RING + (TUBE + h) * np.cos(b)))[..., None] * t - (h_b / (TUBE + h))[..., None] * s
    return RING * e + (TUBE + h)[..., None] * n, normal / np.linalg.norm(normal, axis=-1, keepdims=True)


def parameters(points):
    """(a, b, r): where points lie in the torus's coordinates."""
    ring = np.hypot(points[..., 0], points[..., 2]) - RING
    return np.arctan2(-points[..., 2], points[..., 0]), np.arctan2(points[..., 1], ring), np.hypot(points[..., 1], ring)


def along_rays(origins, directions, far):
    """Where rays first meet the bumpy torus: marched in 200 steps, then halved down; NaN where they do not."""
    steps = np.linspace(0, far, 201)

    def outside(t):
        a, b, r = parameters(origins + t[..., None] * directions)
        return r - TUBE - height(a, b)[0]

    gaps = np.stack([outside(np.full(len(origins), t)) for t in steps])
    crossed = (gaps[:-1] > 0) & (gaps[1:] <= 0)
    first = crossed.argmax(axis=0)
    low, high = steps[first], steps[first + 1]
    for _ in range(50):
        middle = (low + high) / 2
        out = outside(middle) > 0
        low, high = np.where(out, middle, low), np.where(out, high, middle)
    return np.where(crossed.any(axis=0), low, np.nan)


def bumpy_mesh(nu, nv):
    """The bumpy torus as a mesh with its own normals."""
    part = torus_part(nu, nv, RING, TUBE)
    a, b, _ = parameters(part.points.values.astype(float))
    points, normals = bumpy(a, b)
    index = part.points.index
    return asset(
        replace(
            part, points=Stream(points.astype(np.float32), index), normals=Stream(normals.astype(np.float32), index)
        )
    )


class Seen(NamedTuple):
    """Of every owned texel of the target."""

    normal: np.ndarray  # (n, 3): what the surface in closed form has where the texel's ray meets it
    lean: np.ndarray  # (n,): the cosine between that and the ray


def truth(target, reach):
    """What a bake should find: rays from the offset surface along smoothed normals, which here are those by angle."""
    from tangentry.nodes.maps.bake_aim import aim_at

    surface = surface_of(target, [0])
    owners = texel_owners(surface.places, SIZE, SIZE)
    own = owners.triangle >= 0
    weights = owners.weights[own].astype(float)
    weights = np.concatenate([1 - weights.sum(axis=1, keepdims=True), weights], axis=1)
    outward = aim_at(
        surface.positions, surface.frames[..., :3], np.ones((len(surface.part), 3), np.float32), "smoothed"
    ).outward
    place, to = (np.einsum("nk,nkx->nx", weights, rows[owners.triangle[own]]) for rows in (surface.positions, outward))
    length = np.linalg.norm(to, axis=1, keepdims=True)
    origins, directions = place + reach * to, -to / length
    t = along_rays(origins, directions, 2 * reach)
    a, b, _ = parameters(origins + t[:, None] * directions)
    normal = bumpy(a, b)[1]
    return surface, owners, own, Seen(normal, -np.einsum("nx,nx->n", normal, directions))


@pytest.fixture(scope="module")
def baked():
    """The target, its map in float, and how far rays go."""
    target, reach = frames(asset(triangulated(torus_part(96, 48, RING, TUBE)))), 0.1
    return target, bake(target, bumpy_mesh(2400, 600), size=SIZE, distance=reach), reach


@pytest.mark.parametrize(("bits", "mean"), [(8, 0.5), (16, 0.05)])
def test_decoded_normals_of_a_bumpy_torus_are_those_of_its_formula(baked, bits, mean):
    """Differential geometry of a surface displaced along its normals, worked out in `bumpy`."""
    target, map, reach = baked
    surface, owners, own, seen = truth(target, reach)
    texels = decoded(encode(map, bits=bits).sheets[0])[own]
    shown = np.array(
        [
            shade(surface.frames, t, *w, WAYS["pixel"], *texel)
            for t, w, texel in zip(owners.triangle[own], owners.weights[own], texels, strict=True)
        ]
    )

    clear = seen.lean > 0.3  # away from silhouettes
    assert clear.mean() > 0.95
    assert between(shown, seen.normal)[clear].mean() < mean


def components(part):
    """(triangles,) the piece that each triangle of a mesh belongs to, pieces being joined by shared positions."""
    import networkx as nx

    triangles = part.points.values[part.points.index].reshape(-1, 3, 3)
    _, point = np.unique(triangles.reshape(-1, 3), axis=0, return_inverse=True)
    point = point.reshape(-1, 3)
    joined = nx.Graph([*map(tuple, point[:, :2]), *map(tuple, point[:, 1:])])
    piece = {p: k for k, found in enumerate(nx.connected_components(joined)) for p in found}
    return np.array([piece[p] for p in point[:, 0]])


def cut_out(mesh, chosen, by):
    """An asset of some triangles of a glTF mesh, moved."""
    part = mesh.parts[0]
    corners = (np.nonzero(chosen)[0][:, None] * 3 + np.arange(3)).ravel()
    points = (part.points.values + np.float32(by)).astype(np.float32)
    cut = replace(
        part,
        starts=np.arange(chosen.sum() + 1, dtype=np.int32) * 3,
        points=Stream(points, part.points.index[corners]),
        normals=Stream(part.normals.values, part.normals.index[corners]),
        uvs=tuple(Stream(uv.values, uv.index[corners]) for uv in part.uvs),
        source=None,
    )
    return replace(mesh, parts=(cut,))


def test_the_map_of_the_normal_tangent_test_is_baked_again_from_its_own_geometry(samples):
    """NormalTangentTest (Analytical Graphics, 2017): each left cell is true geometry, the cell 0.32 to its right
    a square whose part of the map was baked from it. Its texels are 8-bit, flat ones 0.25 degrees off."""
    mesh = load(file=str(samples / "gltf_tangent/NormalTangentTest/NormalTangentTest.glb"))
    part = mesh.parts[0]
    stored, piece = decoded(texture(mesh).sheets[0]), components(part)
    solid = np.bincount(piece)[piece] > 100
    label = (np.bincount(piece)[piece] == 2) & (part.points.values[part.points.index[::3], 1] < -1)
    target = frames(cut_out(mesh, ~solid & ~label, (0, 0, 0)))
    texels = bake(target, cut_out(mesh, solid, (0.32, 0, 0)), size=2048, distance=0.1, samples=4).sheets[0].texels

    owner = texel_owners(surface_of(target, [0]).places, 2048, 2048).triangle
    off = between(texels[owner >= 0], stored[owner >= 0])
    cells = np.bincount(owner[owner >= 0] // 2, weights=off) / np.bincount(owner[owner >= 0] // 2)
    assert len(cells) == 15
    assert cells.max() < 0.5
