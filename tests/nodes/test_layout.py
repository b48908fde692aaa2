"""UV layouts as pictures, with findings marked on them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from shapes import asset, box_part, grid_part
from tangentry.nodes.check import check
from tangentry.nodes.checks.drawing import SEVERITY
from tangentry.nodes.formats.images import read_image
from tangentry.nodes.layout import layout
from tangentry.nodes.model import Asset, Material, Part, Stream
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, Finding, Findings

UNIT, GAP = 12, 24  # of a picture whose tile is 256 pixels wide


def picture(one: Asset, findings: Findings | None = None, **settings: object) -> Array:
    (file,) = layout(one, findings, file="layout.png", size=256, **settings).files
    return read_image(file.content, file.name)


def tile(picture: Array) -> Array:
    """The tile itself: below the title and the material's name."""
    top = 6 * UNIT
    return picture[top : top + 256, GAP : GAP + 256]


def at(picture: Array, u: float, v: float) -> Array:
    return tile(picture)[int((1 - v) * 256), int(u * 256)].astype(int)


def found(id: str, severity: str, element: str, *elements: int, accepted: str = "") -> Findings:
    one = Finding(
        id,
        severity,
        len(elements),
        "what",
        "",
        "box",
        "",
        element,
        np.array(elements, np.int32),
        np.zeros(0),
        None,
        accepted,
    )
    return Findings("shape", (one,), {})


def near(colour: Array, severity: str) -> bool:
    return bool(np.abs(colour - SEVERITY[severity]).max() < 40)


BOX = asset(box_part())  # face 0 has its chart at the lower left, around (1/6, 1/4)


def test_charts_are_tinted_and_free_texels_are_not():
    drawn = picture(BOX)

    assert at(drawn, 1 / 6, 1 / 4).min() < 235
    assert at(drawn, 0.01, 0.02).min() > 240


@pytest.mark.parametrize("severity", ["fault", "warning"])
def test_a_guilty_face_has_the_colour_of_its_severity(severity):
    drawn = picture(BOX, found("uv-skewed", severity, "face", 0))

    assert near(at(drawn, 1 / 6, 1 / 4), severity)
    assert not near(at(drawn, 1 / 2, 1 / 4), severity)


def test_the_worst_finding_is_on_top():
    both = Findings(
        "shape", (*found("uv-skewed", "fault", "face", 0).items, *found("uv-mirrored", "note", "face", 0).items), {}
    )

    assert near(at(picture(BOX, both), 1 / 6, 1 / 4), "fault")


def test_an_accepted_fault_is_marked_as_a_note():
    drawn = picture(BOX, found("uv-skewed", "fault", "face", 0, accepted="on purpose"))

    assert not near(at(drawn, 1 / 6, 1 / 4), "fault")


def test_v_points_up_whatever_the_file_says():
    part = box_part()
    turned = np.stack([part.uvs[0].values[:, 0], 1 - part.uvs[0].values[:, 1]], axis=1)
    down = replace(asset(replace(part, uvs=(Stream(turned.astype(np.float32), part.uvs[0].index),))), v_down=True)

    assert np.abs(tile(picture(down)).astype(int) - tile(picture(BOX))).mean() < 0.5


def test_only_the_ids_asked_for_are_marked():
    guilty = found("uv-skewed", "fault", "face", 0)

    assert not near(at(picture(BOX, guilty, ids=("uv-mirrored",)), 1 / 6, 1 / 4), "fault")
    assert near(at(picture(BOX, guilty, ids=("uv-skewed",)), 1 / 6, 1 / 4), "fault")


def test_a_guilty_edge_is_a_line_along_it():
    drawn = picture(BOX, found("edge-t-junction", "warning", "corner", 0))

    assert near(tile(drawn)[int((1 - 0.05) * 256), int(256 / 6)].astype(int), "warning")


def test_a_face_too_small_to_see_gets_a_ring():
    part = box_part()
    uv = part.uvs[0].values[part.uvs[0].index].copy()
    uv[:4] = (0.5, 0.02) + (uv[:4] - uv[:4].mean(axis=0)) * 0.01
    small = asset(replace(part, uvs=(Stream(uv.astype(np.float32), np.arange(24, dtype=np.int32)),)))
    marked, plain = picture(small, found("uv-density", "warning", "face", 0)), picture(small)

    assert (np.abs(tile(marked).astype(int) - tile(plain)).max(axis=2) > 20).sum() > 50


def parts_of_two_materials() -> Asset:
    one, two = replace(grid_part(), material=0, name="top"), replace(box_part(), material=1, name="base")
    return replace(asset(one, two), materials=(Material("slate/roof"), Material("plaster")))


def test_a_star_stands_for_the_name_of_each_material():
    files = layout(parts_of_two_materials(), file="*_layout.png", size=128).files

    assert [file.name for file in files] == ["slate_roof_layout.png", "plaster_layout.png"]


def test_without_a_star_all_materials_share_a_picture():
    one, both = picture(BOX), picture(parts_of_two_materials())

    assert both.shape[1] > 1.5 * one.shape[1]


def test_a_picture_is_the_same_every_time():
    findings = check(BOX)

    assert (picture(BOX, findings) == picture(BOX, findings)).all()


def without_uvs() -> Part:
    return replace(box_part(), uvs=())


@pytest.mark.parametrize(
    ("one", "settings", "message"),
    [
        (BOX, {"file": "layout.jpg"}, "only PNG"),
        (BOX, {"file": "layout.png", "size": 50}, "128 to 4096"),
        (BOX, {"file": "layout.png", "ids": ("uv-skewd",)}, 'Did you mean "uv-skewed"'),
        (asset(without_uvs()), {"file": "layout.png"}, "no part has UVs"),
    ],
)
def test_what_cannot_be_drawn_is_refused(one, settings, message):
    with pytest.raises(InputError, match=message):
        layout(one, **settings)


def test_uvs_that_are_not_finite_or_far_away_are_left_out():
    part = grid_part()
    uv = part.uvs[0].values.copy()
    uv[0], uv[7] = np.nan, 1e30
    findings = check(asset(replace(part, uvs=(Stream(uv, part.uvs[0].index),))))

    assert picture(asset(replace(part, uvs=(Stream(uv, part.uvs[0].index),))), findings).shape[2] == 3
