"""Rays against triangles, through Embree's bindings (embreex)."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from tangentry.pipeline.flow import Array


class Hits(NamedTuple):
    """What each ray met first."""

    triangle: Array  # (rays,) int32: row of the scene's triangles, -1: nothing
    weights: Array  # (rays, 2) float32: of the triangle's corners 1 and 2
    distance: Array  # (rays,) float32: along the ray, in the scene's unit; of misses, how far they went
    behind: Array  # (rays,) bool: the triangle was seen from its back


class RayScene:
    """Triangles that rays can meet.

    positions   (triangles, 3, 3) float32

    Coordinates are kept relative to the middle of the scene, so that a mesh far from the origin loses no precision.
    Triangles with a corner that is not finite meet nothing.
    """

    def __init__(self, positions: Array) -> None:
        from embreex.mesh_construction import TriangleMesh
        from embreex.rtcore_scene import EmbreeScene

        sound = np.isfinite(positions).all(axis=(1, 2))
        self._rows = np.nonzero(sound)[0].astype(np.int32)
        self._whole = bool(sound.all())
        kept = positions[sound].astype(np.float64)
        self._middle = (kept.min(axis=(0, 1)) + kept.max(axis=(0, 1))) / 2 if len(kept) else np.zeros(3)
        self.size = float(np.linalg.norm(kept.max(axis=(0, 1)) - kept.min(axis=(0, 1)))) if len(kept) else 0.0
        self._scene = EmbreeScene()
        if len(kept):
            TriangleMesh(self._scene, np.ascontiguousarray(kept - self._middle, np.float32))
            # The first ray builds the tree; here, so that processes forked later share it.
            self._scene.run(np.zeros((1, 3), np.float32), np.ones((1, 3), np.float32))

    def nearest(self, origins: Array, directions: Array, reach: Array) -> Hits:
        """The first triangle on each ray that is no further than `reach`.

        origins      (rays, 3) float64
        directions   (rays, 3) float32, unit
        reach        (rays,) float32
        """
        count = len(origins)
        if not len(self._rows) or not count:
            nothing = np.zeros(count, bool)
            return Hits(np.full(count, -1, np.int32), np.zeros((count, 2), np.float32), reach.copy(), nothing)
        directions = np.ascontiguousarray(directions, np.float32)
        met = self._scene.run(self._near(origins), directions, output=1, dists=np.ascontiguousarray(reach, np.float32))
        triangle = self._row_of(met["primID"])
        behind = (np.einsum("ij,ij->i", met["Ng"], directions) > 0) & (triangle >= 0)
        return Hits(triangle, np.stack([met["u"], met["v"]], axis=1), met["tfar"], behind)

    def blocked(self, origins: Array, directions: Array, reach: Array) -> Array:
        """(rays,) bool: is there any triangle on the ray no further than `reach`? Arguments as in `nearest`."""
        if not len(self._rows) or not len(origins):
            return np.zeros(len(origins), bool)
        found = self._scene.run(
            self._near(origins),
            np.ascontiguousarray(directions, np.float32),
            query="OCCLUDED",
            dists=np.ascontiguousarray(reach, np.float32),
        )
        return np.asarray(found) >= 0

    def _row_of(self, met: Array) -> Array:
        """Rows of the triangles given, from those of the triangles that could be used."""
        if self._whole:
            return met
        rows: Array = np.where(met >= 0, self._rows[met], -1).astype(np.int32)
        return rows

    def _near(self, origins: Array) -> Array:
        return np.ascontiguousarray(origins - self._middle, np.float32)
