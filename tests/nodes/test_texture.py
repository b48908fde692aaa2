"""Images as maps: stated or measured, from a file or from materials."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from shapes import asset, grid_part
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.model import Asset, Image, MapUse, Material
from tangentry.nodes.texture import texture
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import InputFile


def rippled(green: int = 1, size: int = 96) -> np.ndarray:
    """(size, size, 3) uint8: normals of a height field, green up for 1, down for -1."""
    x, y = np.meshgrid(np.arange(size) / 6, np.arange(size)[::-1] / 9)
    normals = np.stack([-np.cos(x + y), -np.cos(x + y) * 6 / 9 * green, np.ones_like(x)], axis=2)
    normals /= np.linalg.norm(normals, axis=2, keepdims=True)
    return np.rint((normals + 1) * 127.5).astype(np.uint8)


@pytest.fixture
def file(tmp_path):
    def save(texels, name="bumps.png"):
        (tmp_path / name).write_bytes(write_png(texels).tobytes())
        return str(tmp_path / name)

    return save


def bumpy(content=None) -> Asset:
    image = Image("bumps.png", "image/png", write_png(rippled()) if content is None else content)
    materials = (Material("bare"), Material("stone", (MapUse("normal", 0),)), Material("moss", (MapUse("normal", 0),)))
    return replace(asset(grid_part()), materials=materials, images=(image,))


def test_a_file_serves_all_materials(file):
    (sheet,) = texture(file=file(rippled())).sheets

    assert (sheet.material, sheet.holds, sheet.space, sheet.green) == ("", "normal", "tangent", "up")
    assert (sheet.texels == rippled()).all()


def test_an_asset_gives_a_sheet_for_each_material_that_names_a_map():
    sheets = texture(bumpy()).sheets

    assert [sheet.material for sheet in sheets] == ["stone", "moss"]
    assert sheets[0].texels is sheets[1].texels


@pytest.mark.parametrize(("green", "verdict"), [(1, "up"), (-1, "down")])
def test_green_is_measured_where_that_is_wanted(file, green, verdict):
    assert texture(file=file(rippled(green)), green="measure").sheets[0].green == verdict


def test_a_flat_map_says_nothing_of_its_green(file):
    flat = np.full((64, 64, 3), (128, 128, 255), np.uint8)

    assert texture(file=file(flat), green="measure").sheets[0].green == "undecided"


def test_heights_keep_their_bits(file):
    heights = np.arange(64, dtype=np.uint16).reshape(8, 8, 1) * 1000

    (sheet,) = texture(file=file(heights), holds="height").sheets

    assert (sheet.holds, sheet.space, sheet.green) == ("height", "", "") and (sheet.texels == heights).all()


@pytest.mark.parametrize("if_missing", ["fail", "skip"])
def test_what_is_missing_fails_or_is_left_out(tmp_path, if_missing):
    file = InputFile(tmp_path / "gone.png")
    if if_missing == "skip":
        assert texture(file=file, if_missing="skip") is None
        assert file.seen() == [(tmp_path / "gone.png", None)]  # so that it is noticed when it appears
    else:
        with pytest.raises(InputError, match=r"gone\.png: there is no such file"):
            texture(file=file)


def test_an_asset_without_such_a_map_fails_or_is_left_out():
    assert texture(bumpy(), holds="height", if_missing="skip") is None
    with pytest.raises(InputError, match="no material names a height map"):
        texture(bumpy(), holds="height")


def test_an_image_that_was_not_found_is_named():
    with pytest.raises(InputError, match=r'material "stone": its image bumps\.png is not there'):
        texture(bumpy(np.zeros(0, np.uint8)))


def test_grey_cannot_hold_normals(file):
    with pytest.raises(InputError, match="1 channels can't hold normals; is it a height map"):
        texture(file=file(rippled()[..., :1]))


@pytest.mark.parametrize("given", [{}, {"asset": bumpy(), "file": "a.png"}])
def test_it_takes_a_file_or_an_asset(given):
    with pytest.raises(InputError, match="a file or an asset"):
        texture(**given)
