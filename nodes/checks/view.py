"""A part as the checks see it: what several of them need is worked out once."""

from __future__ import annotations

from functools import cached_property

import numpy as np
from tangentry.nodes.formats.image_headers import is_image
from tangentry.nodes.formats.images import read_image
from tangentry.nodes.geometry.corners import distinct_rows, distinct_values
from tangentry.nodes.geometry.directions import Directions, triangle_directions
from tangentry.nodes.geometry.triangles import triangulate
from tangentry.nodes.geometry.vectors import unit
from tangentry.nodes.maps.conventions import Green, measure_green
from tangentry.nodes.model import Asset, Frames, Part, Stream
from tangentry.pipeline.flow import Array, Finding


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
            texels = read_image(image.content, image.name)
            self._greens[use.image] = measure_green(texels) if texels.shape[2] >= 3 else Green("undecided", 0.0)
        return self._greens[use.image]

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
    def triangle_normal(self) -> Array:
        """(n, 3) float64, unit; zero where a triangle has no area."""
        p = self.part.points.values[self.part.points.index[self.triangles]].astype(np.float64)
        return unit(np.cross(p[:, 1] - p[:, 0], p[:, 2] - p[:, 0]))

    @cached_property
    def area(self) -> Array:
        """(n,) float64: the area of each triangle."""
        p = self.part.points.values[self.part.points.index[self.triangles]].astype(np.float64)
        return np.linalg.norm(np.cross(p[:, 1] - p[:, 0], p[:, 2] - p[:, 0]), axis=1) / 2

    @cached_property
    def point(self) -> Array:
        """(corners,) int32: points, exactly equal positions being one."""
        label: Array = distinct_values(self.part.points.values)[0][self.part.points.index]
        return label

    @cached_property
    def vertex(self) -> Array:
        """(corners,) int32: the vertices as `frames` and the file have them."""
        if self.part.vertices is not None:
            return self.part.vertices
        if self.part.source is not None:
            return self.part.source
        streams = [self.part.points, *([self.part.normals] if self.part.normals else []), *self.part.uvs]
        return distinct_rows(*(distinct_values(one.values)[0][one.index] for one in streams))[0]

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
        )

    def faces_of(self, triangles: Array) -> Array:
        """The polygons of the triangles chosen by a mask, each once."""
        faces: Array = np.unique(self.face[triangles])
        return faces
