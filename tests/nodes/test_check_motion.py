"""check with `animations`: how far skew and stretch grow while a mesh moves, in closed form."""

from __future__ import annotations

import numpy as np
import pytest
from moving_strip import CELLS, strip
from numpy.testing import assert_allclose
from tangentry.nodes.check import check
from tangentry.nodes.split import split
from tangentry.nodes.weld import weld
from tangentry.pipeline.flow import Finding, Findings

GOLDEN = (1 + np.sqrt(5)) / 2  # the greatest singular value of a shear by 1: its area stays, so no scale changes it


def of(findings: Findings, id: str) -> Finding:
    (item,) = (one for one in findings.items if one.id == id)
    return item


@pytest.mark.parametrize("moves", ["joint", "weights"])
@pytest.mark.parametrize("way", ["LINEAR", "CUBICSPLINE"])
def test_a_strip_that_shears_is_told_with_its_angle_and_its_worst_moment(tmp_path, moves, way):
    found = check(strip(tmp_path, moves, way), animations=5, motion_stretch=1.5)

    skew, stretch = of(found, "motion-skew"), of(found, "motion-stretch")
    assert skew.count == stretch.count == 2 * CELLS**2
    assert_allclose(skew.measured, 45, atol=1e-3)
    assert_allclose(stretch.measured, GOLDEN, atol=1e-5)
    assert '1.000 s into "lift" (sample 5 of 5)' in skew.what and '1.000 s into "lift"' in stretch.what
    assert found.facts["skew growth in motion"] == 45.0 and found.facts["stretch growth in motion"] == 1.618


@pytest.mark.parametrize(("samples", "degrees"), [(1, 0.0), (2, 45.0), (3, 45.0)])
def test_samples_stand_evenly_from_the_first_key_to_the_last(tmp_path, samples, degrees):
    assert check(strip(tmp_path, "joint"), animations=samples).facts["skew growth in motion"] == degrees


def test_a_step_holds_until_the_next_key(tmp_path):
    found = check(strip(tmp_path, "joint", "STEP"), animations=4, motion_skew=0)

    assert of(found, "motion-skew").count == 2 * CELLS**2 and "(sample 4 of 4)" in of(found, "motion-skew").what


def test_a_rigid_motion_lets_nothing_grow(tmp_path):
    found = check(strip(tmp_path, "node"), animations=4)

    assert found.facts["skew growth in motion"] == pytest.approx(0, abs=1e-3)
    assert found.facts["stretch growth in motion"] == pytest.approx(1, abs=1e-5)
    assert not [item for item in found.items if item.id.startswith("motion")]


def test_nothing_is_sampled_unless_asked_for(tmp_path):
    found = check(strip(tmp_path, "joint"))

    assert not [name for name in found.facts if "motion" in name]


def test_a_welded_and_split_mesh_moves_as_its_source_does(tmp_path):
    one, other = strip(tmp_path, "joint"), split(weld(strip(tmp_path, "joint"), within=1e-6))

    assert_allclose(*(of(check(each, animations=3), "motion-skew").measured for each in (one, other)))


def test_the_file_s_own_animations_are_played(samples):
    """A fox of a few hundred triangles runs: its skin shears far beyond what a fan's rigid parts do."""
    from tangentry.nodes.load import load

    fan, fox = (
        check(load(str(samples / name)), animations=8).facts["skew growth in motion"]
        for name in ("gltf_tangent/vintageFan/vintageFan_animated.gltf", "gltf_roundtrip/Fox/Fox.glb")
    )
    assert fan < 1 < 15 < fox
