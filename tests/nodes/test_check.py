"""The battery of checks: sound meshes have no findings; each way of breaking one gives its finding and no other."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from shapes import asset, box_part, cylinder_part, grid_part, quads, sphere_part, torus_part, triangulated
from tangentry.nodes.check import check
from tangentry.nodes.checks.ids import IDS
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.frames import frames
from tangentry.nodes.model import Asset, Image, MapUse, Material, Part, Stream
from tangentry.nodes.normals import normals
from tangentry.nodes.split import split
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, Findings


def found(findings: Findings) -> set[str]:
    return {item.id for item in findings.items}


def only(findings: Findings):
    (item,) = findings.items
    return item


def framed(part: Part) -> Part:
    return frames(split(asset(part)), where="all").parts[0]


def stored(part: Part, **changed: Array) -> Part:
    """The part with frames as a file might have brought them, some of their arrays changed."""
    part = framed(part)
    return replace(part, frames=replace(part.frames, method="stored", **changed))


def own_uvs(part: Part) -> Array:
    """A row of UVs for every corner: (corners, 2), to be changed and given back with `with_uvs`."""
    return part.uvs[0].values[part.uvs[0].index].copy()


def with_uvs(part: Part, uv: Array) -> Part:
    return replace(part, uvs=(Stream(np.asarray(uv, np.float32), np.arange(len(uv), dtype=np.int32)),))


def bare(part: Part) -> Part:
    return replace(part, normals=None, uvs=())


def with_faces(part: Part, *faces: list[int]) -> Part:
    """The part without attributes, with further faces of these points."""
    index = np.concatenate([part.points.index, *faces]).astype(np.int32)
    starts = np.concatenate([part.starts, part.starts[-1] + np.cumsum([len(face) for face in faces])]).astype(np.int32)
    return replace(bare(part), points=Stream(part.points.values, index), starts=starts)


def with_normal_map(part: Part) -> Asset:
    material = Material("plaster", (MapUse("normal", 0),))
    image = Image("plaster.png", "image/png", np.zeros(0, np.uint8))
    return replace(asset(replace(part, material=0)), materials=(material,), images=(image,))


# -- ways of breaking a mesh: each takes nothing, and gives a sound asset and the same one broken -------------------


def face_uvs(face: int, change: Callable[[Array], Array], part: Part) -> Part:
    uv = own_uvs(part)
    uv[4 * face : 4 * face + 4] = change(uv[4 * face : 4 * face + 4])
    return with_uvs(part, uv)


def centred(scale: tuple[float, float]) -> Callable[[Array], Array]:
    return lambda uv: (uv - uv.mean(axis=0)) * scale + uv.mean(axis=0)


def all_uvs(change: Callable[[Array], Array], part: Part) -> Part:
    return replace(part, uvs=(Stream(change(part.uvs[0].values).astype(np.float32), part.uvs[0].index),))


def squeezed(uv: Array) -> Array:
    """The first column of the grid a tenth as wide as the others."""
    return np.stack([np.where(uv[:, 0] > 0.2, 0.025 + (uv[:, 0] - 0.25) * 1.3, 0), uv[:, 1]], axis=1)


def one_and_a_bit_turns(uv: Array) -> Array:
    angle, radius = uv[:, 0] * 2 * np.pi * 1.1, 0.2 + 0.2 * (1 - uv[:, 1])
    return 0.5 + np.stack([radius * np.cos(angle), radius * np.sin(angle)], axis=1)


def ribbon() -> Part:
    """A ribbon as long and as wide as those turns, so that nothing is skewed."""
    part = grid_part(40, 1)
    return replace(
        part, points=Stream(part.points.values * np.float32([2 * np.pi * 1.1 * 0.3, 0.2, 0]), part.points.index)
    )


def folded(part: Part) -> Part:
    """The right half of a grid turned up, each half with its own normal."""
    points = part.points.values.copy()
    points[:, 2], points[:, 0] = np.maximum(points[:, 0] - 0.5, 0), np.minimum(points[:, 0], 0.5)
    return normals(asset(replace(part, points=Stream(points, part.points.index), normals=None)), method="face").parts[0]


def with_a_junction() -> Part:
    """One wide face beside two narrow ones, whose common corner lies on its side."""
    points = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [2, 0, 0], [2, 0.5, 0], [1, 0.5, 0], [2, 1, 0]])
    faces = np.array([[0, 1, 2, 3], [1, 4, 5, 6], [6, 5, 7, 2]])
    return bare(quads(points, points[:, :2], np.array([[0, 0, 1]]), faces, faces, np.zeros_like(faces)))


def row_changed(values: Array, row: int, value: object) -> Array:
    values = values.copy()
    values[row] = value
    return values


def turned(part: Part, degrees: float) -> Array:
    """The part's tangents, turned about the normal (0, 0, 1)."""
    angle = np.radians(degrees)
    turn = np.array([[np.cos(angle), -np.sin(angle), 0], [np.sin(angle), np.cos(angle), 0], [0, 0, 1]])
    return (framed(part).frames.tangents @ turn.T).astype(np.float32)


