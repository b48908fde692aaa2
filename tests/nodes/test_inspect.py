"""Facts of files, as a reader would count them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from shapes import asset, half_mirrored, sphere_part, torus_part
from tangentry.nodes.export import export
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.frames import frames
from tangentry.nodes.inspect import inspect
from tangentry.nodes.split import split
from tangentry.pipeline.errors import InputError


@pytest.fixture
def saved(tmp_path):
    def save(mesh, name):
        for one in export(mesh, file=name).files:
            (tmp_path / one.name).write_bytes(one.content.tobytes())
        return str(tmp_path / name)

    return save


def test_a_meshes_facts_are_counted(saved):
    facts = inspect(saved(frames(split(asset(half_mirrored(torus_part(12, 8), 12, 8)))), "ring.glb")).facts

    assert (facts["parts"], facts["UV sets"], facts["v grows"]) == (1, 1, "down")
    assert facts["faces by corners"] == "192 of 3" and facts["corners"] == 576
    assert (facts["triangles as wound in UV space"], facts["triangles mirrored in UV space"]) == (96, 96)


def test_stored_tangents_are_held_against_the_rule(saved):
    facts = inspect(saved(frames(asset(torus_part(12, 8))), "ring.glb")).facts

    assert facts["stored tangents within 1 degree"] == facts["stored sides as the rule has them"] == "100.00%"


def test_each_part_is_held_against_the_rule(saved):
    solved = frames(asset(torus_part(12, 8), torus_part(8, 6)))
    right, wrong = solved.parts
    wrong = replace(wrong, name="inner", frames=replace(wrong.frames, sides=-wrong.frames.sides))
    facts = inspect(saved(replace(solved, parts=(right, wrong)), "rings.glb")).facts

    assert facts["part 0, torus: stored tangents"].endswith("; 100.00% of the sides as the rule")
    assert facts["part 1, inner: stored tangents"].endswith("; 0.00% of the sides as the rule")


def test_polygons_stay_polygons(saved, tmp_path):
    (tmp_path / "tile.obj").write_text("v 0 0 0\nv 1 0 0\nv 2 1 0\nv 1 2 0\nv 0 1 0\nf 1 2 3 4 5\nf 1 3 4\n")

    assert inspect(str(tmp_path / "tile.obj")).facts["faces by corners"] == "1 of 3, 1 of 5"


def test_the_triangles_that_end_in_a_pole_are_counted(saved):
    facts = inspect(saved(frames(asset(sphere_part(16, 8))), "buoy.ply")).facts

    assert facts["triangles that define no tangent"] == 2 * 16


@pytest.mark.parametrize(("green", "verdict"), [(1, "up"), (-1, "down")])
def test_an_images_green_is_measured(tmp_path, green, verdict):
    """Slopes of a height field in closed form: d(slope x)/dy equals d(slope y)/dx (Frankot & Chellappa 1988)."""
    x, y = np.meshgrid(np.arange(128), np.arange(128)[::-1])
    p, q = np.cos(x / 7) * np.sin(y / 5), np.sin(x / 7) * np.cos(y / 5) * 7 / 5
    normal = np.stack([-p, -q * green, np.ones_like(p)], axis=2)
    normal /= np.linalg.norm(normal, axis=2, keepdims=True)
    (tmp_path / "bumps.png").write_bytes(write_png(np.rint((normal + 1) * 127.5).astype(np.uint8)).tobytes())

    facts = inspect(str(tmp_path / "bumps.png")).facts

    assert (facts["width"], facts["height"], facts["bits a channel"]) == (128, 128, 8)
    assert str(facts["green as normals"]).startswith(verdict)


def test_what_is_no_mesh_and_no_image_is_refused(tmp_path):
    (tmp_path / "notes.txt").write_text("bring rope")

    with pytest.raises(InputError, match=r"notes\.txt"):
        inspect(str(tmp_path / "notes.txt"))


def test_what_spoils_an_image_as_a_normal_map_is_told(tmp_path):
    """Grey texels are heights."""
    grey = np.random.default_rng(0).integers(0, 256, (32, 32, 1), np.uint8).repeat(3, axis=2)
    (tmp_path / "grey.png").write_bytes(write_png(grey).tobytes())

    found = inspect(str(tmp_path / "grey.png"))

    assert found.facts["as normals, map-height"] == "100% of the texels are grey: it is a height map"
    assert found.verdict == "sound"  # nobody said that it is to be a normal map
