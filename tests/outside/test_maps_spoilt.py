"""Maps made by others, sound ones and the same spoilt in one way: each is told for what it is."""

from __future__ import annotations

import io

import numpy as np
import pytest
from PIL import Image
from tangentry.nodes.check_map import check_map
from tangentry.nodes.formats.images import read_image
from tangentry.nodes.model import Map, Sheet

SOUND = {"cube_normal.png": "up", "handleGem_normal.png": "up", "normal.png": "up", "lambert2_normal.png": "down"}
GENTLE = {**SOUND, "ScratchedGold-Normal.png": "down", "FlightHelmet_Materials_MetalPartsMat_Normal.png": "up"}


def texels(samples, name: str) -> np.ndarray:
    """(height, width, 3) uint8."""
    found = read_image(np.fromfile(next(samples.rglob(name)), np.uint8), name)[..., :3]
    return (found >> 8).astype(np.uint8) if found.dtype == np.uint16 else found


def ids(values: np.ndarray, name: str) -> set[str]:
    sheet = Sheet("", np.ascontiguousarray(values), "normal", "tangent", GENTLE[name], name=name)
    return {item.id for item in check_map(Map((sheet,))).items}


def to_srgb(codes: np.ndarray) -> np.ndarray:
    """IEC 61966-2-1."""
    x = codes / 255
    return np.rint(np.where(x <= 0.0031308, 12.92 * x, 1.055 * x ** (1 / 2.4) - 0.055) * 255).astype(np.uint8)


def from_srgb(codes: np.ndarray) -> np.ndarray:
    """IEC 61966-2-1."""
    x = codes / 255
    return np.rint(np.where(x <= 0.04045, x / 12.92, ((x + 0.055) / 1.055) ** 2.4) * 255).astype(np.uint8)


def without_blue(codes: np.ndarray) -> np.ndarray:
    return codes * np.uint8([1, 1, 0])


def compressed(codes: np.ndarray) -> np.ndarray:
    """Through JPEG of low quality: blocks of 8 x 8 (ITU-T T.81)."""
    out = io.BytesIO()
    Image.fromarray(codes).save(out, "JPEG", quality=20)
    return np.asarray(Image.open(out))


@pytest.mark.parametrize("name", SOUND)
def test_sound_maps_have_no_findings(samples, name):
    assert ids(texels(samples, name), name) == set()


@pytest.mark.parametrize("name", GENTLE)
@pytest.mark.parametrize(
    ("spoil", "id"),
    [
        (to_srgb, "map-srgb"),
        (from_srgb, "map-srgb"),
        (without_blue, "map-two-channel"),
        (lambda codes: codes[..., :1].repeat(3, axis=2), "map-height"),
    ],
    ids=["sRGB", "from sRGB", "without blue", "grey"],
)
def test_what_is_something_else_is_told_as_that_alone(samples, name, spoil, id):
    assert ids(spoil(texels(samples, name)), name) == {id}


@pytest.mark.parametrize("name", GENTLE)
def test_a_strong_compression_shows_its_blocks(samples, name):
    assert "map-blocky" in ids(compressed(texels(samples, name)), name)


@pytest.mark.parametrize("name", GENTLE)
def test_halved_vectors_are_not_unit(samples, name):
    halved = np.rint((texels(samples, name) - 127.5) / 2 + 127.5).astype(np.uint8)

    assert "map-unnormalised" in ids(halved, name)