def tilted(part: Part, degrees: float) -> Array:
    tangents = framed(part).frames.tangents * np.cos(np.radians(degrees))
    return (tangents + np.array([0, 0, np.sin(np.radians(degrees))])).astype(np.float32)


def chart_sides(part: Part, faces: slice) -> Array:
    made = framed(part).frames
    sides = made.sides.copy()
    sides[made.index[faces]] *= -1
    return sides


def reflected(part: Part) -> Part:
    """A grid whose upper half has the UVs of the lower, mirrored."""
    return all_uvs(lambda uv: np.stack([uv[:, 0], np.minimum(uv[:, 1], 1 - uv[:, 1])], axis=1), part)


def sharing_across(part: Part) -> Part:
    """One frame for every point, whatever side its faces are seen from."""
    made = framed(part)
    count = len(part.points.values)
    one = np.tile(np.array([1, 0, 0], np.float32), (count, 1))
    shared = replace(
        made.frames,
        tangents=one,
        sides=np.ones(count, np.int8),
        fallback=np.zeros(count, bool),
        index=part.points.index,
        method="angle",
    )
    return replace(made, frames=shared, vertices=None)


GRID, BOX, TORUS = grid_part(), box_part(), torus_part(24, 12)
NAN = np.float32(np.nan)

BREAKS: dict[str, tuple[Asset | Part, Asset | Part, dict[str, object]]] = {
    "uv-missing": (with_normal_map(framed(GRID)), with_normal_map(bare(GRID)), {}),
    "uv-degenerate": (GRID, face_uvs(5, centred((0, 0)), GRID), {}),
    "uv-mirrored": (BOX, face_uvs(2, centred((-1, 1)), BOX), {}),
    "uv-skewed": (GRID, all_uvs(lambda uv: (uv @ [[1, 0], [2, 1]]) / 3, GRID), {}),
    "uv-stretched": (GRID, all_uvs(squeezed, GRID), {}),
    "uv-out-of-tile": (GRID, all_uvs(lambda uv: uv + 0.5, GRID), {}),
    "uv-density": (BOX, face_uvs(3, centred((0.2, 0.2)), BOX), {}),
    "uv-overlapping": (BOX, face_uvs(0, lambda uv: np.add(uv, [0.2, 0]), BOX), {}),
    "uv-overlapping-itself": (ribbon(), all_uvs(one_and_a_bit_turns, ribbon()), {}),
    "uv-gutter": (BOX, face_uvs(0, lambda uv: np.add(uv, [0.064, 0]), BOX), {"map_size": 1024}),
    "value-not-finite": (GRID, replace(GRID, normals=Stream(np.array([[0, 0, NAN]]), GRID.normals.index)), {}),
    "face-zero-area": (bare(GRID), with_faces(GRID, [0, 1, 1, 0]), {}),
    "face-duplicate": (bare(BOX), with_faces(BOX, [5, 7, 3, 1]), {}),
    "edge-non-manifold": (
        bare(
            replace(BOX, points=Stream(np.vstack([BOX.points.values, [2, 2, 2]]).astype(np.float32), BOX.points.index))
        ),
        with_faces(
            replace(BOX, points=Stream(np.vstack([BOX.points.values, [2, 2, 2]]).astype(np.float32), BOX.points.index)),
            [7, 3, 8],
        ),
        {},
    ),
    "edge-t-junction": (bare(GRID), with_a_junction(), {}),
    "edge-hard-in-chart": (GRID, folded(GRID), {}),
    "edge-soft-on-border": (BOX, normals(asset(BOX), method="angle").parts[0], {}),
    "winding-inconsistent": (
        bare(BOX),
        replace(bare(BOX), points=Stream(BOX.points.values, np.r_[BOX.points.index[3::-1], BOX.points.index[4:]])),
        {},
    ),
    "vertex-needless": (
        replace(GRID, source=GRID.points.index),
        replace(GRID, source=np.arange(GRID.corner_count, dtype=np.int32)),
        {},
    ),
    "normal-non-unit": (GRID, replace(GRID, normals=Stream(GRID.normals.values * 2, GRID.normals.index)), {}),
    "normal-far": (
        TORUS,
        replace(
            TORUS, normals=Stream(row_changed(TORUS.normals.values, 7, -TORUS.normals.values[7]), TORUS.normals.index)
        ),
        {},
    ),
    "normal-inverted": (BOX, replace(BOX, normals=Stream(-BOX.normals.values, BOX.normals.index)), {}),
    "frame-missing": (with_normal_map(framed(GRID)), with_normal_map(GRID), {}),
    "frame-shared": (framed(reflected(GRID)), sharing_across(reflected(GRID)), {}),
    "frame-fallback": (stored(GRID), stored(GRID, fallback=np.ones(len(framed(GRID).frames.sides), bool)), {}),
    "tangent-zero": (stored(GRID), stored(GRID, tangents=row_changed(framed(GRID).frames.tangents, 3, 0)), {}),
    "tangent-non-unit": (stored(GRID), stored(GRID, tangents=framed(GRID).frames.tangents * 1.5), {}),
    "tangent-leaning": (stored(GRID), stored(GRID, tangents=tilted(GRID, 10)), {}),
    "tangent-unexplained": (stored(GRID), stored(GRID, tangents=turned(GRID, 64)), {}),
    "tangent-without-uv": (stored(GRID), replace(stored(GRID), uvs=()), {}),
    "side-invalid": (stored(GRID), stored(GRID, sides=row_changed(framed(GRID).frames.sides, 3, 0)), {}),
    "side-mixed": (stored(GRID), stored(GRID, sides=row_changed(framed(GRID).frames.sides, 12, -1)), {}),
    "side-flipped": (stored(GRID), stored(GRID, sides=-framed(GRID).frames.sides), {}),
    "side-wrong": (stored(BOX), stored(BOX, sides=chart_sides(BOX, slice(0, 4))), {}),
}


