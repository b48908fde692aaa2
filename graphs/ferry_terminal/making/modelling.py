"""A modeller of few words: grids, surfaces of revolution, panels and boxes, their charts packed at one scale."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace

import numpy as np
from tangentry.nodes.frames import frames
from tangentry.nodes.model import Asset, Frames, Material, Part, Stream
from tangentry.nodes.normals import normals
from tangentry.pipeline.flow import Array

TEXTURE = 256  # texels along a side
GUTTER = 7 / TEXTURE  # between charts, in UV units: apart down to the second mip level

Point = tuple[float, float, float]  # metres
Corner = tuple[int, int]  # a point, and a UV
Place = tuple[float, float]  # u and v, or metres along a chart
Chart = tuple[float, float, float, float]  # from u and v, to u and v


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
    points: list[Point] = field(default_factory=list)
    uvs: list[Place] = field(default_factory=list)
    faces: list[list[Corner]] = field(default_factory=list)
    smoothing: list[int] = field(default_factory=list)
    material: list[str] = field(default_factory=list)
    panels: list[Panel] = field(default_factory=list)

    def face(self, corners: list[Corner], material: str, smoothing: int = 0) -> None:
        """Add a polygon; smoothing group 0 is faceted."""
        self.faces.append(corners)
        self.smoothing.append(smoothing)
        self.material.append(material)

    def placed(self, points: list[Point]) -> list[int]:
        """Add points; gives their numbers."""
        first = len(self.points)
        self.points += points
        return list(range(first, len(self.points)))

    def grid(
        self,
        points: Array,
        uvs: Array,
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
        profile: list[Place],
        sides: int,
        chart: Chart,
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
        chart: Chart,
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

    def box(self, low: Point, high: Point, material: str, stacked: bool = False) -> None:
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


def each_part(asset: Asset, change: Callable[[Part], Part]) -> Asset:
    """The asset with each of its parts changed by a function."""
    return replace(asset, parts=tuple(change(part) for part in asset.parts))


def with_stored_frames(asset: Asset, change: Callable[[Part, Frames], Frames] = lambda part, made: made) -> Asset:
    """The asset with frames as if its file had brought them, each part's changed by a function."""

    def kept(part: Part) -> Part:
        assert part.frames is not None
        return replace(part, frames=replace(change(part, part.frames), method="stored"))

    return each_part(frames(asset, where="all"), kept)


def _used(values: Array, index: Array) -> Stream:
    rows, at = np.unique(index, return_inverse=True)
    return Stream(values[rows], at.astype(np.int32))
