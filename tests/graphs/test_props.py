"""Every prop is what its maker says: charts, poles, polygons, materials; and the script makes them all again."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose
from tangentry.nodes.formats.images import read_image
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.load import load
from tangentry.nodes.model import Asset
from tangentry.pipeline.flow import InputFile

TERMINAL = Path(__file__).parents[2] / "graphs" / "ferry_terminal"
MESHES = (".obj", ".ply", ".glb")
PROPS = sorted(path for path in (TERMINAL / "props").iterdir() if path.suffix in MESHES)
ROOMS = ("props", "detail", "sent_back")
LAYERS = {"crate": 2, "life_ring": 4, "oar": 2}  # faces over one texel, half of them mirrored; elsewhere one


def prop(name: str) -> Asset:
    """A prop by its stem."""
    return load(str(next(path for path in PROPS if path.stem == name)))


def texels(path: Path) -> np.ndarray:
    """The texels of an image file."""
    return read_image(InputFile(path).bytes(), path.name)


def uv_triangles(asset: Asset, material: int) -> np.ndarray:
    """(triangles, 3, 2) float64: the charts of one material, without triangles that have no area."""
    parts = [part for part in asset.parts if part.material == material]
    uv = np.concatenate([part.uvs[0].values[part.uvs[0].index[triangulate(part)[0]]] for part in parts]).astype(float)
    return uv[np.abs(doubled_area(uv)) > 1e-12]


def doubled_area(uv: np.ndarray) -> np.ndarray:
    """(triangles,) signed."""
    a, b = uv[:, 1] - uv[:, 0], uv[:, 2] - uv[:, 0]
    return a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]


def most_layers(uv: np.ndarray, size: int = 400) -> int:
    """How many triangles lie strictly over one texel centre at most."""
    layers = np.zeros((size, size), int)
    for corners in uv:
        low = np.clip(np.floor(corners.min(axis=0) * size).astype(int), 0, size)
        high = np.clip(np.ceil(corners.max(axis=0) * size).astype(int), 0, size)
        x, y = np.meshgrid(*((np.arange(low[k], high[k]) + 0.5) / size for k in (0, 1)))
        sides = [
            (b[0] - a[0]) * (y - a[1]) - (b[1] - a[1]) * (x - a[0])
            for a, b in zip(corners, np.roll(corners, -1, axis=0), strict=True)
        ]
        inside = np.all([side > 1e-9 for side in sides], axis=0) | np.all([side < -1e-9 for side in sides], axis=0)
        layers[low[1] : high[1], low[0] : high[0]] += inside
    return int(layers.max())


def directed_edges(asset: Asset) -> np.ndarray:
    """(edges, 6): where each edge of each face starts and ends; faces of fewer than three places left out."""
    edges = []
    for part in asset.parts:
        where = np.round(part.points.values[part.points.index].astype(float), 5)
        for begin, end in zip(part.starts, part.starts[1:], strict=False):
            if len(np.unique(where[begin:end], axis=0)) > 2:
                edges.append(np.concatenate([where[begin:end], np.roll(where[begin:end], -1, axis=0)], axis=1))
    return np.concatenate(edges)


@pytest.mark.parametrize("path", PROPS, ids=lambda path: path.stem)
def test_charts_share_texels_only_where_they_are_mirrored(path):
    asset = load(str(path))
    charts = [uv_triangles(asset, material) for material in sorted({part.material for part in asset.parts})]

    assert {most_layers(uv) for uv in charts} == {LAYERS.get(path.stem, 1)}
    assert all(uv.min() >= 0 and uv.max() <= 1 for uv in charts)


@pytest.mark.parametrize("name", LAYERS)
def test_half_of_a_mirrored_prop_reuses_the_charts_of_the_other(name):
    asset = prop(name)
    area = np.concatenate([doubled_area(uv_triangles(asset, part.material)) for part in asset.parts])

    assert_allclose(area[area > 0].sum(), -area[area < 0].sum(), rtol=1e-4)


@pytest.mark.parametrize("path", PROPS, ids=lambda path: path.stem)
def test_neighbouring_faces_are_wound_alike(path):
    edges = directed_edges(load(str(path)))

    assert len(np.unique(edges, axis=0)) == len(edges)


def test_the_formats_and_textures_are_all_there():
    assert {path.suffix for path in PROPS} == set(MESHES)
    assert all(image.content.size for path in PROPS for image in load(str(path)).images)
    assert all(material.maps for path in PROPS for material in load(str(path)).materials)


def test_the_bollard_has_a_lid_of_sixteen_corners_and_smoothing_groups():
    part = prop("bollard").parts[0]

    assert np.diff(part.starts).max() == 16 and set(part.smoothing) == {0, 1, 2, 3}


def test_the_buoy_has_degenerate_poles():
    part = prop("buoy").parts[0]
    p = part.points.values[part.points.index].reshape(-1, 3, 3).astype(float)
    lost = p[np.linalg.norm(np.cross(p[:, 1] - p[:, 0], p[:, 2] - p[:, 0]), axis=1) == 0]

    assert len(lost) == 64 and set(np.round(lost.reshape(-1, 3)[:, 1], 3)) >= {0.0, 0.7}


def test_several_materials_a_second_uv_set_and_stored_tangents_occur():
    assert len(prop("stair").materials) == 3
    assert {len(part.uvs) for part in prop("lantern").parts} == {2}
    assert {part.frames.method for part in prop("gangway").parts} == {"stored"}


def test_heights_come_in_8_and_16_bits():
    assert texels(TERMINAL / "props" / "crate_height.png").dtype == np.uint8
    assert texels(TERMINAL / "props" / "quay_slab_height.png").dtype == np.uint16


@pytest.mark.parametrize("row", [0, 1], ids=["foot", "horn"])
def test_each_part_of_the_detailed_twin_fits_that_of_its_name(row):
    coarse, fine = prop("cleat").parts[row], load(str(TERMINAL / "detail" / "cleat_detailed.obj")).parts[row]
    ends = [(part.points.values.min(axis=0), part.points.values.max(axis=0)) for part in (coarse, fine)]

    assert coarse.name == fine.name and fine.face_count > 20 * coarse.face_count
    assert_allclose(*ends, atol=0.003)


def test_the_detailed_twin_is_no_member_of_the_library():
    assert "cleat_detailed" not in {path.stem for path in PROPS}


def made_in(folder: Path) -> Path:
    """A folder that the script filled."""
    folder.mkdir()
    subprocess.run([sys.executable, TERMINAL / "make_props.py", folder], check=True)
    return folder


@pytest.fixture(scope="module")
def remade(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The props made again."""
    return made_in(tmp_path_factory.mktemp("remade") / "terminal")


def files(folder: Path) -> dict[str, bytes]:
    """Everything that the script makes, by relative path."""
    return {f"{room}/{path.name}": path.read_bytes() for room in ROOMS for path in (folder / room).iterdir()}


def test_the_script_makes_every_file_that_is_kept_and_the_same_bytes_each_time(remade, tmp_path):
    first, second = files(remade), files(made_in(tmp_path / "terminal"))

    assert first == second and first.keys() == files(TERMINAL).keys()


@pytest.mark.parametrize("path", [*PROPS, TERMINAL / "detail" / "cleat_detailed.obj"], ids=lambda path: path.stem)
def test_what_is_kept_is_what_the_script_makes(path, remade):
    # To a micrometre, not to the byte: sines differ in their last digit from one processor to another.
    kept, made = load(str(path)), load(str(remade / path.relative_to(TERMINAL)))

    assert [part.name for part in kept.parts] == [part.name for part in made.parts]
    for one, other in zip(kept.parts, made.parts, strict=True):
        assert_allclose(one.points.values[one.points.index], other.points.values[other.points.index], atol=1e-6)
        assert_allclose(one.uvs[0].values[one.uvs[0].index], other.uvs[0].values[other.uvs[0].index], atol=1e-6)