def whole(one: Asset | Part) -> Asset:
    return one if isinstance(one, Asset) else asset(one)


@pytest.mark.parametrize("id", BREAKS)
def test_what_is_broken_is_found_and_nothing_else(id):
    sound, broken, limits = BREAKS[id]

    assert found(check(whole(broken), **limits)) - found(check(whole(sound), **limits)) == {id}


@pytest.mark.parametrize("id", sorted(set(BREAKS) - {"frame-shared"}))
def test_what_is_sound_has_no_findings(id):
    sound, _, limits = BREAKS[id]

    assert found(check(whole(sound), **limits)) == set()


@pytest.mark.parametrize("part", [GRID, BOX, TORUS, cylinder_part()], ids=lambda part: part.name)
@pytest.mark.parametrize("cut", [False, True])
def test_framed_shapes_have_no_findings(part, cut):
    assert found(check(asset(framed(triangulated(part) if cut else part)))) == set()


def test_the_poles_of_a_sphere_are_no_fault():
    assert not check(asset(framed(triangulated(sphere_part())))).faulty


@pytest.mark.parametrize("method", ["face", "area", "angle"])
def test_normals_built_over_faces_wound_against_each_other_hide_nothing(method):
    _, broken, _ = BREAKS["winding-inconsistent"]

    assert "winding-inconsistent" in found(check(normals(asset(broken), method=method)))


