"""Charts: pieces of a surface that lie in UV space in one piece and are seen from one side there."""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.nodes.geometry.edges import Edges, same_across
from tangentry.nodes.geometry.unions import number, union
from tangentry.pipeline.flow import Array


def charts_of(edges: Edges, uv: Array, owner: Array, side: Array) -> Array:
    """(faces,) int32: the chart of each face, in order of first appearance; -1 for faces without UV area.

    uv      (corners,) int32: equal where UVs are
    owner   (corners,) int32: the face of each corner
    side    (faces,) int8: the side from which a face is seen in UV space; 0: it has no UV area

    Faces are of one chart where they meet at an edge with the same UVs at both its ends and are seen from the same
    side: a mirrored half that shares its middle line is a chart of its own.
    """
    parent = np.arange(len(side), dtype=np.int32)
    _join(parent, owner[edges.pairs[same_across(edges, uv)]], side)
    index = np.empty(len(side), np.int32)
    number(parent, index)
    chart = np.full(len(side), -1, np.int32)
    seen = side != 0
    used = np.unique(index[seen])
    chart[seen] = np.searchsorted(used, index[seen])
    return chart


@njit(cache=True, nogil=True)
def _join(parent: Array, faces: Array, side: Array) -> None:
    for k in range(len(faces)):
        a, b = faces[k, 0], faces[k, 1]
        if side[a] != 0 and side[a] == side[b]:
            union(parent, a, b)
