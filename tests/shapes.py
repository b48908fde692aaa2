"""Analytic shapes for tests, each with the frame that its parametrisation gives at every corner.

Points, normals and UVs are separate streams: a grid's seam is two columns of UVs over one column of points.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from tangentry.nodes.model import Asset, Part, Stream
from tangentry.pipeline.flow import Array


class Truth(NamedTuple):
    """The frame of a parametrised surface at every corner: (corners, 3) float64, unit; v upward."""

    tangent: Array
    bitangent: Array
    normal: Array


def asset(*parts: Part, name: str = "shape") -> Asset:
    """An asset of these parts, v upward, without materials."""
    return Asset(name, parts)


def quads(
    points: Array,
    uvs: Array,
    normals: Array,
    point_index: Array,
    uv_index: Array,
    normal_index: Array,
    name: str = "shape",
) -> Part:
    """A part of quads from (faces, 4) index arrays."""
    starts = np.arange(len(point_index) + 1, dtype=np.int32) * 4
    streams = [
        Stream(np.ascontiguousarray(values, np.float32), np.ascontiguousarray(index.ravel(), np.int32))
        for values, index in ((points, point_index), (normals, normal_index), (uvs, uv_index))
    ]
    return Part(name, -1, starts, streams[0], streams[1], (streams[2],))


def triangulated(part: Part) -> Part:
    """The part with its polygons cut into triangles."""
    from dataclasses import replace

    from tangentry.nodes.geometry.triangles import triangulate

    triangles, _ = triangulate(part)
    corner = triangles.ravel()

    def taken(stream: Stream) -> Stream:
        return Stream(stream.values, np.ascontiguousarray(stream.index[corner]))

    return replace(
        part,
        starts=np.arange(len(triangles) + 1, dtype=np.int32) * 3,
        points=taken(part.points),
        normals=taken(part.normals) if part.normals else None,
        uvs=tuple(taken(uv) for uv in part.uvs),
    )


def _wrapped(nu: int, nv: int, wrap_u: bool, wrap_v: bool) -> tuple[Array, Array]:
    """(faces, 4) indices into a grid of nu x nv cells, for points (which wrap) and for UVs (which do not)."""
    i, j = (a.ravel() for a in np.meshgrid(np.arange(nu), np.arange(nv), indexing="ij"))
    corners = [(i, j), (i + 1, j), (i + 1, j + 1), (i, j + 1)]
    columns, rows = (nu if wrap_u else nu + 1), (nv if wrap_v else nv + 1)
    points = np.stack([(a % columns) * rows + (b % rows) for a, b in corners], axis=1)
    uvs = np.stack([a * (nv + 1) + b for a, b in corners], axis=1)
    return points, uvs


def _grid_uvs(nu: int, nv: int) -> Array:
    u, v = np.meshgrid(np.linspace(0, 1, nu + 1), np.linspace(0, 1, nv + 1), indexing="ij")
    return np.stack([u.ravel(), v.ravel()], axis=1)


def torus(nu: int = 24, nv: int = 12, ring: float = 2.0, tube: float = 0.5) -> Asset:
    """A torus around y: u along the ring, v around the tube, triangles 2 nu nv as quads; seams in u and in v."""
    return asset(torus_part(nu, nv, ring, tube), name="torus")


def torus_part(nu: int, nv: int, ring: float = 2.0, tube: float = 0.5) -> Part:
    """The torus as a part: P = ((R + r cos b) cos a, r sin b, -(R + r cos b) sin a), a = 2 pi u, b = 2 pi v."""
    a, b = np.meshgrid(2 * np.pi * np.arange(nu) / nu, 2 * np.pi * np.arange(nv) / nv, indexing="ij")
    a, b = a.ravel(), b.ravel()
    normals = np.stack([np.cos(b) * np.cos(a), np.sin(b), -np.cos(b) * np.sin(a)], axis=1)
    points = normals * tube + ring * np.stack([np.cos(a), np.zeros_like(a), -np.sin(a)], axis=1)
    at, uv_at = _wrapped(nu, nv, True, True)
    return quads(points, _grid_uvs(nu, nv), normals, at, uv_at, at, "torus")


def torus_truth(part: Part) -> Truth:
    """The torus's frame from its parametrisation, at every corner of a part that `torus_part` made."""
    u, v = part.uvs[0].values[part.uvs[0].index].astype(np.float64).T * 2 * np.pi
    zero = np.zeros_like(u)
    tangent = np.stack([-np.sin(u), zero, -np.cos(u)], axis=1)
    bitangent = np.stack([-np.sin(v) * np.cos(u), np.cos(v), np.sin(v) * np.sin(u)], axis=1)
    normal = np.stack([np.cos(v) * np.cos(u), np.sin(v), -np.cos(v) * np.sin(u)], axis=1)
    return Truth(tangent, bitangent, normal)


