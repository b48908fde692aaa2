"""Flawed props are caught, named and held back."""

from __future__ import annotations

import pytest

FLAWS = {
    "bench_sheared.obj": {"uv-skewed"},
    "buoy_inside_out.ply": {"normal-inverted"},
    "crate_with_a_fin.obj": {"edge-non-manifold"},
    "kiosk_half_unwrapped.obj": {"uv-degenerate"},
    "life_ring_without_tangents.glb": {"tangent-zero"},
    "oar_sharing_its_seam.glb": {"frame-shared", "side-mixed"},
}
REFUSALS = {
    "post_without_uvs.obj": 'post_without_uvs.obj: part "mooring_post": no UVs',
    "stair_cut_off.obj": "stair_cut_off.obj: line 208: point index 61, but the file has 60",
}


def test_the_build_says_that_something_is_wrong_and_delivers_nothing(sent_back):
    assert sent_back.exit == 1
    assert set(sent_back.assets) == {*FLAWS, *REFUSALS}
    drawn = {f"{prop.partition('.')[0]}_layout.png" for prop in FLAWS}
    assert {file.name for file in sent_back.out.iterdir()} == {"tally.md", "index.html", *drawn}


@pytest.mark.parametrize("prop", FLAWS)
def test_check_names_the_flaw_and_no_other_fault(sent_back, prop):
    found = sent_back.assets[prop]

    assert found["state"] == "faulty" and found["error"] is None
    assert {one["id"] for one in found["findings"] if one["severity"] == "fault"} == FLAWS[prop]


@pytest.mark.parametrize("prop", REFUSALS)
def test_what_cannot_be_solved_is_refused_by_file_and_element(sent_back, prop):
    assert sent_back.assets[prop]["state"] == "failed"
    assert REFUSALS[prop] in sent_back.assets[prop]["error"]


def test_the_tally_lists_every_prop_that_could_be_read(sent_back):
    listed = (sent_back.out / "tally.md").read_text()

    assert all(f"sent_back/{prop} | faulty" in listed for prop in FLAWS)
