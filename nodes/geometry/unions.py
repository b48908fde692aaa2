"""Disjoint sets over whole numbers, the smallest member standing for each (Tarjan 1975, with path halving)."""

from __future__ import annotations

from numba import njit
from tangentry.pipeline.flow import Array


@njit(cache=True, nogil=True)
def root(parent: Array, c: int) -> int:
    """The member that stands for c's set. parent: (n,) int32, parent[c] == c at the start."""
    while parent[c] != c:
        parent[c] = parent[parent[c]]
        c = parent[c]
    return c


@njit(cache=True, nogil=True)
def union(parent: Array, a: int, b: int) -> None:
    """Make the sets of a and b one."""
    a, b = root(parent, a), root(parent, b)
    if a < b:
        parent[b] = a
    elif b < a:
        parent[a] = b


@njit(cache=True, nogil=True)
def number(parent: Array, index: Array) -> int:
    """Write each member's set number, in order of first appearance, into index (n,) int32; returns the count."""
    count = 0
    for c in range(len(parent)):
        one = root(parent, c)
        if one == c:
            index[c] = count
            count += 1
        else:
            index[c] = index[one]
    return count
