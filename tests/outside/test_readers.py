"""OBJ, PLY and STL beside a general library's readers and writers (trimesh, PyPI): the same triangles either way."""

from __future__ import annotations

import numpy as np
import pytest
import trimesh
from numpy.testing import assert_allclose
from shapes import asset, sphere_part, torus_part, triangulated
from tangentry.nodes.export import export
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.load import load


def ours(asset):
    """(triangles, 3, 3) points, part by part."""
    found = [part.points.values[part.points.index[triangulate(part)[0]]] for part in asset.parts]
    return np.concatenate(found).astype(np.float64)


def theirs(path):
    """(triangles, 3, 3) points, in the file's order."""
    return np.asarray(trimesh.load(path, process=False, force="mesh").triangles)


@pytest.mark.parametrize(
    ("suffix", "more"),
    [
        (".ply", {"encoding": "binary"}),
        (".ply", {"encoding": "ascii"}),
        (".stl", {}),
        (".stl", {"file_type": "stl_ascii"}),
        (".obj", {}),
    ],
)
def test_what_it_writes_is_read(tmp_path, suffix, more):
    mesh = trimesh.creation.icosphere(2).apply_translation([0.1, -20.7, 3e-5])
    mesh.export(tmp_path / f"ball{suffix}", **more)

    assert_allclose(ours(load(str(tmp_path / f"ball{suffix}"))), mesh.triangles, atol=1e-5)


@pytest.mark.parametrize("suffix", [".ply", ".obj"])
def test_what_is_written_it_reads(tmp_path, suffix):
    before = asset(triangulated(torus_part(8, 6)), triangulated(sphere_part(8, 6)))
    for file in export(before, file=f"pier{suffix}").files:
        (tmp_path / file.name).write_bytes(file.content.tobytes())

    wanted = ours(before)
    order = np.lexsort(wanted.reshape(len(wanted), -1).T)  # it may put objects in an order of its own
    found = theirs(tmp_path / f"pier{suffix}")
    assert_allclose(found[np.lexsort(found.reshape(len(found), -1).T)], wanted[order], atol=1e-6)


@pytest.mark.parametrize(
    "name", ["fuze.ply", "fuze.obj", "suzanne.ply", "BoxTextured.ply", "singlevn.obj", "spot_triangulated.obj"]
)
def test_real_files_hold_the_same_points_to_both(samples, name):
    path = next(samples.rglob(name))
    points = [part.points.values for part in load(str(path)).parts]
    found = np.asarray(trimesh.load(path, process=False, force="mesh").vertices)

    assert_allclose(
        np.unique(np.concatenate(points).astype(np.float32), axis=0),
        np.unique(found.astype(np.float32), axis=0),
        atol=1e-6,
    )
