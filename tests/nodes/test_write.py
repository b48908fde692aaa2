"""Image files: what is written is what is read again."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from tangentry.nodes.formats.images import read_image
from tangentry.nodes.model import Map, Sheet
from tangentry.nodes.write import write
from tangentry.pipeline.errors import InputError


def texels(kind, channels: int, shape=(5, 7)) -> np.ndarray:
    chance = np.random.default_rng(channels)
    if np.dtype(kind).kind == "f":
        return chance.random((*shape, channels)).astype(kind)
    return chance.integers(0, np.iinfo(kind).max, (*shape, channels), endpoint=True).astype(kind)


def written(sheet: Sheet, name: str, **how) -> np.ndarray:
    (file,) = write(Map((sheet,)), file=name, **how).files
    assert file.name == name
    return read_image(file.content, name)


@pytest.mark.parametrize("channels", [1, 2, 3, 4])
@pytest.mark.parametrize(
    ("suffix", "kind"),
    [("png", np.uint8), ("png", np.uint16), ("tif", np.uint8), ("tiff", np.uint16), ("tif", np.float32)],
)
def test_codes_come_back_as_they_are(suffix, kind, channels):
    sheet = Sheet("", texels(kind, channels), "data")

    assert (written(sheet, f"a.{suffix}") == sheet.texels).all()


@pytest.mark.parametrize(("half", "lost"), [(False, 0), (True, 2**-11)])
@pytest.mark.parametrize("channels", [1, 3, 4])
def test_floats_come_back_from_exr(channels, half, lost):
    pytest.importorskip("OpenEXR", reason="the extra `exr` is not installed")
    sheet = Sheet("", texels(np.float32, channels) * 3 - 1, "height")

    assert_allclose(written(sheet, "a.exr", half=half), sheet.texels, atol=2 * lost)


def test_float_normals_become_codes_in_png():
    flat = Sheet("", np.broadcast_to(np.float32([0, 0, 1]), (2, 2, 3)), "normal", "tangent", "up", "float")

    assert (written(flat, "a.png") == [128, 128, 255]).all()


def test_float_heights_become_16_bits_in_png():
    assert written(Sheet("", np.full((1, 1, 1), 0.5, np.float32), "height"), "a.png").tolist() == [[[32768]]]


@pytest.mark.parametrize("suffix", ["png", "tif"])
def test_directions_in_two_channels_get_an_empty_third(suffix):
    """Two channels alone would be read as grey and alpha."""
    sheet = Sheet("", texels(np.uint8, 2), "normal", "tangent", "up", "xy")
    back = written(sheet, f"a.{suffix}")

    assert (back[..., :2] == sheet.texels).all() and (back[..., 2] == 0).all()


def test_each_material_gets_a_file_of_its_name():
    map = Map(tuple(Sheet(name, texels(np.uint8, 3), "colour") for name in ("cast iron", "oak", "")))

    assert [file.name for file in write(map, file="bench_*.png").files] == [
        "bench_cast_iron.png", "bench_oak.png", "bench_all.png"
    ]  # fmt: skip


@pytest.mark.parametrize("name", ["bench.png", "bench_*.png"])
def test_two_sheets_never_share_a_file(name):
    map = Map(tuple(Sheet(one, texels(np.uint8, 3), "colour") for one in ("cast iron", "Cast_Iron")))

    with pytest.raises(InputError, match="2 sheets for one file"):
        write(map, file=name)


def test_other_formats_are_refused():
    with pytest.raises(InputError, match=r"write one of \.png, \.tif"):
        write(Map((Sheet("", texels(np.uint8, 3), "colour"),)), file="a.jpg")
