"""Where the nodes of a graph stand in a picture: in columns, every line from left to right and none behind a box.

A node stands one column right of the last of its inputs; one without inputs, just left of the first that it feeds. A
line that passes a column has a waypoint there, which keeps its distance from boxes as they do from one another; lines
from one node share their waypoints (Sugiyama, Tagawa and Toda 1981, with bundled edges). Within a column everything
is drawn towards the mean place of what it is joined to, swept back and forth, so that few lines cross.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence

Spot = str | tuple[str, int]  # a node, or the waypoint of a node's lines in a column

BOX, WAYPOINT = 1.0, 0.22  # heights, in boxes
APART = 0.34  # between boxes
SWEEPS = 40


@dataclasses.dataclass
class Arrangement:
    """Columns and places (in heights of boxes, centres) of everything, and the pieces of the lines that join them."""

    column: dict[Spot, int]
    place: dict[Spot, float]
    joints: list[tuple[Spot, Spot]]
    leads_to: dict[Spot, set[str]]  # the nodes that lines through a spot end at


def arrange(inputs: Mapping[str, Sequence[str]], last: frozenset[str] = frozenset()) -> Arrangement:
    """An arrangement of nodes, given in an order in which they can run; those in `last` stand right of all others."""
    column: dict[Spot, int] = {}
    for name, sources in inputs.items():
        column[name] = 1 + max((column[source] for source in sources), default=-1)
    edge = 1 + max((column[name] for name in inputs if name not in last), default=-1)
    for name in inputs:
        if name in last:
            column[name] = max(edge, 1 + max((column[source] for source in inputs[name]), default=-1))
    fed: dict[str, int] = {}
    for name, sources in inputs.items():
        for source in sources:
            fed[source] = min(fed.get(source, column[name]), column[name])
    column.update({name: fed[name] - 1 for name in fed if not inputs[name] and name not in last})
    joints: dict[tuple[Spot, Spot], None] = {}  # in order, each once
    leads_to: dict[Spot, set[str]] = {}
    for name, sources in inputs.items():
        for source in sources:
            before: Spot = source
            for passed in range(column[source] + 1, column[name]):
                column[source, passed] = passed
                joints[before, (source, passed)] = None
                before = (source, passed)
                leads_to.setdefault(before, set()).add(name)
            joints[before, name] = None
            leads_to[name] = {name}
    return Arrangement(column, _places(column, list(joints)), list(joints), leads_to)


def _places(column: dict[Spot, int], joints: list[tuple[Spot, Spot]]) -> dict[Spot, float]:
    columns: list[list[Spot]] = [[] for _ in range(1 + max(column.values()))]
    for spot, number in column.items():
        columns[number].append(spot)
    joined: dict[Spot, list[Spot]] = {spot: [] for spot in column}
    for one, other in joints:
        joined[one].append(other)
        joined[other].append(one)
    place = {spot: float(number) for spots in columns for number, spot in enumerate(spots)}
    for sweep in range(SWEEPS):
        for spots in columns if sweep % 2 == 0 else reversed(columns):
            _settle(spots, place, joined)
    top = min(place[spot] - _height(spot) / 2 for spot in place)
    return {spot: at - top for spot, at in place.items()}


def _settle(spots: list[Spot], place: dict[Spot, float], joined: dict[Spot, list[Spot]]) -> None:
    """Move what stands in a column towards what it is joined to, apart from one another."""
    wish = {
        spot: sum(place[one] for one in joined[spot]) / len(joined[spot]) if joined[spot] else place[spot]
        for spot in spots
    }
    spots.sort(key=lambda spot: (wish[spot], place[spot]))
    for number, spot in enumerate(spots):
        place[spot] = wish[spot]
        if number:
            above = spots[number - 1]
            place[spot] = max(wish[spot], place[above] + (_height(above) + _height(spot)) / 2 + APART)
    shift = sum(place[spot] - wish[spot] for spot in spots) / len(spots)
    for spot in spots:
        place[spot] -= shift


def _height(spot: Spot) -> float:
    return BOX if isinstance(spot, str) else WAYPOINT
