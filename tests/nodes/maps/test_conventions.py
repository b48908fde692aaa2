"""Green told from the texels alone."""

from __future__ import annotations

import numpy as np
import pytest
from tangentry.nodes.maps import conventions
from tangentry.nodes.maps.conventions import measure_green
from tangentry.nodes.maps.encodings import encode_normals

CHANCE = np.random.default_rng(3)


def unit(p: np.ndarray, q: np.ndarray) -> np.ndarray:
    """(height, width, 3) float32: normals of slopes p to the right and q up the image."""
    normals = np.stack([-p, -q, np.ones_like(p)], axis=2)
    return (normals / np.linalg.norm(normals, axis=2, keepdims=True)).astype(np.float32)


def hills(size: int = 128) -> np.ndarray:
    """Normals of a sum of waves of all directions: no axis and no diagonal is preferred."""
    phases = np.random.default_rng(5).random(12) * 6
    x, y = np.meshgrid(np.arange(size), np.arange(size)[::-1])
    p, q = np.zeros((2, size, size))
    for turn, phase in zip(np.linspace(0, np.pi, 12, endpoint=False), phases, strict=True):
        along, up = 0.4 * np.cos(turn), 0.4 * np.sin(turn)
        wave = 0.5 * np.cos(along * x + up * y + phase)
        p, q = p + along * wave, q + up * wave
    return unit(p, q)


@pytest.mark.parametrize("green", ["up", "down"])
@pytest.mark.parametrize("bits", [8, 16, None])
def test_a_map_of_heights_tells_its_green_at_any_depth(green, bits):
    texels = encode_normals(hills(), "unorm" if bits else "float", bits or 8, green)

    found = measure_green(texels)

    assert found.verdict == green and abs(found.correlation) > 0.95


@pytest.mark.parametrize("band", [1, 128 * 7, 128 * 126, 128 * 127, 1 << 30])
def test_bands_of_any_height_find_the_same(monkeypatch, band):
    whole = measure_green(hills())
    monkeypatch.setattr(conventions, "BAND", band)

    assert measure_green(hills()).correlation == pytest.approx(whole.correlation, abs=1e-9)


def test_turned_by_a_quarter_with_its_vectors_it_stays():
    """The image and the vectors turn together: (x, y) becomes (-y, x)."""
    turned = np.rot90(hills())[..., [1, 0, 2]] * np.float32([-1, 1, 1])

    assert measure_green(turned).verdict == "up"


def test_an_image_turned_over_without_its_vectors_is_told_as_down():
    assert measure_green(hills()[::-1]).verdict == "down"


def test_noise_over_the_relief_lowers_the_confidence_until_there_is_no_verdict():
    noise = CHANCE.normal(0, 1, (128, 128, 2))
    sure = []
    for share in (0, 0.05, 0.1, 1):
        vectors = hills() + np.concatenate([share * noise, np.zeros((128, 128, 1))], axis=2)
        sure.append(measure_green(vectors.astype(np.float32)))

    assert [one.correlation for one in sure] == sorted((one.correlation for one in sure), reverse=True)
    assert sure[0].verdict == "up" and sure[-1].verdict == "undecided"


@pytest.mark.parametrize(
    "texels",
    [
        np.full((64, 64, 3), (128, 128, 255), np.uint8),
        encode_normals(unit(np.sin(np.arange(64.0))[None].repeat(64, 0), np.zeros((64, 64))), "unorm", 8, "up"),
        CHANCE.integers(0, 256, (128, 128, 3), dtype=np.uint8),
        np.full((1, 1, 3), 128, np.uint8),
        np.full((2, 90, 3), 7, np.uint8),
    ],
    ids=["flat", "ribs along one axis", "noise", "one texel", "two rows"],
)
def test_what_says_nothing_of_its_green_is_undecided(texels):
    assert measure_green(texels).verdict == "undecided"