def cylinder_part(nu: int = 24, nv: int = 4, radius: float = 1.0, height: float = 3.0) -> Part:
    """An open cylinder around y: u around, v up."""
    a, h = np.meshgrid(2 * np.pi * np.arange(nu) / nu, np.linspace(0, height, nv + 1), indexing="ij")
    a, h = a.ravel(), h.ravel()
    normals = np.stack([np.cos(a), np.zeros_like(a), -np.sin(a)], axis=1)
    points = normals * radius + np.stack([np.zeros_like(h), h, np.zeros_like(h)], axis=1)
    at, uv_at = _wrapped(nu, nv, True, False)
    return quads(points, _grid_uvs(nu, nv), normals, at, uv_at, at, "cylinder")


def cylinder_truth(part: Part) -> Truth:
    """The cylinder's frame at every corner."""
    u = part.uvs[0].values[part.uvs[0].index][:, 0].astype(np.float64) * 2 * np.pi
    zero, one = np.zeros_like(u), np.ones_like(u)
    tangent = np.stack([-np.sin(u), zero, -np.cos(u)], axis=1)
    return Truth(tangent, np.stack([zero, one, zero], axis=1), np.stack([np.cos(u), zero, -np.sin(u)], axis=1))


def sphere_part(nu: int = 24, nv: int = 12, radius: float = 1.0) -> Part:
    """A sphere around y, u around, v from the south pole to the north: pole faces are quads with two corners there."""
    a, b = np.meshgrid(2 * np.pi * np.arange(nu) / nu, np.pi * (np.arange(nv + 1) / nv - 0.5), indexing="ij")
    a, b = a.ravel(), b.ravel()
    normals = np.stack([np.cos(b) * np.cos(a), np.sin(b), -np.cos(b) * np.sin(a)], axis=1)
    normals[np.abs(np.abs(b) - np.pi / 2) < 1e-9] *= (0, 1, 0)
    at, uv_at = _wrapped(nu, nv, True, False)
    return quads(normals * radius, _grid_uvs(nu, nv), normals, at, uv_at, at, "sphere")


def sphere_truth(part: Part) -> Truth:
    """The sphere's frame at every corner; at the poles, that of the corner's own u."""
    u, v = part.uvs[0].values[part.uvs[0].index].astype(np.float64).T
    a, b = 2 * np.pi * u, np.pi * (v - 0.5)
    tangent = np.stack([-np.sin(a), np.zeros_like(a), -np.cos(a)], axis=1)
    bitangent = np.stack([-np.sin(b) * np.cos(a), np.cos(b), np.sin(b) * np.sin(a)], axis=1)
    normal = np.stack([np.cos(b) * np.cos(a), np.sin(b), -np.cos(b) * np.sin(a)], axis=1)
    return Truth(tangent, bitangent, normal)


def grid_part(nu: int = 4, nv: int = 4, size: float = 1.0) -> Part:
    """A flat square in the x-y plane, seen from +z, u along x and v along y."""
    uvs = _grid_uvs(nu, nv)
    points = np.concatenate([uvs * size, np.zeros((len(uvs), 1))], axis=1)
    at, _ = _wrapped(nu, nv, False, False)
    normals = np.array([[0.0, 0.0, 1.0]])
    return quads(points, uvs, normals, at, at, np.zeros_like(at), "grid")


def box_part(size: float = 1.0) -> Part:
    """A cube with hard edges: six charts side by side in UV space, with gutters between."""
    x = np.array([[a, b, c] for a in (0, 1) for b in (0, 1) for c in (0, 1)], float) * size
    at = np.array([[1, 5, 7, 3], [4, 0, 2, 6], [5, 4, 6, 7], [0, 1, 3, 2], [3, 7, 6, 2], [0, 4, 5, 1]])
    normals = np.array([[0, 0, 1], [0, 0, -1], [1, 0, 0], [-1, 0, 0], [0, 1, 0], [0, -1, 0]], float)
    uvs = np.array(
        [
            [(col + 0.1 + 0.8 * s) / 3, (row + 0.1 + 0.8 * t) / 2]
            for row in (0, 1)
            for col in range(3)
            for s, t in ((0, 0), (1, 0), (1, 1), (0, 1))
        ]
    )
    return quads(x, uvs, normals, at, np.arange(24).reshape(6, 4), np.repeat(np.arange(6), 4).reshape(6, 4), "box")


def half_mirrored(part: Part, nu: int, nv: int) -> Part:
    """A grid of quads whose faces in the second half of u reuse the first's charts, mirrored: u -> 1 - u beyond 1/2."""
    from dataclasses import replace

    uv = part.uvs[0].values.copy()
    uv[:, 0] = np.minimum(uv[:, 0], 1 - uv[:, 0])
    return replace(part, uvs=(Stream(uv, part.uvs[0].index),))
