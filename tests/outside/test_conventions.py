"""Green measured on maps made by others, held against what an independent program found."""

from __future__ import annotations

import pytest
from tangentry.nodes.check_map import check_map
from tangentry.nodes.load import load
from tangentry.nodes.maps.conventions import measure_green
from tangentry.nodes.texture import texture

CLEAR = {  # correlations found by an independent program
    "cube_normal.png": ("up", 0.998),
    "ScratchedGold-Normal.png": ("down", -0.953),
    "handleGem_normal.png": ("up", 0.784),
    "normal_0001.webp": ("up", 0.605),
    "normal.png": ("up", 0.98),
    "lambert2_normal.png": ("down", -0.38),
    "lambert3_normal.png": ("down", -0.37),
}
WEAK = [
    "vintageFanMat_normal.jpg",
    "FlightHelmet_Materials_LensesMat_Normal.png",
    "FlightHelmet_Materials_GlassPlasticMat_Normal.png",
    "FlightHelmet_Materials_RubberWoodMat_Normal.png",
]


def sheet(samples, name, **how):
    return texture(file=str(next(samples.rglob(name))), **how).sheets[0]


@pytest.mark.parametrize("name", CLEAR)
def test_clear_maps_are_told_right(samples, name):
    verdict, correlation = CLEAR[name]
    found = measure_green(sheet(samples, name).texels)

    assert found.verdict == verdict
    # Which texels are too steep to count is a matter of choice.
    assert found.correlation == pytest.approx(correlation, abs=0.035)


@pytest.mark.parametrize("name", ["NormalTangentTest.glb", "NormalTangentMirrorTest.glb"])
def test_the_standards_own_maps_are_green_up(samples, name):
    """glTF 2.0, 3.9.3; made by the standard's authors to show just that."""
    for one in texture(load(file=str(next(samples.rglob(name))))).sheets:
        found = measure_green(one.texels)
        assert found.verdict == "up" and found.correlation > 0.9


@pytest.mark.parametrize("name", CLEAR)
def test_turned_over_they_are_told_the_other_way(samples, name):
    texels = sheet(samples, name).texels.copy()
    texels[..., 1] = 2 ** (8 * texels.itemsize) - 1 - texels[..., 1]

    assert measure_green(texels).verdict == {"up": "down", "down": "up"}[CLEAR[name][0]]


@pytest.mark.parametrize("name", WEAK)
def test_weakly_detailed_maps_stay_undecided(samples, name):
    assert measure_green(sheet(samples, name).texels).verdict == "undecided"


@pytest.mark.parametrize("name", ["ScratchedGold-Normal.png", "lambert2_normal.png"])
def test_green_that_points_down_contradicts_what_gltf_wants(samples, name):
    """glTF 2.0, 3.9.3: green is +Y, up."""
    ids = {item.id for item in check_map(texture(file=str(next(samples.rglob(name))))).items}

    assert "map-green-contradicted" in ids
    assert "map-green-contradicted" not in {
        item.id for item in check_map(texture(file=str(next(samples.rglob(name))), green="down")).items
    }
