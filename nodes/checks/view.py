"""A part as the checks see it: what several of them need is worked out once."""

from __future__ import annotations

from functools import cached_property

import numpy as np
from tangentry.nodes.formats.image_headers import is_image, read_header
from tangentry.nodes.formats.images import read_image
from tangentry.nodes.geometry.charts import charts_of
from tangentry.nodes.geometry.corners import distinct_rows, distinct_values
from tangentry.nodes.geometry.directions import Directions, triangle_directions
from tangentry.nodes.geometry.edges import Edges, edges_of, turn_keys
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.geometry.vectors import dot, unit
from tangentry.nodes.maps.conventions import Green, measure_green
from tangentry.nodes.model import Asset, Frames, Part, Stream
from tangentry.pipeline.flow import Array, Finding

AGAINST_SPACE = 1e-10  # a triangle whose UV area is below this share of the part's largest holds no texels


def views_of(asset: Asset) -> list[View]:
    """A view of each part; they share what is measured of images."""
    greens: dict[int, Green] = {}
    return [View(asset, part, greens) for part in asset.parts]


class View:
    """A part of an asset, and what follows from it."""

    def __init__(self, asset: Asset, part: Part, greens: dict[int, Green]) -> None:
        self.asset, self.part = asset, part
        self._greens = greens  # by image row: a map is measured once, however many parts it serves

    @cached_property
    def green(self) -> Green | None:
        """Which way green points in the part's normal map, as its texels tell; None where there is none to be read."""
        material = self.asset.materials[self.part.material] if self.part.material >= 0 else None
        use = next((one for one in material.maps if one.role == "normal"), None) if material else None
        if use is None or not is_image(self.asset.images[use.image].content):
            return None
        if use.image not in self._greens:
            image = self.asset.images[use.image]
            texels = read_image(image.content, f"{self.asset.name}: {image.name}")
            self._greens[use.image] = measure_green(texels) if texels.shape[2] >= 3 else Green("undecided", 0.0)
        return self._greens[use.image]

    @cached_property
    def map_size(self) -> tuple[int, int] | None:
        """Width and height of the material's tangent-space map, else of its largest; None where none can be read."""
        material = self.asset.materials[self.part.material] if self.part.material >= 0 else None
        if material is None:
            return None
        wanted = material.tangent_space_map
        uses = [wanted] if wanted is not None else [use for use in material.maps if use.uv == self.uv_set]
        headers = [
            read_header(image.content, f"{self.asset.name}: {image.name}")
            for image in (self.asset.images[use.image] for use in uses)
            if is_image(image.content)
        ]
        return max(((one.width, one.height) for one in headers), default=None)

    @cached_property
    def triangles(self) -> Array:
        """(n, 3) int32 corner numbers."""
        return self._cut[0]

    @cached_property
    def face(self) -> Array:
        """(n,) int32: the polygon of each triangle."""
        return self._cut[1]

    @cached_property
    def _cut(self) -> tuple[Array, Array]:
        return triangulate(self.part)

    @cached_property
    def uv_set(self) -> int:
        """The UV set that counts: that of the frames, else of the material's tangent-space map, else the first."""
        if self.part.frames is not None and self.part.frames.uv >= 0:
            return self.part.frames.uv
        use = self.asset.materials[self.part.material].tangent_space_map if self.part.material >= 0 else None
        return use.uv if use is not None and use.uv < len(self.part.uvs) else 0

    @cached_property
    def uv(self) -> Stream | None:
        """The UVs that count."""
        return self.part.uvs[self.uv_set] if self.uv_set < len(self.part.uvs) else None

    @cached_property
    def needs_frames(self) -> bool:
        """Does the material sample a tangent-space map?"""
        return self.part.material >= 0 and self.asset.materials[self.part.material].tangent_space_map is not None

    @cached_property
    def directions(self) -> Directions | None:
        """Of every triangle, by the UVs that count."""
        return None if self.uv is None else triangle_directions(self.part, self.triangles, self.uv, self.asset.v_down)

    @cached_property
    def _across(self) -> Array:
        """(n, 3) float64: twice the area of each triangle, along its normal."""
        p = self.part.points.values[self.part.points.index[self.triangles]].astype(np.float64)
        across: Array = np.cross(p[:, 1] - p[:, 0], p[:, 2] - p[:, 0])
        return np.nan_to_num(across)  # what is not finite has a finding of its own

    @cached_property
    def triangle_normal(self) -> Array:
        """(n, 3) float64, unit; zero where a triangle has no area."""
        return unit(self._across)

    @cached_property
    def face_normal(self) -> Array:
        """(faces, 3) float64, unit; zero where a face has no area."""
        return unit(np.stack([self.per_face(self._across[:, k]) for k in range(3)], axis=1))

    @cached_property
    def area(self) -> Array:
        """(n,) float64: the area of each triangle."""
        return np.sqrt(dot(self._across, self._across)) / 2

    @cached_property
    def face_area(self) -> Array:
        """(faces,) float64."""
        return self.per_face(self.area)

    @cached_property
    def owner(self) -> Array:
        """(corners,) int32: the face of each corner."""
        return np.repeat(np.arange(self.part.face_count, dtype=np.int32), np.diff(self.part.starts))

    @cached_property
    def point(self) -> Array:
        """(corners,) int32: points, exactly equal positions being one."""
        label: Array = distinct_values(self.part.points.values)[0][self.part.points.index]
        return label

    @cached_property
    def copies(self) -> Array:
        """(faces,) bool: faces with area, of the same points in the same turn as an earlier face."""
        lasting = np.flatnonzero(self.face_area > 0)
        points = turn_keys(self.part.starts, self.point)[lasting]
        label, first = distinct_rows(np.diff(self.part.starts)[lasting], points[:, 0], points[:, 1])
        copy = np.zeros(self.part.face_count, bool)
        copy[lasting[first[label] != np.arange(len(label))]] = True
        return copy

    @cached_property
    def edges(self) -> Edges:
        """Between faces that have area, each of them taken once."""
        return edges_of(self.part.starts, self.point, (self.face_area > 0) & ~self.copies)

    @cached_property
    def uv_label(self) -> Array:
        """(corners,) int32: equal where the UVs that count are."""
        assert self.uv is not None
        label: Array = distinct_values(self.uv.values)[0][self.uv.index]
        return label

    @cached_property
    def side(self) -> Array:
        """(faces,) int8: the side from which most of a face's UV area is seen, +1 or -1; 0: it has none."""
        found = self.directions
        if found is None:
            return np.zeros(self.part.face_count, np.int8)
        seen = ~self.uv_flat & (found.side != 0)
        uv_area = np.nan_to_num(found.uv_area)  # what is not finite has a finding of its own
        return np.sign(self.per_face(np.where(seen, found.side * uv_area, 0))).astype(np.int8)

    @cached_property
    def uv_flat(self) -> Array:
        """(n,) bool: triangles that have area in space and none in UV space."""
        assert self.directions is not None
        real = self.area > 1e-12 * max(float(self.area.max(initial=0)), 1e-300)
        uv_area = np.nan_to_num(self.directions.uv_area)
        flat = (self.directions.side == 0) | (uv_area <= AGAINST_SPACE * float(uv_area.max(initial=0)))
        both: Array = real & flat
        return both

    @cached_property
    def chart(self) -> Array:
        """(faces,) int32: the chart each face lies in; -1: it has no UV area."""
        if self.uv is None:
            return np.full(self.part.face_count, -1, np.int32)
        return charts_of(self.edges, self.uv_label, self.owner, self.side)

    @cached_property
    def chart_count(self) -> int:
        """How many charts the part has."""
        return int(self.chart.max(initial=-1)) + 1

    @cached_property
    def side_mixed(self) -> Array:
        """(n,) bool: triangles whose corners' frames are of different sides."""
        if self.part.frames is None:
            return np.zeros(len(self.triangles), bool)
        each = self.part.frames.sides[self.part.frames.index][self.triangles]
        mixed: Array = (each != each[:, :1]).any(axis=1) & (each != 0).all(axis=1)
        return mixed

    @cached_property
    def solved(self) -> Frames | None:
        """What the rule gives: MikkTSpace on the same normals and UVs, for comparison with stored frames."""
        if self.uv is None or self.part.normals is None:
            return None
        from tangentry.nodes.geometry.frames import solve_frames

        return solve_frames(self.part, self.uv, self.uv_set, self.asset.v_down, "mikktspace")

    def finding(
        self,
        id: str,
        severity: str,
        what: str,
        advice: str,
        element: str,
        elements: Array,
        measured: Array | None = None,
        limit: float | None = None,
    ) -> Finding:
        """A finding in this part."""
        material = self.asset.materials[self.part.material].name if self.part.material >= 0 else ""
        figures = np.zeros(0, np.float32) if measured is None else np.asarray(measured, np.float32)
        return Finding(
            id,
            severity,
            len(elements) if element else 1,
            what,
            advice,
            self.part.name,
            material,
            element,
            np.asarray(elements, np.int32),
            figures,
            limit,
            charts=self._charts_of(element, elements),
        )

    def _charts_of(self, element: str, elements: Array) -> Array | None:
        if self.uv is None or element not in ("face", "corner"):
            return None
        charts: Array = self.chart[elements if element == "face" else self.owner[elements]]
        return charts

    def per_face(self, values: Array) -> Array:
        """(faces,) float64: the sums of the triangles' values."""
        total: Array = np.bincount(self.face, values, self.part.face_count)
        return total

    def worst_of(self, triangles: Array, values: Array) -> tuple[Array, Array]:
        """The faces of the triangles chosen by a mask, each once, with the greatest value among them."""
        worst = np.zeros(self.part.face_count)
        np.maximum.at(worst, self.face[triangles], np.minimum(values[triangles], 1e30))
        faces = self.faces_of(triangles)
        return faces, worst[faces]

    def faces_of(self, triangles: Array) -> Array:
        """The polygons of the triangles chosen by a mask, each once."""
        chosen = np.zeros(self.part.face_count, bool)
        chosen[self.face[triangles]] = True
        return np.flatnonzero(chosen)
