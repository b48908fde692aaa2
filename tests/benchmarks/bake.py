"""A bake's throughput beside Embree's bindings alone on the same rays: 2048 x 2048 texels, 500,000 detailed triangles.

Run by hand: python tests/benchmarks/bake.py. Building the ray structure is left out on both sides. The bindings run
once in one process, and once shared out over the cores as the bake is.
"""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

sys.path[:0] = [str(Path(__file__).parents[1]), str(Path(__file__).parent)]

from raster import best  # noqa: E402
from shapes import torus  # noqa: E402
from tangentry.nodes.bake import _detail  # noqa: E402
from tangentry.nodes.frames import frames  # noqa: E402
from tangentry.nodes.geometry.cores import core_count, share_out, shared_zeros  # noqa: E402
from tangentry.nodes.geometry.texels import texel_owners  # noqa: E402
from tangentry.nodes.maps.bake import Recipe, bake_sheet  # noqa: E402
from tangentry.nodes.maps.bake_aim import aim_at, rays_of  # noqa: E402
from tangentry.nodes.maps.surface import surface_of  # noqa: E402

SIZE, REACH, BANDS = 2048, 0.06, 16


def main() -> None:
    """Print rays a second and their ratios."""
    target, detailed = frames(torus(64, 32)), torus(710, 352)
    surface, detail = surface_of(target, [0]), _detail(detailed, list(detailed.parts))
    count = len(surface.positions)
    aim = aim_at(surface.positions, surface.frames[..., :3], np.full((count, 3), REACH, np.float32), "smoothed")
    sees, recipe = np.zeros(count, np.int32), Recipe("normal", "outermost", "pixel", 1, 16)

    owners = texel_owners(surface.places, SIZE, SIZE, conservative=True)
    chosen = np.nonzero(owners.triangle.ravel() >= 0)[0]
    rays = len(chosen)
    place, outward, length = np.empty((rays, 3)), np.empty((rays, 3), np.float32), np.empty(rays, np.float32)
    rays_of(
        chosen, owners.triangle.ravel(), owners.weights.reshape(-1, 2), surface.positions, *aim, place, outward, length
    )
    origins, inward, reach = (place + outward * length[:, None]).astype(np.float32), -outward, 2 * length
    alone, found = detail.scene._scene, shared_zeros((rays,), np.int32)
    edges = np.linspace(0, rays, BANDS + 1).astype(int)

    def some(band: int) -> None:
        part = slice(edges[band], edges[band + 1])
        found[part] = alone.run(origins[part], inward[part], output=1, dists=reach[part])["primID"]

    one = best(lambda: alone.run(origins, inward, output=1, dists=reach), 3)
    shared = best(lambda: share_out(some, BANDS), 3)
    whole = best(lambda: bake_sheet(surface, aim, sees, [detail], SIZE, SIZE, recipe), 3)
    print(f"{rays:,} rays, {len(detail.normals):,} triangles, {core_count()} cores; millions of rays a second:")
    print(
        f"bindings, one process {rays / one / 1e6:.2f}; shared out {rays / shared / 1e6:.2f};"
        f" bake {rays / whole / 1e6:.2f}"
    )
    print(f"bake / bindings in one process {one / whole:.2f}; bake / bindings shared out {shared / whole:.2f}")


if __name__ == "__main__":
    main()
