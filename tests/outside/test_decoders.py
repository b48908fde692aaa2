"""Decoders held against figures that independent programs found in float64."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, torus_part, triangulated
from tangentry.nodes.frames import frames
from tangentry.nodes.geometry.texels import texel_owners
from tangentry.nodes.maps.decoders import WAYS, shade
from tangentry.nodes.maps.surface import surface_of
from tangentry.nodes.model import Stream
from tangentry.nodes.normals import normals

LEANING = (0.5, 0.5, np.sqrt(0.5))


def corners(tangent, bitangent):
    """A triangle with one frame at all corners, its normal along z."""
    return np.tile(np.concatenate([[0, 0, 1], tangent, bitangent, [1]]).astype(np.float32), (1, 3, 1))


def apart(one, other):
    return np.degrees(np.arccos(np.clip(np.dot(one, other), -1, 1)))


@pytest.mark.parametrize(
    ("s", "unit", "raw", "cotangent"),
    [
        (0.1, 2.4940, 2.5429, 2.4190),
        (0.5, 12.0230, 13.8979, 10.8934),
        (1, 21.1222, 30.0000, 19.1066),
        (2, 30.8657, 60.0000, 30.0000),
    ],
)
def test_squaring_a_skewed_frame_errs_as_the_table_says(s, unit, raw, cotangent):
    """A right triangle with UVs (0,0), (1,0), (s,1): T = (1,0,0), B = (-s,1,0). Figures worked out by an independent
    program in float64 from Lengyel (2001) and Schueler (2006): the squared frame against unit T and B, against T and B
    as they are, and against the inverse transpose (1, s, 0), (0, 1, 0) that an exact height field has."""
    tangent, bitangent = np.array([1, 0, 0]), np.array([-s, 1, 0])
    squared = shade(corners(tangent, bitangent), 0, 0.2, 0.3, WAYS["vertex-square"], *LEANING)
    assert_allclose(squared, shade(corners(tangent, bitangent), 0, 0.2, 0.3, WAYS["pixel"], *LEANING), atol=1e-7)

    for frame, way, figure in (
        ((tangent, bitangent), "vertex-unit", unit),
        ((tangent, bitangent), "vertex", raw),
        (((1, s, 0), (0, 1, 0)), "vertex", cotangent),
    ):
        other = shade(corners(*frame), 0, 0.2, 0.3, WAYS[way], *LEANING)
        assert_allclose(apart(squared, other), figure, atol=1e-3)


def displaced_torus(nu, nv):
    """A torus with waves along its normals, normals by angle."""
    part = torus_part(nu, nv)
    points = part.points.values + 0.05 * part.normals.values * np.sin(8 * np.pi * part.uvs[0].values[_some(part), :1])
    moved = replace(part, points=Stream(points.astype(np.float32), part.points.index))
    return frames(normals(asset(triangulated(moved)), method="angle"))


def _some(part):
    """A row of UVs for every point."""
    row = np.zeros(len(part.points.values), np.int64)
    row[part.points.index] = part.uvs[0].index
    return row


def mean_difference(mesh, texel, size=128):
    """Degrees between what `pixel` and `pixel-square` shade."""
    surface = surface_of(mesh, [0])
    owners = texel_owners(surface.places, size, size)
    own = owners.triangle >= 0
    ways = [
        np.array(
            [
                shade(surface.frames, t, *w, WAYS[way], *texel)
                for t, w in zip(owners.triangle[own], owners.weights[own], strict=True)
            ]
        )
        for way in ("pixel", "pixel-square")
    ]
    return np.degrees(2 * np.arcsin(np.clip(np.linalg.norm(ways[0] - ways[1], axis=1) / 2, 0, 1))).mean()


def test_normalising_first_matters_with_the_square_of_the_edges_length():
    """An interpolated unit vector is short by the square of the angle between its ends: edges a quarter as long leave a
    sixteenth (own derivation)."""
    coarse, fine = (mean_difference(displaced_torus(nu, nv), LEANING) for nu, nv in ((100, 50), (400, 200)))

    assert_allclose(coarse / fine, 16, rtol=0.03)


def test_normalising_first_changes_nothing_for_flat_texels():
    assert mean_difference(displaced_torus(40, 20), (0, 0, 1)) < 1e-6
