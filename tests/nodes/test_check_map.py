"""Judging normal maps: a sound one spoilt in one way has that finding and no other."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from tangentry.nodes.check_map import check_map
from tangentry.nodes.encode import encode
from tangentry.nodes.model import Map, Sheet
from tangentry.pipeline.errors import InputError


def vectors(size: int = 128) -> np.ndarray:
    """(size, size, 3) unit normals of gentle bumps with flat ground between."""
    x, y = np.meshgrid(np.arange(size) / 5, np.arange(size)[::-1] / 7)
    lift = np.maximum(0, np.sin(x) * np.sin(y) - 0.3)
    p = np.where(lift > 0, np.cos(x) * np.sin(y), 0)
    q = np.where(lift > 0, np.sin(x) * np.cos(y), 0)
    normals = np.stack([-p, -q, np.ones_like(p)], axis=2)
    return (normals / np.linalg.norm(normals, axis=2, keepdims=True)).astype(np.float32)


def codes(values: np.ndarray) -> np.ndarray:
    return np.rint((np.clip(values, -1, 1) + 1) * 127.5).astype(np.uint8)


def sheet(texels, **how) -> Sheet:
    return Sheet("", texels, "normal", **{"space": "tangent", "green": "up", "name": "bumps"} | how)


def found(one: Sheet, **how) -> dict[str, str]:
    return {item.id: item.standing for item in check_map(Map((one,)), **how).items}


def in_blocks(values: np.ndarray) -> np.ndarray:
    """Every block of 8 x 8 shifted by an error of its own, as coarse quantisation does."""
    shift = np.random.default_rng(0).normal(0, 0.08, (16, 16, 3)).repeat(8, 0).repeat(8, 1)
    return values + shift * [1, 1, 0.2]


def around() -> np.ndarray:
    """Directions all over the sphere, as an unwrapped mesh's own normals are."""
    a, b = np.meshgrid(np.linspace(0, 2 * np.pi, 128), np.linspace(0.2, np.pi - 0.2, 128))
    return np.stack([np.cos(a) * np.sin(b), np.cos(b), np.sin(a) * np.sin(b)], axis=2)


def backward() -> np.ndarray:
    values = vectors().copy()
    values[3:6, 3:6] = [0.6, 0, -0.8]
    return values


def steep() -> np.ndarray:
    """Unit normals that lean everywhere, and everywhere else."""
    x, y = np.meshgrid(np.arange(128) / 7, np.arange(128)[::-1] / 9)
    normals = np.stack([np.cos(x) * np.sin(y) / 7 * 9, np.sin(x) * np.cos(y), 0.7 * np.ones_like(x)], axis=2)
    return normals / np.linalg.norm(normals, axis=2, keepdims=True)


LINEAR = (codes(vectors()) / 255.0).astype(float)
SRGB = np.where(LINEAR <= 0.0031308, 12.92 * LINEAR, 1.055 * LINEAR ** (1 / 2.4) - 0.055)
GREY = np.repeat(codes(vectors())[..., :1], 3, axis=2)
SPOILT = {
    "map-height": sheet(GREY),
    "map-two-channel": sheet(np.concatenate([codes(vectors())[..., :2], np.zeros((128, 128, 1), np.uint8)], axis=2)),
    "map-object-space": sheet(codes(around())),
    "map-negative-z": sheet(codes(backward())),
    "map-unnormalised": sheet(codes(vectors() * 0.8)),
    "map-srgb": sheet(np.rint(SRGB * 255).astype(np.uint8)),
    "map-tagged-srgb": sheet(codes(vectors()), tagged="sRGB"),
    "map-lossy": sheet(codes(vectors()), tagged="lossy"),
    "map-blocky": sheet(codes(in_blocks(vectors()))),
    "map-flat-offset": sheet(np.floor((vectors() + 1) * 127.5).astype(np.uint8)),
    "map-green-contradicted": sheet(codes(vectors()), green="down"),
    "map-green-undecided": sheet(codes(vectors()), green="undecided"),
}


