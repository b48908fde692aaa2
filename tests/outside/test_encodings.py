"""What encodings cost, as angles: figures that an independent program found in float64 for a million uniform normals of
the hemisphere (PCG64, seed 0), renormalised after decoding. Forms: Cigolle et al., JCGT 2014; else common practice."""

from __future__ import annotations

import numpy as np
import pytest
from tangentry.nodes.formats.images import read_image
from tangentry.nodes.maps.encodings import decode_texels, encode_normals
from tangentry.nodes.model import Map, Sheet
from tangentry.nodes.write import write


@pytest.fixture(scope="module")
def normals():
    chance = np.random.Generator(np.random.PCG64(0))
    z, turn = chance.random(1_000_000), 2 * np.pi * chance.random(1_000_000)
    r = np.sqrt(1 - z * z)
    return np.stack([r * np.cos(turn), r * np.sin(turn), z], axis=1).astype(np.float32)[None]


def apart(one, other):
    one, other = (x.astype(float) / np.linalg.norm(x.astype(float), axis=-1, keepdims=True) for x in (one, other))
    return np.degrees(2 * np.arctan2(np.linalg.norm(one - other, axis=-1), np.linalg.norm(one + other, axis=-1)))


@pytest.mark.parametrize(
    ("encoding", "bits", "mean", "p99", "largest"),
    [
        ("unorm", 8, 0.16973, 0.31772, 0.38600),
        ("snorm", 8, 0.17006, 0.31862, 0.38417),
        ("xy", 8, 0.46758, 3.43676, 5.81338),
        ("unorm", 16, 0.000660, 0.001235, 0.001499),
        ("octahedral", 8, 0.31471, 0.55529, 0.63518),
        ("octahedral", 16, 0.001219, 0.002150, 0.002454),
        ("hemi-octahedral", 8, 0.23985, 0.47187, 0.54912),
    ],
)
def test_the_error_is_that_of_the_table(normals, encoding, bits, mean, p99, largest):
    error = apart(decode_texels(encode_normals(normals, encoding, bits, "up"), encoding, "up"), normals)

    assert error.mean() == pytest.approx(mean, rel=0.01)
    assert np.percentile(error, 99) == pytest.approx(p99, rel=0.01)
    assert error.max() == pytest.approx(largest, rel=0.02)


@pytest.mark.parametrize(
    ("top", "mean", "p99", "largest"), [(255, 0.33679, 0.75689, 0.95011), (65535, 0.001304, 0.002936, 0.003669)]
)
def test_octahedral_codes_that_others_merely_rounded_are_read(normals, top, mean, p99, largest):
    """Cigolle et al. 2014, the plain form: (x, y) / (|x| + |y| + |z|), for the upper half."""
    places = normals[..., :2].astype(float) / np.abs(normals.astype(float)).sum(axis=-1, keepdims=True)
    codes = np.rint((places + 1) / 2 * top).astype(np.uint8 if top == 255 else np.uint16)

    error = apart(decode_texels(codes, "octahedral", "up"), normals)

    assert error.mean() == pytest.approx(mean, rel=0.01)
    assert np.percentile(error, 99) == pytest.approx(p99, rel=0.01)
    assert error.max() == pytest.approx(largest, rel=0.02)


def test_rounding_beats_truncating_and_the_offsets_must_agree(normals):
    """Codes that others truncated; and codes of 127.5 decoded as if of 127 about 128."""
    truncated = np.floor((normals.astype(float) + 1) * 127.5).astype(np.uint8)
    mistaken = decode_texels(encode_normals(normals, "unorm", 8, "up"), "snorm", "up")

    for found, figures in (
        (decode_texels(truncated, "unorm", "up"), (0.33980, 0.63562, 0.76605)),
        (mistaken, (0.33943, 0.63537, 0.76793)),
    ):
        error = apart(found, normals)
        assert (error.mean(), np.percentile(error, 99), error.max()) == pytest.approx(figures, rel=0.01)


def test_halves_in_exr_cost_what_the_table_says(normals):
    """float16 x, y, z."""
    pytest.importorskip("OpenEXR", reason="the extra `exr` is not installed")
    sheet = Sheet("", normals.reshape(1000, 1000, 3), "normal", "tangent", "up", "float")
    (file,) = write(Map((sheet,)), file="a.exr", half=True).files

    error = apart(decode_texels(read_image(file.content, "a.exr"), "float", "up"), sheet.texels)

    assert (error.mean(), np.percentile(error, 99), error.max()) == pytest.approx((0.00606, 0.01730, 0.02314), rel=0.01)


def test_no_error_of_8_bits_exceeds_its_bound(normals):
    """Half a step in each of three components: sqrt(3) / 255 radians."""
    error = apart(decode_texels(encode_normals(normals, "unorm", 8, "up"), "unorm", "up"), normals)

    assert error.max() < np.degrees(np.sqrt(3) / 255)


def test_the_flat_colour_tilts_in_8_bits():
    """(128, 128, 255) decodes under 2 c / 255 - 1 to (1/255, 1/255, 1), 0.317755 degrees from flat; offset by 128
    it is exactly flat."""
    flat = np.array([[[128, 128, 255]]], np.uint8)
    ahead = np.array([[[0, 0, 1.0]]])

    assert apart(decode_texels(flat, "unorm", "up"), ahead)[0, 0] == pytest.approx(0.317755, abs=1e-5)
    assert apart(decode_texels(flat, "snorm", "up"), ahead)[0, 0] < 1e-6


@pytest.mark.parametrize(
    ("code", "direction"), [((255, 128, 128), (1, 0, 0)), ((128, 255, 128), (0, 1, 0)), ((128, 128, 255), (0, 0, 1))]
)
def test_red_leans_right_green_up_and_blue_out(code, direction):
    """Common practice, no source."""
    decoded = decode_texels(np.array([[code]], np.uint8), "unorm", "up")[0, 0]

    assert np.allclose(decoded, direction, atol=0.006)
