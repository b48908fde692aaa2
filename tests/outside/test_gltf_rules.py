"""Exported glTF by the rules of the standard (glTF 2.0 specification, ISO/IEC 12113:2022) and by its validator."""

from __future__ import annotations

from collections import Counter

import numpy as np
import pytest
from gltf_files import KINDS, meaning
from numpy.testing import assert_allclose
from shapes import asset, box_part, half_mirrored, sphere_part, torus_part
from tangentry.nodes.export import export
from tangentry.nodes.frames import frames
from tangentry.nodes.load import load
from tangentry.nodes.model import Map, Sheet
from tangentry.nodes.split import split
from tangentry.pipeline.errors import InputError

ERROR, WARNING = 0, 1  # severities of the validator
SHAPES = {
    "box": box_part,
    "torus": lambda: torus_part(12, 8),
    "mirrored": lambda: half_mirrored(torus_part(12, 8), 12, 8),
    "poles": lambda: sphere_part(12, 6),
}
FORMS = {
    "float": (5126, 2e-7),
    "short": (5122, 1 / 32767),
    "byte": (5120, 1 / 127),
}  # code, a step


def placed(files, folder):
    folder.mkdir(exist_ok=True)
    for file in files:
        (folder / file.name).write_bytes(file.content.tobytes())
    return folder / files[0].name


def values(document, number):
    entry = document["accessors"][number]
    found = np.frombuffer(entry["values"], KINDS[entry["componentType"]]).reshape(entry["count"], -1)
    return found / (np.iinfo(found.dtype).max if entry.get("normalized") else 1)


@pytest.mark.parametrize("vectors", FORMS)
@pytest.mark.parametrize("shape", SHAPES)
def test_tangents_are_as_the_specification_has_them(tmp_path, shape, vectors):
    """3.7.2.1: TANGENT is VEC4 of floats, xyz of unit length, w +1 or -1; KHR_mesh_quantization: normalised bytes and
    shorts too. That the three w of a triangle agree, and that tangents are across the normal: from memory."""
    code, step = FORMS[vectors]
    solved = frames(split(asset(SHAPES[shape]())), where="all")
    document = meaning(placed(export(solved, file="a.glb", vectors=vectors).files, tmp_path / "out"))

    (part,) = document["meshes"][0]["primitives"]
    entry, tangent = (
        document["accessors"][part["attributes"]["TANGENT"]],
        values(document, part["attributes"]["TANGENT"]),
    )
    normal, index = values(document, part["attributes"]["NORMAL"]), values(document, part["indices"]).astype(int)
    assert (entry["type"], entry["componentType"]) == ("VEC4", code)
    assert_allclose(np.linalg.norm(tangent[:, :3], axis=1), 1, atol=step)
    assert set(np.unique(tangent[:, 3])) <= {-1, 1}
    assert (np.ptp(tangent[index.reshape(-1, 3), 3], axis=1) == 0).all()
    assert_allclose((normal * tangent[:, :3]).sum(axis=1), 0, atol=2 * step)


@pytest.mark.parametrize("shape", SHAPES)
def test_the_bitangent_goes_up_the_image(tmp_path, shape):
    """3.7.2.1: bitangent = cross(normal, tangent.xyz) * w; 3.9.3: green is +Y, up the image, so against the file's v.
    Held against each triangle's own slope of v, where it has one."""
    solved = frames(split(asset(SHAPES[shape]())), where="all")
    document = meaning(placed(export(solved, file="a.glb").files, tmp_path / "out"))
    attributes = document["meshes"][0]["primitives"][0]["attributes"]
    index = values(document, document["meshes"][0]["primitives"][0]["indices"]).astype(int).reshape(-1, 3)
    points, normal, tangent, uv = (
        values(document, attributes[name])[index].astype(float)
        for name in ("POSITION", "NORMAL", "TANGENT", "TEXCOORD_0")
    )
    bitangent = np.cross(normal, tangent[..., :3]) * tangent[..., 3:]
    edge, grown = points[:, 1:] - points[:, :1], uv[:, 1:] - uv[:, :1]
    area = grown[:, 0, 0] * grown[:, 1, 1] - grown[:, 1, 0] * grown[:, 0, 1]
    has = abs(area) > 1e-9
    slope = (grown[has, 0, :1] * edge[has, 1] - grown[has, 1, :1] * edge[has, 0]) / area[has, None]  # dP/dv, v down

    assert has.sum() > 5
    assert ((bitangent[has] * slope[:, None]).sum(axis=2) < 0).all()


def troubles(report, most=WARNING):
    """How many of each error and warning a report has."""
    return Counter(one["code"] for one in report["issues"]["messages"] if one["severity"] <= most)


@pytest.mark.parametrize("vectors", FORMS)
@pytest.mark.parametrize("suffix", [".glb", ".gltf"])
def test_the_validator_has_nothing_to_say_of_what_is_made(tmp_path, validate, suffix, vectors):
    """npm gltf-validator (Khronos)."""
    flat = Map((Sheet("", np.full((4, 4, 3), (128, 128, 255), np.uint8), "normal", "tangent", "up"),))
    made = [
        placed(
            export(frames(split(asset(make())), where="all"), flat, file=f"{name}{suffix}", vectors=vectors).files,
            tmp_path / "out",
        )
        for name, make in SHAPES.items()
    ]
    reports = validate(*made)

    assert len(reports) == len(SHAPES)
    assert [troubles(report) for report in reports.values()] == [Counter()] * len(SHAPES)


def readable(samples):
    """Samples that can be read, with their assets."""
    for path in sorted([*samples.rglob("*.glb"), *samples.rglob("*.gltf")]):
        try:
            yield path, load(str(path))
        except InputError:
            continue  # refusals are the business of other tests


def test_the_validator_says_of_exported_samples_what_it_said_before_or_less(samples, tmp_path, validate):
    """npm gltf-validator (Khronos), for samples as they came and with frames solved where maps need them."""
    brought, plain, solved = [], [], []
    for number, (path, before) in enumerate(readable(samples)):
        brought.append(path)
        plain.append(placed(export(before, file="a.glb").files, tmp_path / f"plain{number}"))
        if all(part.uvs for part in before.parts):
            after = frames(split(before), stored="replace")
            solved.append((path, placed(export(after, file="a.gltf").files, tmp_path / f"solved{number}")))
    reports = validate(*brought, *plain, *(path for _, path in solved))

    assert len(solved) > 5
    for path, made in [*zip(brought, plain, strict=True), *solved]:
        before, after = reports[str(path)], reports[str(made)]
        assert troubles(after, ERROR) <= troubles(before, ERROR), path
        assert set(troubles(after)) <= set(troubles(before)), path