def test_mirrored_charts_are_a_note():
    assert {item.severity for item in check(asset(framed(reflected(GRID)))).items} == {"note"}


@pytest.mark.parametrize("name", ["another", GRID.name])
def test_two_parts_of_two_conventions_are_told_once_for_the_whole(name):
    plain, flipped = stored(GRID), replace(stored(GRID, sides=-framed(GRID).frames.sides), name=name)

    assert found(check(asset(plain, flipped))) - found(check(asset(flipped))) == {"convention-mixed"}


def relief_map(green: str) -> Image:
    """Normals of a field of round bumps, green up or down."""
    y, x = np.mgrid[0:128, 0:128] / 128 * 2 * np.pi
    slope_x, slope_y = np.cos(5 * x) * np.sin(3 * y), np.sin(5 * x) * np.cos(3 * y) * 0.6  # of sin(5x) sin(3y) / 5
    up = -slope_y if green == "down" else slope_y
    normal = np.stack([-slope_x, up, np.ones_like(x)], axis=2)
    normal /= np.linalg.norm(normal, axis=2, keepdims=True)
    return Image("bumps.png", "image/png", write_png(np.rint(normal * 127.5 + 127.5).astype(np.uint8)))


@pytest.mark.parametrize(
    ("sides", "green", "expected"),
    [
        (1, "up", {}),
        (1, "down", {"map-green-down": "warning"}),
        (-1, "up", {"side-flipped": "fault"}),
        (-1, "down", {"side-flipped": "note"}),
    ],
)
def test_sides_and_green_are_judged_together(sides, green, expected):
    part = stored(GRID, sides=(framed(GRID).frames.sides * sides).astype(np.int8))
    one = replace(with_normal_map(part), images=(relief_map(green),))

    assert {item.id: item.severity for item in check(one).items} == expected


def test_every_id_has_its_way_of_being_broken():
    assert set(IDS) == {*BREAKS, "convention-mixed", "map-green-down", "motion-skew", "motion-stretch"}


@pytest.mark.parametrize("setting", ["severity", "accept"])
def test_an_unknown_id_is_refused_with_the_nearest_one(setting):
    with pytest.raises(
        InputError, match=f'setting {setting}: no finding is called "uv-overlaping".*Did you mean "uv-overlapping"'
    ):
        check(asset(GRID), **{setting: {"uv-overlaping": "note"}})


def test_a_severity_is_the_graphs_to_say():
    broken = BREAKS["uv-mirrored"][1]

    assert not check(asset(broken)).faulty
    assert check(asset(broken), severity={"uv-mirrored": "fault"}).faulty
    assert not check(asset(broken), severity={"uv-mirrored": "off"}).items


def test_an_accepted_fault_is_listed_with_its_reason_and_holds_nothing_back():
    findings = check(asset(BREAKS["normal-inverted"][1]), accept={"normal-inverted": "seen from inside"})

    assert only(findings).accepted == "seen from inside"
    assert not findings.faulty


@pytest.mark.parametrize(
    ("id", "element", "elements"),
    [
        ("uv-mirrored", "face", [2]),
        ("uv-density", "face", [3]),
        ("uv-overlapping", "face", [0, 1]),
        ("face-duplicate", "face", [6]),
        ("face-zero-area", "face", [16]),
        ("edge-t-junction", "corner", [1]),
        ("winding-inconsistent", "corner", [0, 1, 2, 3]),
        ("side-wrong", "corner", [0, 1, 2, 3]),
    ],
)
def test_the_guilty_are_named(id, element, elements):
    item = only(check(whole(BREAKS[id][1])))

    assert (item.element, sorted(item.elements.tolist()), item.count) == (element, elements, len(elements))


