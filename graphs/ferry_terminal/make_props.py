"""Makes the props of the ferry terminal, and the flawed ones that are sent back; each time the same bytes.

python graphs/ferry_terminal/make_props.py
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
from tangentry.nodes.formats.gltf import write_gltf
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.formats.obj_writing import write_obj
from tangentry.nodes.formats.ply_writing import write_ply
from tangentry.nodes.frames import frames
from tangentry.nodes.model import Asset, Frames, Image, MapUse, Material, Part, Stream
from tangentry.nodes.normals import normals

HERE = Path(__file__).parent
TEXTURE = 256  # texels along a side
GUTTER = 7 / TEXTURE  # between charts, in UV units: apart down to the second mip level

Corner = tuple[int, int]  # a point, and a UV
Place = tuple[float, float]  # u and v, or metres along a chart


@dataclass
class Panel:
    """A flat chart that waits to be packed."""

    material: str
    flat: list[Place]  # metres, from (0, 0)
    uvs: list[int]  # where its UVs go, and those of charts that share its place

    @property
    def size(self) -> Place:
        """Width and height in metres."""
        return max(x for x, _ in self.flat), max(y for _, y in self.flat)


@dataclass
class Mesh:
    """A prop under construction: metres, y up, faces counter-clockwise from outside."""

    name: str
    points: list[tuple[float, float, float]] = field(default_factory=list)
    uvs: list[tuple[float, float]] = field(default_factory=list)
    faces: list[list[Corner]] = field(default_factory=list)
    smoothing: list[int] = field(default_factory=list)
    material: list[str] = field(default_factory=list)
    panels: list[Panel] = field(default_factory=list)

    def face(self, corners: list[Corner], material: str, smoothing: int = 0) -> None:
        """Add a polygon; smoothing group 0 is faceted."""
        self.faces.append(corners)
        self.smoothing.append(smoothing)
        self.material.append(material)

    def placed(self, points: list[tuple[float, float, float]]) -> list[int]:
        """Add points; gives their numbers."""
        first = len(self.points)
        self.points += points
        return list(range(first, len(self.points)))

    def grid(
        self,
        points: np.ndarray,
        uvs: np.ndarray,
        material: str,
        smoothing: int = 0,
        closed: bool = False,
        collapsed: bool = False,
    ) -> None:
        """Add a grid of quads: points (columns, rows, 3) and uvs (columns, rows, 2).

        `closed` joins the last column of points to the first; `collapsed` keeps quads that have an edge of no length.
        """
        columns, rows = points.shape[:2]
        p0, t0 = len(self.points), len(self.uvs)
        kept = points[:-1] if closed else points
        self.points += [tuple(row) for row in kept.reshape(-1, 3)]
        self.uvs += [tuple(row) for row in uvs.reshape(-1, 2)]
        for i in range(columns - 1):
            for j in range(rows - 1):
                around = [(i, j), (i + 1, j), (i + 1, j + 1), (i, j + 1)]
                if not collapsed:  # a quad with an edge of no length is a triangle
                    ends = [
                        (points[a, b] == points[c, d]).all()
                        for (a, b), (c, d) in zip(around, around[1:] + around[:1], strict=True)
                    ]
                    around = [corner for corner, gone in zip(around, ends, strict=True) if not gone]
                self.face(
                    [(p0 + (a % len(kept)) * rows + b, t0 + a * rows + b) for a, b in around], material, smoothing
                )

    def lathe(
        self,
        profile: list[tuple[float, float]],
        sides: int,
        chart: tuple[float, float, float, float],
        material: str,
        smoothing: int = 1,
        mirrored: bool = False,
        collapsed: bool = False,
    ) -> None:
        """Add a surface of revolution around y from (radius, height) points, bottom to top.

        `mirrored` lays both halves on one chart; `collapsed` keeps quads that have an edge of no length.
        """
        turn = np.linspace(0, 2 * np.pi, sides + 1)
        radius, height = np.array(profile).T
        along = np.concatenate([[0], np.cumsum(np.hypot(np.diff(radius), np.diff(height)))])
        points = np.stack(
            np.broadcast_arrays(radius * np.cos(turn)[:, None], height[None, :], -radius * np.sin(turn)[:, None]),
            axis=-1,
        )
        u = np.linspace(0, 1, sides + 1)
        u = 1 - np.abs(2 * u - 1) if mirrored else u
        u0, v0, u1, v1 = chart
        uvs = np.stack(
            np.broadcast_arrays((u0 + (u1 - u0) * u)[:, None], (v0 + (v1 - v0) * along / along[-1])[None, :]), axis=-1
        )
        self.grid(points, uvs, material, smoothing, True, collapsed)

    def cap(
        self,
        radius: float,
        height: float,
        sides: int,
        chart: tuple[float, float, float, float],
        material: str,
        up: bool = True,
    ) -> None:
        """Add a round lid, one polygon of so many sides."""
        turn = np.linspace(0, 2 * np.pi, sides, endpoint=False) * (1 if up else -1)
        u0, v0, u1, v1 = chart
        p0, t0 = len(self.points), len(self.uvs)
        self.points += [(radius * np.cos(a), height, -radius * np.sin(a)) for a in turn]
        self.uvs += [
            ((u0 + u1) / 2 + (u1 - u0) / 2 * np.cos(a), (v0 + v1) / 2 + (v1 - v0) / 2 * np.sin(a) * (1 if up else -1))
            for a in turn
        ]
        self.face([(p0 + k, t0 + k) for k in range(sides)], material)

    def panel(self, points: list[int], flat: list[Place], material: str, over: bool = False) -> None:
        """Add a polygon with a flat chart, to be packed; `over` lays it on the last panel's, mirrored."""
        left, low = min(x for x, _ in flat), min(y for _, y in flat)
        flat = [(x - left, y - low) for x, y in flat]
        t0 = len(self.uvs)
        self.uvs += [(0.0, 0.0)] * len(flat)
        self.face([(one, t0 + k) for k, one in enumerate(points)], material)
        if over:
            assert len(flat) == 4  # corners 0 and 1 change places, as do 3 and 2
            self.panels[-1].uvs += [t0 + 1, t0, t0 + 3, t0 + 2]
        else:
            self.panels.append(Panel(material, flat, list(range(t0, t0 + len(flat)))))

    def box(
        self, low: tuple[float, float, float], high: tuple[float, float, float], material: str, stacked: bool = False
    ) -> None:
        """Add a box of six panels; `stacked` lays opposite sides on one chart, one of them mirrored."""
        p0 = len(self.points)
        self.points += [(a, b, c) for a in (low[0], high[0]) for b in (low[1], high[1]) for c in (low[2], high[2])]
        sides = [[1, 5, 7, 3], [4, 0, 2, 6], [5, 4, 6, 7], [0, 1, 3, 2], [3, 7, 6, 2], [0, 4, 5, 1]]
        wide, tall, deep = np.subtract(high, low)
        spans = [(wide, tall), (deep, tall), (wide, deep)]
        for number, corners in enumerate(sides):
            w, h = spans[number // 2]
            self.panel([p0 + c for c in corners], oblong(w, h), material, stacked and number % 2 == 1)

    def pack(self, material: str) -> None:
        """Give the panels of a material their UVs, all at the largest scale at which they fit the tile."""
        panels = [one for one in self.panels if one.material == material]
        fitting, too_large = 0.0, 64.0  # UV units per metre
        for _ in range(40):
            scale = (fitting + too_large) / 2
            if shelved(panels, scale) is None:
                too_large = scale
            else:
                fitting = scale
        for panel, (left, low) in zip(panels, shelved(panels, fitting) or [], strict=True):
            for k, row in enumerate(panel.uvs):
                x, y = panel.flat[k % len(panel.flat)]
                self.uvs[row] = (left + fitting * x, low + fitting * y)

    def asset(self) -> Asset:
        """The prop with its normals, one part for each material."""
        names = list(dict.fromkeys(self.material))
        for name in names:
            self.pack(name)
        points, uvs = np.array(self.points, np.float32), np.array(self.uvs, np.float32)
        parts = []
        for row, name in enumerate(names):
            chosen = [k for k, one in enumerate(self.material) if one == name]
            corners = np.array([corner for k in chosen for corner in self.faces[k]], np.int32)
            starts = np.cumsum([0, *(len(self.faces[k]) for k in chosen)]).astype(np.int32)
            smoothing = np.array([self.smoothing[k] for k in chosen], np.int32)
            parts.append(
                Part(
                    self.name,
                    row,
                    starts,
                    _used(points, corners[:, 0]),
                    None,
                    (_used(uvs, corners[:, 1]),),
                    smoothing=smoothing,
                )
            )
        asset = Asset(self.name, tuple(parts), tuple(Material(name) for name in names))
        return normals(asset, method="smoothing")


def oblong(wide: float, tall: float) -> list[Place]:
    """A rectangle's corners, counter-clockwise."""
    return [(0.0, 0.0), (wide, 0.0), (wide, tall), (0.0, tall)]


def shelved(panels: list[Panel], scale: float) -> list[Place] | None:
    """Where each panel's corner lies, on shelves with the tall ones first; None where they don't fit."""
    places: list[Place] = [(0.0, 0.0)] * len(panels)
    left, low, shelf = GUTTER / 2, GUTTER / 2, 0.0
    for row in sorted(range(len(panels)), key=lambda row: (-panels[row].size[1], -panels[row].size[0], row)):
        wide, tall = (scale * side + GUTTER for side in panels[row].size)
        if left + wide > 1 + GUTTER / 2:
            left, low, shelf = GUTTER / 2, low + shelf, 0.0
        if left + wide > 1 + GUTTER / 2 or low + tall > 1 + GUTTER / 2:
            return None
        places[row] = (left, low)
        left, shelf = left + wide, max(shelf, tall)
    return places


def _used(values: np.ndarray, index: np.ndarray) -> Stream:
    rows, at = np.unique(index, return_inverse=True)
    return Stream(values[rows], at.astype(np.int32))


# The props


def bollard() -> Asset:
    """Cast iron, with a hard rim and a lid of one polygon with sixteen corners."""
    mesh = Mesh("bollard")
    mesh.lathe([(0.22, 0.0), (0.22, 0.06), (0.15, 0.10)], 16, (0.01, 0.01, 0.99, 0.15), "cast iron", 1)
    mesh.lathe([(0.15, 0.10), (0.13, 0.3), (0.13, 0.42), (0.16, 0.5)], 16, (0.01, 0.18, 0.99, 0.6), "cast iron", 2)
    mesh.lathe([(0.16, 0.5), (0.2, 0.53), (0.2, 0.57), (0.17, 0.6)], 16, (0.01, 0.63, 0.69, 0.74), "cast iron", 3)
    mesh.cap(0.17, 0.6, 16, (0.72, 0.63, 0.99, 0.9), "cast iron")
    return mesh.asset()


def life_ring(columns: int = 32, rows: int = 12) -> Asset:
    """A torus in two materials, each band unwrapped once and reused mirrored."""
    mesh = Mesh("life_ring")
    a, b = np.linspace(0, 2 * np.pi, columns + 1), np.linspace(0, 2 * np.pi, rows + 1)
    ring = np.stack(
        np.broadcast_arrays(
            (0.3 + 0.07 * np.cos(b)) * np.cos(a)[:, None],
            0.07 * np.sin(b),
            -(0.3 + 0.07 * np.cos(b)) * np.sin(a)[:, None],
        ),
        axis=-1,
    )
    step = columns // 8
    for band in range(8):
        part = ring[band * step : (band + 1) * step + 1]
        u = np.linspace(0, 1, step + 1) if band % 4 < 2 else np.linspace(1, 0, step + 1)
        low = 0.01 if band % 2 else 0.51
        uvs = np.stack(np.broadcast_arrays(0.01 + 0.98 * u[:, None], (low + 0.48 * b / (2 * np.pi))[None, :]), axis=-1)
        mesh.grid(part, uvs, "red canvas" if band % 2 else "white canvas", 1)
    return welded(mesh.asset())


def welded(asset: Asset) -> Asset:
    """Points joined and normals built over what that joined."""
    from tangentry.nodes.weld import weld

    return normals(weld(asset, within=1e-6), method="angle")


def buoy() -> Asset:
    """A sphere, its poles degenerate as spheres' are."""
    mesh = Mesh("buoy")
    turn = np.linspace(-np.pi / 2, np.pi / 2, 17)
    profile = [(0.35 * max(np.cos(t), 0.0) if 0 < k < 16 else 0.0, 0.35 + 0.35 * np.sin(t)) for k, t in enumerate(turn)]
    mesh.lathe(profile, 32, (0.01, 0.01, 0.99, 0.99), "painted steel", collapsed=True)
    return mesh.asset()


def crate() -> Asset:
    """Planks: opposite sides share a chart, one of them mirrored; a height map of wood grain goes with it."""
    mesh = Mesh("crate")
    mesh.box((-0.4, 0.0, -0.4), (0.4, 0.6, 0.4), "planks", stacked=True)
    return mesh.asset()


def quay_slab() -> Asset:
    """Two metres of quay, its cobbles in a height map of 16 bits; open below, where nobody looks."""
    mesh = Mesh("quay_slab")
    wide, deep = 2.0, 0.15
    mesh.points = [(x, y, z) for y in (-deep, 0.0) for x, z in ((-1.0, 1.0), (1.0, 1.0), (1.0, -1.0), (-1.0, -1.0))]
    mesh.panel([4, 5, 6, 7], oblong(wide, wide), "cobbles")
    for side in range(4):
        after = (side + 1) % 4
        mesh.panel([side, after, 4 + after, 4 + side], oblong(wide, deep), "cobbles")
    return mesh.asset()


def stair() -> Asset:
    """Five steps, hard edged: treads and risers in materials of their own, the flanks one polygon each."""
    mesh = Mesh("stair")
    for step in range(5):
        y, z = 0.18 * step, -0.3 * step
        for name, tall, corners in (
            ("risers", 0.18, [(-0.6, y, z), (0.6, y, z), (0.6, y + 0.18, z), (-0.6, y + 0.18, z)]),
            (
                "treads",
                0.3,
                [(-0.6, y + 0.18, z), (0.6, y + 0.18, z), (0.6, y + 0.18, z - 0.3), (-0.6, y + 0.18, z - 0.3)],
            ),
        ):
            mesh.panel(mesh.placed(corners), oblong(1.2, tall), name)
    outline = [(0.0, 0.0)]
    for step in range(5):
        outline += [(-0.3 * step, 0.18 * (step + 1)), (-0.3 * (step + 1), 0.18 * (step + 1))]
    outline.append((-1.5, 0.0))
    for x in (0.6, -0.6):
        ring = mesh.placed([(x, y, z) for z, y in outline])
        flat = [(-z if x > 0 else z, y) for z, y in outline]
        mesh.panel(ring[::-1] if x > 0 else ring, flat[::-1] if x > 0 else flat, "flanks")
    return mesh.asset()


def lantern() -> Asset:
    """A post, a glass and a hood; a second UV set for baked light."""
    mesh = Mesh("lantern")
    mesh.lathe([(0.09, 0.0), (0.09, 0.05), (0.035, 0.12), (0.03, 2.4)], 12, (0.01, 0.01, 0.48, 0.99), "green paint")
    mesh.lathe([(0.06, 2.4), (0.11, 2.45), (0.11, 2.7), (0.07, 2.75)], 12, (0.52, 0.01, 0.99, 0.45), "glass")
    mesh.lathe([(0.15, 2.75), (0.09, 2.85), (0.02, 2.92), (0.0, 2.95)], 12, (0.52, 0.5, 0.99, 0.99), "green paint", 2)
    asset = mesh.asset()
    return replace(
        asset,
        parts=tuple(
            replace(part, uvs=(*part.uvs, Stream(part.uvs[0].values * np.float32(0.5), part.uvs[0].index)))
            for part in asset.parts
        ),
    )


def bench() -> Asset:
    """Three slats on two legs."""
    mesh = Mesh("bench")
    for z in (-0.2, -0.06, 0.08):
        mesh.box((-0.7, 0.42, z), (0.7, 0.46, z + 0.12), "oak")
    for x in (-0.55, 0.47):
        mesh.box((x, 0.0, -0.18), (x + 0.08, 0.42, 0.18), "wrought iron")
    return mesh.asset()


def oar() -> Asset:
    """A shaft and a blade, both halves of each on one chart, mirrored."""
    mesh = Mesh("oar")
    mesh.lathe(
        [(0.018, 0.0), (0.022, 0.2), (0.025, 1.6), (0.02, 1.9)],
        16,
        (0.01, 0.01, 0.05, 0.99),
        "ash wood",
        1,
        mirrored=True,
    )
    blade = [(0.02, 1.9), (0.06, 2.0), (0.08, 2.2), (0.07, 2.45), (0.03, 2.5)]
    mesh.lathe(blade, 16, (0.08, 0.01, 0.18, 0.32), "ash wood", 2, mirrored=True)
    asset = mesh.asset()
    points = asset.parts[0].points.values.copy()
    points[:, 2] *= np.where(points[:, 1] > 1.9, np.maximum(0.25, 1 - (points[:, 1] - 1.9) * 7), 1).astype(np.float32)
    part = replace(asset.parts[0], points=Stream(points, asset.parts[0].points.index))
    return normals(replace(asset, parts=(part,)), method="angle")


def ticket_kiosk() -> Asset:
    """A house for one, its gables polygons of five corners, in three materials."""
    mesh = Mesh("ticket_kiosk")
    w, h, top, d = 0.9, 2.1, 2.7, 0.8
    outline = [(-w, 0.0), (w, 0.0), (w, h), (0.0, top), (-w, h)]
    for z, flip in ((d, 1), (-d, -1)):
        mesh.panel(mesh.placed([(x * flip, y, z) for x, y in outline]), outline, "boards")
    slope = float(np.hypot(w, top - h))
    for flip in (1, -1):
        x, z = w * flip, d * flip
        mesh.panel(mesh.placed([(x, 0.0, z), (x, 0.0, -z), (x, h, -z), (x, h, z)]), oblong(2 * d, h), "plaster")
        roof = [(x, h, z), (x, h, -z), (0.0, top, -z), (0.0, top, z)]
        mesh.panel(mesh.placed(roof), oblong(2 * d, slope), "shingles")
    return mesh.asset()


def cleat(fine: int = 1) -> Asset:
    """A mooring cleat: a foot and a horn. `fine` multiplies its resolution, and its detailed twin has a dented foot.

    Each is a part of its own name: baked by name, the foot does not see the horn that passes through its top.
    """
    foot, horn = Mesh("foot"), Mesh("horn")
    around = [(0.07, 0.0), (0.068, 0.02), (0.05, 0.04), (0.03, 0.07)]
    along = [(0.0, -0.16), (0.012, -0.155), (0.02, -0.1), (0.026, 0.0), (0.02, 0.1), (0.012, 0.155), (0.0, 0.16)]
    foot.lathe(_refined(around, fine), 12 * fine, (0.01, 0.01, 0.99, 0.29), "galvanised steel", 1)
    horn.lathe(_refined(along, fine), 12 * fine, (0.01, 0.32, 0.25, 0.99), "galvanised steel", 2)
    horn.points = [(y, 0.085 - x, z) for x, y, z in horn.points]
    if fine > 1:
        foot.points = [(x * _dent(x, y, z), y, z * _dent(x, y, z)) for x, y, z in foot.points]
    base = foot.asset()
    return replace(base, name="cleat", parts=(*base.parts, *horn.asset().parts))


def _refined(profile: list[tuple[float, float]], fine: int) -> list[tuple[float, float]]:
    at, wanted = np.arange(len(profile)), np.linspace(0, len(profile) - 1, (len(profile) - 1) * fine + 1)
    return [
        (float(np.interp(k, at, [r for r, _ in profile])), float(np.interp(k, at, [h for _, h in profile])))
        for k in wanted
    ]


def _dent(x: float, y: float, z: float) -> float:
    return 1 - 0.02 * float(np.exp(-((y - 0.02) ** 2) / 2e-4)) * (1 + float(np.cos(9 * np.arctan2(z, x)))) / 2


def mooring_post() -> Asset:
    """A post of hammered timber, with a cap."""
    mesh = Mesh("mooring_post")
    mesh.lathe([(0.15, 0.0), (0.16, 0.8), (0.15, 1.5)], 20, (0.01, 0.01, 0.99, 0.69), "timber", 1)
    mesh.lathe([(0.17, 1.5), (0.16, 1.56), (0.08, 1.62), (0.0, 1.64)], 20, (0.01, 0.72, 0.99, 0.99), "timber", 2)
    return mesh.asset()


def gangway() -> Asset:
    """A ramp with two rails, in two materials; it brings the tangents it was made with."""
    mesh = Mesh("gangway")
    mesh.box((-0.6, 0.0, -2.0), (0.6, 0.08, 2.0), "decking")
    for x in (-0.6, 0.55):
        mesh.box((x, 0.9, -2.0), (x + 0.05, 0.95, 2.0), "rail")
        for z in (-1.9, -0.02, 1.86):
            mesh.box((x, 0.08, z), (x + 0.05, 0.9, z + 0.05), "rail")
    asset = frames(mesh.asset())
    return replace(
        asset,
        parts=tuple(replace(part, frames=replace(part.frames, method="stored")) for part in asset.parts if part.frames),
    )


# Height maps


def _texel_centres(size: int) -> tuple[np.ndarray, np.ndarray]:
    """x rightward and y downward, 0 to 1, of every texel."""
    at = (np.arange(size) + 0.5) / size
    return at[None, :], at[:, None]


def cobbles(size: int = 256, across: int = 14) -> np.ndarray:
    """(size, size, 1) uint16: rounded stones in staggered rows; it tiles."""
    x, y = _texel_centres(size)
    row = np.floor(y * across).astype(int)
    along = x * across + 0.5 * (row % 2)
    dx, dy = along % 1 - 0.5, y * across % 1 - 0.5
    lift = np.random.default_rng(7).uniform(0.7, 1.0, (across, across))[row, along.astype(int) % across]
    dome = np.clip(1 - (np.abs(dx) / 0.47) ** 4, 0, 1) * np.clip(1 - (np.abs(dy) / 0.47) ** 4, 0, 1)
    return np.rint(np.sqrt(dome) * lift * 65535).astype(np.uint16)[..., None]


def wood_grain(size: int = 256, planks: int = 12) -> np.ndarray:
    """(size, size, 1) uint8: planks along x with a gap between, the grain in gentle waves; it tiles."""
    x, y = _texel_centres(size)
    bend = 0.02 * np.sin(2 * np.pi * x) + 0.01 * np.sin(6 * np.pi * x + 1)
    grain = 0.6 + 0.2 * np.sin(2 * np.pi * 16 * (y + bend)) + 0.15 * np.sin(2 * np.pi * 37 * (y + bend) + 2)
    gap = np.minimum(1, (0.5 - np.abs(y * planks % 1 - 0.5)) * 10)
    return np.rint(np.clip(grain, 0, 1) * gap * 255).astype(np.uint8)[..., None]


# Colours: a pattern of light and dark for each material, and the bands painted over it, each from a height v upward

Colour = tuple[int, int, int]
PAINT: dict[str, tuple[str, list[tuple[float, Colour]]]] = {
    "ash wood": ("upright grain", [(0, (206, 170, 118)), (0.9, (186, 52, 44)), (0.955, (206, 170, 118))]),
    "boards": ("planks", [(0, (74, 122, 138))]),
    "cast iron": ("worn", [(0, (62, 66, 72)), (0.62, (214, 170, 52))]),
    "cobbles": ("stones", [(0, (182, 178, 170))]),
    "decking": ("narrow planks", [(0, (168, 132, 92))]),
    "flanks": ("worn", [(0, (128, 126, 122))]),
    "galvanised steel": ("worn", [(0, (158, 168, 176))]),
    "glass": ("worn", [(0, (250, 214, 130))]),
    "green paint": ("worn", [(0, (34, 84, 66))]),
    "oak": ("grain", [(0, (176, 128, 76))]),
    "painted steel": ("worn", [(0, (178, 40, 36)), (0.42, (232, 226, 212)), (0.6, (178, 40, 36))]),
    "planks": ("planks", [(0, (182, 138, 88))]),
    "plaster": ("worn", [(0, (226, 214, 190))]),
    "rail": ("worn", [(0, (226, 226, 220))]),
    "red canvas": ("worn", [(0, (196, 44, 38))]),
    "risers": ("worn", [(0, (112, 110, 106))]),
    "shingles": ("courses", [(0, (142, 62, 48))]),
    "timber": ("upright grain", [(0, (72, 58, 46)), (0.12, (112, 86, 60)), (0.7, (230, 226, 214))]),
    "treads": ("worn", [(0, (170, 166, 156))]),
    "white canvas": ("worn", [(0, (240, 236, 226))]),
    "wrought iron": ("worn", [(0, (54, 58, 62))]),
}


def paint(name: str, size: int = TEXTURE) -> np.ndarray:
    """(size, size, 3) uint8: the colour texture of a material."""
    pattern, bands = PAINT[name]
    _, y = _texel_centres(size)
    colour = np.empty((size, size, 3))
    for low, tint in bands:
        colour[1 - y[:, 0] >= low] = tint
    if name == "boards":
        ticket_window(colour)
    return np.rint(np.clip(colour * shade(pattern, size)[..., None], 0, 255)).astype(np.uint8)


def shade(pattern: str, size: int) -> np.ndarray:
    """(size, size) float64 about 1: how light a material is, texel by texel; it tiles."""
    if pattern == "stones":
        return 0.45 + 0.6 * cobbles(size)[..., 0] / 65535
    if pattern.endswith(("grain", "planks")):
        grain = wood_grain(size, {"planks": 12, "narrow planks": 32}.get(pattern, 1))[..., 0] / 255
        return 0.7 + 0.4 * (grain.T if "upright" in pattern else grain)
    x, y = _texel_centres(size)
    worn = 1 + 0.04 * sum(
        np.sin(2 * np.pi * (a * x + b * y) + c) for a, b, c in ((3, 1, 0), (-2, 5, 1), (7, 4, 2), (5, -9, 3))
    )
    if pattern == "courses":
        row = np.floor(y * 24)
        joint = (0.5 - np.abs((x * 16 + 0.5 * (row % 2)) % 1 - 0.5)) * 8
        return worn * (0.6 + 0.4 * np.minimum(1, np.minimum(joint, (1 - y * 24 % 1) * 4)))
    return worn


def ticket_window(colour: np.ndarray) -> None:
    """Paint a window with a sill, and a door, into the charts of the kiosk's gables."""
    for (u0, v0, u1, v1), tint in (
        ((0.145, 0.26, 0.355, 0.50), (236, 228, 206)),
        ((0.157, 0.28, 0.343, 0.488), (38, 52, 66)),
        ((0.658, 0.01, 0.842, 0.53), (236, 228, 206)),
        ((0.67, 0.01, 0.83, 0.518), (122, 58, 44)),
    ):
        x, y = _texel_centres(len(colour))
        colour[((x > u0) & (x < u1) & (1 - y > v0) & (1 - y < v1))] = tint


def painted(asset: Asset) -> Asset:
    """The asset with a colour texture in each material."""
    names = [one.name for one in asset.materials]
    return replace(
        asset,
        materials=tuple(Material(name, (MapUse("colour", row),)) for row, name in enumerate(names)),
        images=tuple(Image(f"{name.replace(' ', '_')}.png", "image/png", write_png(paint(name))) for name in names),
    )


# The flawed ones


def with_map(asset: Asset) -> Asset:
    """The asset with a flat normal map in each material, so that its file says that frames are needed."""
    flat = np.full((4, 4, 3), (128, 128, 255), np.uint8)
    image = Image("flat_normal.png", "image/png", write_png(flat))
    return replace(
        asset, materials=tuple(replace(one, maps=(MapUse("normal", 0),)) for one in asset.materials), images=(image,)
    )


def stored(asset: Asset, change: Callable[[Part, Frames], Frames]) -> Asset:
    """The asset with frames as if its file had brought them, each set of frames changed by a function."""
    solved = frames(with_map(asset), where="all")
    return replace(
        solved,
        parts=tuple(
            replace(part, frames=replace(change(part, part.frames), method="stored"))
            for part in solved.parts
            if part.frames
        ),
    )


def shared_across_the_mirror(part: Part, made: Frames) -> Frames:
    """One frame for every point, normal and UV, whichever side its faces are seen from."""
    from tangentry.nodes.geometry.corners import distinct_corners

    same = distinct_corners(part.points, part.normals, part.uvs[0]).label
    first = np.zeros(int(same.max()) + 1, np.int32)
    first[same[::-1]] = made.index[::-1]
    return Frames(made.tangents[first], None, made.sides[first], made.fallback[first], same, made.uv, made.method)


def zeroed(part: Part, made: Frames) -> Frames:
    """Every seventh tangent of no length."""
    tangents = made.tangents.copy()
    tangents[::7] = 0
    return replace(made, tangents=tangents)


def sheared(asset: Asset, degrees: float) -> Asset:
    """The asset with its UVs sheared along u."""
    shear = np.array([[1, 0], [np.tan(np.radians(degrees)), 1]], np.float32)
    return replace(
        asset,
        parts=tuple(
            replace(part, uvs=(Stream((part.uvs[0].values * np.float32(0.3)) @ shear, part.uvs[0].index),))
            for part in asset.parts
        ),
    )


def flattened(asset: Asset) -> Asset:
    """The asset with all UVs of its second material in one place."""
    part = asset.parts[1]
    lost = replace(part, uvs=(Stream(np.full_like(part.uvs[0].values, 0.5), part.uvs[0].index),))
    return replace(asset, parts=(asset.parts[0], lost, *asset.parts[2:]))


def inside_out(asset: Asset) -> Asset:
    """The asset with its normals turned inward."""
    return replace(
        asset,
        parts=tuple(
            replace(part, normals=Stream(-part.normals.values, part.normals.index))
            for part in asset.parts
            if part.normals
        ),
    )


def with_a_fin() -> Asset:
    """A crate with a third face on one of its edges."""
    mesh = Mesh("crate_with_a_fin")
    mesh.box((-0.4, 0.0, -0.4), (0.4, 0.6, 0.4), "planks")
    mesh.points += [(0.7, 0.0, 0.7), (0.7, 0.6, 0.7)]
    mesh.panel([5, 8, 9, 7], oblong(0.42, 0.6), "planks")
    return mesh.asset()


def without_uvs(asset: Asset) -> Asset:
    """The asset before it was unwrapped."""
    return replace(asset, parts=tuple(replace(part, uvs=()) for part in asset.parts))


# Writing


def write(folder: str, asset: Asset, suffix: str, stem: str = "") -> None:
    """One prop in one format, its textures beside it or, in a GLB, inside."""
    stem = stem or asset.name
    if suffix == ".glb":
        save(f"{folder}/{stem}.glb", write_gltf(asset, None, f"{stem}.glb")[0].content)
        return
    for file in (write_ply if suffix == ".ply" else write_obj)(asset, stem):
        save(f"{folder}/{file.name}", file.content)


def save(path: str, content: np.ndarray | bytes) -> None:
    """Bytes into a file below this folder."""
    (HERE / path).parent.mkdir(exist_ok=True)
    (HERE / path).write_bytes(bytes(content))


def main() -> None:
    """Make everything."""
    for make, suffix in (
        (bollard, ".obj"),
        (life_ring, ".glb"),
        (buoy, ".ply"),
        (crate, ".obj"),
        (quay_slab, ".obj"),
        (stair, ".obj"),
        (lantern, ".glb"),
        (bench, ".obj"),
        (oar, ".glb"),
        (ticket_kiosk, ".obj"),
        (cleat, ".obj"),
        (mooring_post, ".ply"),
        (gangway, ".glb"),
    ):
        write("props", painted(make()), suffix)
    save("props/quay_slab_height.png", write_png(cobbles()))
    save("props/crate_height.png", write_png(wood_grain()))
    write("detail", cleat(6), ".obj", "cleat_detailed")
    write("sent_back", sheared(bench(), 60), ".obj", "bench_sheared")
    write("sent_back", flattened(ticket_kiosk()), ".obj", "kiosk_half_unwrapped")
    write("sent_back", stored(oar(), shared_across_the_mirror), ".glb", "oar_sharing_its_seam")
    write("sent_back", stored(life_ring(), zeroed), ".glb", "life_ring_without_tangents")
    write("sent_back", inside_out(buoy()), ".ply", "buoy_inside_out")
    write("sent_back", with_a_fin(), ".obj", "crate_with_a_fin")
    write("sent_back", without_uvs(mooring_post()), ".obj", "post_without_uvs")
    write("sent_back", stair(), ".obj", "stair_cut_off")
    cut_off = HERE / "sent_back" / "stair_cut_off.obj"
    lines = cut_off.read_text().splitlines(keepends=True)
    last = max(k for k, line in enumerate(lines) if line.startswith("v "))
    cut_off.write_text("".join(lines[: last - 3] + lines[last + 1 :]))


if __name__ == "__main__":
    main()
