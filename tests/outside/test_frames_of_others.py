"""Frames and findings held against files that others made, and against what was measured of them by other programs."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from tangentry.nodes.check import check
from tangentry.nodes.frames import frames
from tangentry.nodes.geometry.vectors import angle_between, unit
from tangentry.nodes.load import load
from tangentry.nodes.model import Asset
from tangentry.pipeline.flow import Finding


def opened(samples: Path, name: str) -> Asset:
    return load(str(samples / name))


def agreement(brought: Asset) -> tuple[np.ndarray, np.ndarray]:
    """Degrees between stored tangents and solved ones, and whether the signs are equal, of all corners."""
    made = frames(brought, stored="replace", where="all")
    pairs = [(one.frames, two.frames) for one, two in zip(brought.parts, made.parts, strict=True) if two.frames]
    degrees = [
        angle_between(unit(one.tangents.astype(np.float64))[one.index], two.tangents[two.index]) for one, two in pairs
    ]
    return np.concatenate(degrees), np.concatenate([one.sides[one.index] == two.sides[two.index] for one, two in pairs])


@pytest.mark.parametrize(
    "name",
    ["NormalTangentMirrorTest/NormalTangentMirrorTest.glb", "armor/armor.gltf", "ClearCoatTest/ClearCoatTest.glb"],
)
def test_stored_tangents_made_by_the_published_scheme_are_met(samples, name):
    """The standard's own tests and a production mesh (sources and licences in the samples' manifest)."""
    degrees, equal = agreement(opened(samples, f"gltf_tangent/{name}"))

    assert np.mean(degrees < 0.1) >= 0.999 and equal.mean() >= 0.9999


@pytest.mark.parametrize(
    ("name", "within"),
    [("FlightHelmet/FlightHelmet.gltf", 32), ("vintageFan/vintageFan_animated.gltf", 40), ("muru_cat/scene.gltf", 30)],
)
def test_stored_tangents_made_by_other_schemes_are_met_as_often_as_by_another_solver(samples, name, within):
    """A solve written independently from the published scheme meets 32, 40 and 30 % of these within 0.1 degree."""
    degrees, _ = agreement(opened(samples, f"gltf_tangent/{name}"))

    assert 100 * np.mean(degrees < 0.1) == pytest.approx(within, abs=1)
    assert 0.7 <= np.mean(degrees < 1) <= 0.8


def findings(samples: Path, name: str, id: str) -> list[Finding]:
    return [item for item in check(opened(samples, name)).items if item.id == id]


@pytest.mark.parametrize(
    ("name", "vertices"),
    [
        ("FlightHelmet/FlightHelmet.gltf", 10),
        ("vintageFan/vintageFan_animated.gltf", 552),
        ("frostAxe/frostAxe.glb", 208),
    ],
)
def test_vertices_that_mirrored_charts_share_are_found(samples, name, vertices):
    """Counted by an independent program: vertices used by UV triangles of both signs."""
    brought = opened(samples, f"gltf_tangent/{name}")
    shared = [item for item in check(brought).items if item.id == "frame-shared"]
    parts = {part.name: part for part in brought.parts}

    assert sum(len(np.unique(parts[item.part].source[item.elements])) for item in shared) == vertices
    assert {item.severity for item in shared} == {"fault"}


def test_sides_opposite_to_the_rule_are_judged_with_the_map(samples):
    """Measured: 99 % of stored w are opposite to the rule, and green points down: together they are right."""
    flipped = findings(samples, "gltf_tangent/muru_cat/scene.gltf", "side-flipped")

    assert sum(item.count for item in flipped) > 12_000 and {item.severity for item in flipped} == {"note"}


def test_junk_tangents_are_a_fault(samples):
    """Measured: a median of 64 degrees off, 26 % within one degree, parallel to the normal in places, two parts
    without UVs, one wrong sign."""
    name = "gltf_nasty/TestScene/TestScene.gltf"
    unexplained = findings(samples, name, "tangent-unexplained")

    assert {item.severity for item in unexplained} == {"fault"} and sum(item.count for item in unexplained) > 2000
    assert max(item.measured.max() for item in findings(samples, name, "tangent-leaning")) > 89
    assert len(findings(samples, name, "tangent-without-uv")) == 2


@pytest.mark.parametrize(
    ("name", "id", "count"),
    [
        ("gltf_tangent/01_textured_sphere/01_textured_sphere.gltf", "uv-degenerate", 64),
        ("gltf_tangent/vintageFan/vintageFan_animated.gltf", "uv-degenerate", 36),
        ("gltf_tangent/muru_cat/scene.gltf", "uv-degenerate", 12),
        ("gltf_tangent/NormalTangentMirrorTest/NormalTangentMirrorTest.glb", "uv-mirrored", 40),
        ("gltf_tangent/NormalTangentTest/NormalTangentTest.glb", "frame-missing", 7774),
        ("obj/nasty/capsule.obj", "face-zero-area", 200),
        ("obj/nonmanifold/fan3.obj", "edge-non-manifold", 3),
    ],
)
def test_what_others_counted_is_counted_alike(samples, name, id, count):
    """Facts measured by an independent program; fan3's one bad edge has three faces, so three corners begin it."""
    assert sum(item.count for item in findings(samples, name, id)) == count


def test_tangents_at_the_poles_lean(samples):
    """Measured: |T . N| up to 0.201, which is 11.6 degrees."""
    (leaning,) = findings(samples, "gltf_tangent/01_textured_sphere/01_textured_sphere.gltf", "tangent-leaning")

    assert np.sin(np.radians(leaning.measured.max())) == pytest.approx(0.201, abs=0.001)


def test_the_validators_own_bad_tangents_are_found(samples):
    """Khronos's validator reports on this fixture: ACCESSOR_INVALID_SIGN x1, ACCESSOR_VECTOR3_NON_UNIT x2."""
    found = check(opened(samples, "gltf_nasty/validator/normals_tangents_non_unit_invalid_sign.gltf"))

    counts = {item.id: item.count for item in found.items}
    assert counts["side-invalid"] == counts["normal-non-unit"] == counts["tangent-non-unit"] == 1