@pytest.mark.parametrize(
    ("id", "worst", "limit"),
    [
        ("uv-skewed", np.degrees(np.arctan(2)), 60),
        ("uv-density", 0.2, 4),
        ("edge-hard-in-chart", 90, 1),
        ("edge-soft-on-border", 90, 60),
        ("edge-non-manifold", 3, 2),
        ("tangent-leaning", 10, 5),
        ("tangent-unexplained", 64, 30),
        ("tangent-non-unit", 1.5, 0.005),
        ("normal-inverted", 180, 90),
        ("uv-gutter", (0.2 / 3 - 0.064) * 1024, 6),
    ],
)
def test_the_measured_value_stands_beside_its_limit(id, worst, limit):
    item = only(check(whole(BREAKS[id][1]), **BREAKS[id][2]))

    assert len(item.measured) == len(item.elements)
    np.testing.assert_allclose(item.measured.max() if worst > limit else item.measured.min(), worst, rtol=0.03)
    assert item.limit == limit


def test_findings_name_the_charts_they_lie_in():
    item = only(check(asset(BREAKS["uv-overlapping"][1])))

    assert item.charts.tolist() == [0, 1]


def test_parts_of_one_material_are_held_against_each_other():
    one, two = replace(GRID, name="one", material=0), replace(GRID, name="two", material=0)
    both = replace(asset(one, two), materials=(Material("shared"),))

    assert [(item.id, item.part, item.count) for item in check(both).items] == [
        ("uv-overlapping", "one", 16),
        ("uv-overlapping", "two", 16),
    ]


def test_facts_count_what_is_there():
    facts = check(asset(framed(BOX))).facts

    counts = {
        "parts": 1,
        "faces": 6,
        "triangles": 12,
        "corners": 24,
        "points": 8,
        "vertices": 24,
        "frames": 24,
        "charts": 6,
    }
    assert counts.items() <= facts.items()


def test_an_asset_without_parts_has_no_findings():
    assert check(Asset("empty", ())).items == ()


def test_severities_stay_when_faces_change_places():
    for _, broken, limits in BREAKS.values():
        one = whole(broken)
        part = one.parts[0]
        order = np.random.default_rng(0).permutation(part.face_count)
        assert told(check(replace(one, parts=(with_faces_in(part, order),)), **limits)) == told(check(one, **limits))


def told(findings: Findings) -> set[tuple[str, str, int]]:
    return {(item.id, item.severity, item.count) for item in findings.items if item.id != "uv-overlapping-itself"}


def with_faces_in(part: Part, order: Array) -> Part:
    corners = np.concatenate([np.arange(part.starts[f], part.starts[f + 1]) for f in order])

    def taken(stream: Stream | None) -> Stream | None:
        return None if stream is None else Stream(stream.values, stream.index[corners])

    return replace(
        part,
        starts=np.concatenate([[0], np.cumsum(np.diff(part.starts)[order])]).astype(np.int32),
        points=taken(part.points),
        normals=taken(part.normals),
        uvs=tuple(taken(uv) for uv in part.uvs),
        source=None if part.source is None else part.source[corners],
        vertices=None if part.vertices is None else part.vertices[corners],
        frames=None if part.frames is None else replace(part.frames, index=part.frames.index[corners]),
    )


@pytest.mark.parametrize("bad", [np.inf, -np.inf, np.nan, 3e38, 1e25, 1e-40])
@pytest.mark.parametrize("part", [grid_part(), box_part()])
def test_uvs_beyond_all_measure_are_checked_without_a_warning(part, bad):
    """Warnings are errors here."""
    values = part.uvs[0].values.copy()
    values[::5] = bad

    found = check(frames(asset(replace(part, uvs=(Stream(values, part.uvs[0].index),))), where="all"))

    assert ("value-not-finite" in {item.id for item in found.items}) == (not np.isfinite(bad))
