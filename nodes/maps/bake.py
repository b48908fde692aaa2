"""A detailed mesh seen from a target mesh's texels, through rays."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from tangentry.nodes.geometry.cores import share_out, shared_zeros
from tangentry.nodes.geometry.rays import Hits, RayScene
from tangentry.nodes.geometry.texels import texel_owners
from tangentry.nodes.maps.bake_aim import Aim, rays_of
from tangentry.nodes.maps.bake_values import into_frames, normals_at, openness
from tangentry.nodes.maps.decoders import WAYS
from tangentry.nodes.maps.gutter import nearest_owned
from tangentry.nodes.maps.surface import Surface
from tangentry.pipeline.flow import Array

AT_ONCE = 1 << 20  # samples worked on together
OVERLAP = 1e-3  # share of the reach by which rays both ways start on the other side of the surface

OUTSIDE, HIT, MISSED, BEHIND = 0, 1, 2, 3  # what became of a texel
COLOURS = np.array([(0, 0, 0), (70, 150, 90), (220, 40, 40), (50, 90, 220)], np.uint8)  # how that is drawn


class Detail(NamedTuple):
    """A detailed mesh, or the parts of it that belong together."""

    scene: RayScene
    normals: Array  # (triangles, 3, 3) float32: at the corners


class Recipe(NamedTuple):
    """What is wanted of a bake."""

    gives: str  # "normal", "object normal", "height", "occlusion" or "hits"
    hit: str  # "outermost" or "nearest"
    way: str  # a decoder's name
    fine: int  # samples along each side of a texel
    gutter: int


def bake_sheet(
    surface: Surface, aim: Aim, detail: Array, details: list[Detail], width: int, height: int, recipe: Recipe
) -> Array:
    """The texels of one sheet: (height, width, 3 or 1) float32, or uint8 colours for "hits".

    surface   of the target, its aim beside it
    detail    (triangles,) int32: which of `details` a target triangle sees, -1: none

    What no ray met is filled from the nearest texel that has a value, as the gutter is, up to `gutter` texels away;
    beyond that it is flat: (0, 0, 1), height 0, occlusion 1.
    """
    channels = 3 if "normal" in recipe.gives else 1
    values = shared_zeros((height, width, channels), np.float32)
    state = shared_zeros((height, width), np.uint8)
    rows = max(1, min(-(-height // 4), AT_ONCE // (width * recipe.fine**2)))

    def work(band: int) -> None:
        first, last = band * rows, min(height, (band + 1) * rows)
        values[first:last], state[first:last] = _band(
            surface, aim, detail, details, width, height, (first, last), recipe
        )

    share_out(work, -(-height // rows))
    if recipe.gives == "hits":
        return COLOURS[state]
    source = nearest_owned((state == HIT) | (state == BEHIND), recipe.gutter)
    known = source >= 0
    values[known] = values.reshape(-1, channels)[source[known]]
    values[~known] = {"height": 0, "occlusion": 1}.get(recipe.gives, np.array([0, 0, 1], np.float32))
    return values


def _band(
    surface: Surface,
    aim: Aim,
    detail: Array,
    details: list[Detail],
    width: int,
    height: int,
    rows: tuple[int, int],
    recipe: Recipe,
) -> tuple[Array, Array]:
    """The values and the states of a band of rows."""
    fine = recipe.fine
    span = rows[0] * fine, rows[1] * fine
    owners = texel_owners(surface.places, width * fine, height * fine, rows=span, conservative=True)
    triangle, weights = owners.triangle.ravel(), owners.weights.reshape(-1, 2)
    channels = 3 if "normal" in recipe.gives else 1
    value, state = np.zeros((len(triangle), channels), np.float32), np.zeros(len(triangle), np.uint8)
    owned = np.nonzero(triangle >= 0)[0]
    sees = detail[triangle[owned]]
    state[owned[sees < 0]] = MISSED
    for number, one in enumerate(details):
        chosen = owned[sees == number]
        if len(chosen):
            value[chosen], state[chosen] = _samples(
                surface, aim, one, chosen, triangle, weights, recipe, span[0] * width * fine
            )
    shape = rows[1] - rows[0], fine, width, fine
    return _gathered(value.reshape(*shape, channels), state.reshape(shape), recipe.gives)


def _samples(
    surface: Surface,
    aim: Aim,
    detail: Detail,
    chosen: Array,
    triangle: Array,
    weights: Array,
    recipe: Recipe,
    first: int,
) -> tuple[Array, Array]:
    """The values and the states of chosen samples, which all see one detail."""
    count = len(chosen)
    place, outward, length = np.empty((count, 3)), np.empty((count, 3), np.float32), np.empty(count, np.float32)
    rays_of(chosen, triangle, weights, surface.positions, *aim, place, outward, length)
    origins, directions, hits = _cast(detail.scene, place, outward, length, recipe.hit)
    state = np.where(hits.triangle < 0, MISSED, np.where(hits.behind, BEHIND, HIT)).astype(np.uint8)
    if recipe.gives == "hits":
        return np.zeros((count, 1), np.float32), state
    if recipe.gives == "height":
        met = origins + directions * hits.distance[:, None] - place
        return np.einsum("ij,ij->i", met, outward)[:, None].astype(np.float32), state
    normals = np.empty((count, 3), np.float32)
    normals_at(hits.triangle, hits.weights, detail.normals, normals)
    if recipe.gives == "occlusion":
        return openness(detail.scene, origins, directions, hits, normals, chosen + first)[:, None], state
    if recipe.gives == "normal":
        into_frames(WAYS[recipe.way])(chosen, triangle, weights, surface.frames, normals)
    return normals, state


def _cast(scene: RayScene, place: Array, outward: Array, length: Array, hit: str) -> tuple[Array, Array, Hits]:
    """The rays of places on the target, and what they met.

    outermost   inward from the offset surface, as far beyond the target as that is before it
    nearest     both ways from the target; the shorter counts
    """
    if hit == "outermost":
        origins = place + outward * length[:, None]
        return origins, -outward, scene.nearest(origins, -outward, 2 * length)
    back = OVERLAP * length
    origins_in, origins_out = place + outward * back[:, None], place - outward * back[:, None]
    inward = scene.nearest(origins_in, -outward, length + back)
    forward = scene.nearest(origins_out, outward, length + back)
    ahead = (forward.triangle >= 0) & ((inward.triangle < 0) | (forward.distance < inward.distance))
    hits = Hits(*(np.where(ahead.reshape(-1, *[1] * (a.ndim - 1)), b, a) for a, b in zip(inward, forward, strict=True)))
    # A surface that is met on the way out faces the same way as the target, so its back is what the ray sees.
    hits = hits._replace(behind=hits.behind ^ (ahead & (hits.triangle >= 0)))
    which = ahead[:, None]
    return np.where(which, origins_out, origins_in), np.where(which, outward, -outward), hits


def _gathered(value: Array, state: Array, gives: str) -> tuple[Array, Array]:
    """Texels of their samples: the mean of those that have a value, normals renormalised; the worst state of them.

    value   (rows, fine, width, fine, channels); state (rows, fine, width, fine)
    """
    sound = (state == HIT) | (state == BEHIND)
    count = sound.sum(axis=(1, 3))
    total = (value * sound[..., None]).sum(axis=(1, 3))
    worst = np.where((state == BEHIND).any(axis=(1, 3)), BEHIND, HIT)
    whole = np.where(count > 0, worst, np.where((state == MISSED).any(axis=(1, 3)), MISSED, OUTSIDE)).astype(np.uint8)
    if "normal" not in gives:
        return (total / np.maximum(count, 1)[..., None]).astype(np.float32), whole
    length = np.sqrt(np.einsum("...i,...i->...", total, total))[..., None]
    return (total / np.where(length > 0, length, 1)).astype(np.float32), whole