def test_an_srgb_mistake_is_told_on_maps_without_flat_ground_too():
    linear = codes(steep()) / 255
    spoilt = np.rint(np.where(linear <= 0.0031308, 12.92 * linear, 1.055 * linear ** (1 / 2.4) - 0.055) * 255)

    assert set(found(sheet(codes(steep())))) == set()
    assert set(found(sheet(spoilt.astype(np.uint8)))) == {"map-srgb"}


@pytest.mark.parametrize("blue", [0, 128, 255])
def test_two_channels_are_told_whatever_blue_is_filled_with(blue):
    texels = codes(steep())
    texels[..., 2] = blue

    assert set(found(sheet(texels))) == {"map-two-channel"}


def test_a_flat_map_is_not_taken_for_two_channels():
    assert found(sheet(np.full((64, 64, 3), (128, 128, 255), np.uint8))) == {}


def test_a_sound_map_has_no_findings():
    assert found(sheet(codes(vectors()))) == {}
    assert found(sheet(vectors(), encoding="float")) == {}


@pytest.mark.parametrize("id", SPOILT)
def test_a_map_spoilt_in_one_way_has_that_finding_and_no_other(id):
    assert set(found(SPOILT[id])) == {id}


def test_what_was_lost_is_told():
    before = Map((sheet(vectors(), encoding="float"),))
    coded = encode(before, bits=8)

    (item,) = check_map(coded, before).items

    assert (item.id, item.severity) == ("map-error", "note") and 0.05 < item.measured[0] < 0.39


def test_what_was_lost_beyond_the_limit_is_a_warning():
    before = Map((sheet(vectors(), encoding="float"),))

    (item,) = check_map(encode(before), before, lost=0.01).items

    assert item.severity == "warning" and item.count > 1000


@pytest.mark.parametrize(("holds", "channels"), [("normal", 3), ("height", 1)])
def test_a_size_other_than_that_of_what_it_was_made_from_is_told(holds, channels):
    before = Map((Sheet("", np.zeros((64, 128, channels), np.float32), holds, encoding="float"),))

    (item,) = check_map(Map((sheet(codes(vectors())),)), before).items

    assert item.id == "map-size" and "128 x 128 texels, what it was made from 128 x 64" in item.what


def test_heights_of_the_same_size_are_no_normals_to_compare_with():
    before = Map((Sheet("", np.zeros((128, 128, 1), np.float32), "height", encoding="float"),))

    assert check_map(Map((sheet(codes(vectors())),)), before).items == ()


def test_severities_are_the_projects_and_findings_can_be_accepted():
    spoilt = SPOILT["map-lossy"]

    assert found(spoilt, severity={"map-lossy": "fault"}) == {"map-lossy": "fault"}
    assert found(spoilt, severity={"map-lossy": "off"}) == {}
    assert found(spoilt, accept={"map-lossy": "the source is gone"}) == {"map-lossy": "note"}


def test_an_unknown_id_is_refused_with_the_nearest():
    with pytest.raises(InputError, match="map-lossy"):
        check_map(Map((sheet(codes(vectors())),)), accept={"map-losy": "?"})


@pytest.mark.parametrize("holds", ["height", "colour", "data"])
def test_what_is_no_normal_map_is_not_judged(holds):
    assert check_map(Map((replace(SPOILT["map-height"], holds=holds),))).items == ()


@pytest.mark.parametrize("shape", [(1, 1, 3), (1, 40, 3), (3, 2, 3)])
def test_small_maps_are_judged_without_trouble(shape):
    assert check_map(Map((sheet(np.full(shape, (128, 128, 255), np.uint8)),))).items == ()


def test_of_a_large_map_bands_are_looked_at(monkeypatch):
    """A quarter of the map; what is wrong everywhere is found, what is sound stays so."""
    monkeypatch.setattr("tangentry.nodes.maps.judging.MOST", 256 * 256 // 4)
    tiled = {id: replace(one, texels=np.tile(one.texels, (2, 2, 1))) for id, one in SPOILT.items()}

    assert found(sheet(np.tile(codes(vectors()), (2, 2, 1)))) == {}
    assert all(set(found(one)) == {id} for id, one in tiled.items() if id != "map-negative-z")
