"""A graph as a picture: its nodes in columns from left to right, each with what the last build made of it, as SVG.

A node stands one column right of the last of its inputs. Within a column nodes are ordered by the mean place of what they
are joined to, swept back and forth until nothing changes, so that few lines cross.
"""

from __future__ import annotations

import dataclasses
from collections import Counter
from html import escape
from typing import Any

from tangentry.pipeline.graph import Graph
from tangentry.pipeline.linking import Entry

WIDE, HIGH = 178, 54  # of a box
GAP_X, GAP_Y = 64, 26
MARGIN = 34
INK, PAPER, FAINT = "#20303c", "#fbfaf6", "#8a949b"
# State -> fill, edge: told apart by lightness too, and always by words.
LOOKS = {
    "failed": ("#f6d5cc", "#a8361c"),
    "blocked": ("#efe6e2", "#a8361c"),
    "faulty": ("#fae6c0", "#a56a00"),
    "ran": ("#d3e8e4", "#17665a"),
    "reused": ("#eef1ee", "#7d8b86"),
    "skipped": ("#ffffff", "#b9c0c3"),
    "": ("#ffffff", "#7d8b86"),
}
WORDS = {"skipped": "left out"}


@dataclasses.dataclass(frozen=True)
class Box:
    """A node in its place."""

    entry: Entry
    x: float
    y: float


def draw(graph: Graph, record: dict[str, Any] | None = None) -> str:
    """The graph as an SVG document; `record` is the last build's, in plain data."""
    states = _states(record or {})
    boxes = _place(graph)
    width = max(box.x for box in boxes.values()) + WIDE + MARGIN
    height = max(box.y for box in boxes.values()) + HIGH + MARGIN + 26
    lines = [
        _line(boxes[source.node], box, source.every) for box in boxes.values() for source in box.entry.inputs.values()
    ]
    shapes = [_box(box, states.get(name, Counter())) for name, box in boxes.items()]
    title = f"{graph.path.name}: {graph.about}" if graph.about else graph.path.name
    return "\n".join(
        [
            f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {width:.0f} {height:.0f}" width="{width:.0f}" height="{height:.0f}" font-family="Georgia, \'DejaVu Serif\', serif">',
            f'<rect width="100%" height="100%" fill="{PAPER}"/>',
            f'<text x="{MARGIN}" y="26" font-size="15" fill="{INK}">{escape(title)}</text>',
            *_sections(graph, boxes, height),
            *lines,
            *shapes,
            "</svg>\n",
        ]
    )


def _states(record: dict[str, Any]) -> dict[str, Counter[str]]:
    """How many assets ended in each state, by node."""
    states: dict[str, Counter[str]] = {}
    for asset in [*record.get("assets", ()), record.get("library", {})]:
        for step in asset.get("steps", ()):
            state = "faulty" if step.get("faulty") else step["state"]
            states.setdefault(step["node"], Counter())[state] += 1
    return states


def _place(graph: Graph) -> dict[str, Box]:
    entries = {**graph.per_asset, **graph.whole_library}
    column: dict[str, int] = {}
    for name, entry in entries.items():  # each section stands in an order in which it can run
        column[name] = 1 + max((column[source.node] for source in entry.inputs.values()), default=-1)
    columns: list[list[str]] = [[] for _ in range(max(column.values()) + 1)]
    for name, place in column.items():
        columns[place].append(name)
    joined: dict[str, list[str]] = {name: [] for name in entries}
    for name, entry in entries.items():
        for source in entry.inputs.values():
            joined[name].append(source.node)
            joined[source.node].append(name)
    row = {name: float(place) for names in columns for place, name in enumerate(names)}
    for sweep in range(24):
        for names in columns if sweep % 2 == 0 else reversed(columns):
            _settle(names, row, joined)
    lowest = min(row.values())
    return {
        name: Box(entry, MARGIN + column[name] * (WIDE + GAP_X), 58 + (row[name] - lowest) * (HIGH + GAP_Y))
        for name, entry in entries.items()
    }


def _settle(names: list[str], row: dict[str, float], joined: dict[str, list[str]]) -> None:
    """Move a column's nodes towards what they are joined to, one row apart at least."""
    wish = {
        name: sum(row[one] for one in joined[name]) / len(joined[name]) if joined[name] else row[name] for name in names
    }
    names.sort(key=lambda name: (wish[name], row[name]))
    floor = float("-inf")
    for name in names:
        row[name] = max(wish[name], floor)
        floor = row[name] + 1
    shift = sum(row[name] - wish[name] for name in names) / len(names)
    for name in names:
        row[name] -= shift


def _sections(graph: Graph, boxes: dict[str, Box], height: float) -> list[str]:
    """A word under each section, and a rule between them."""
    words = [
        f'<text x="{MARGIN}" y="{height - 12:.0f}" font-size="12" font-style="italic" fill="{FAINT}">once for each asset</text>'
    ]
    if graph.whole_library and graph.per_asset:
        x = min(boxes[name].x for name in graph.whole_library)
        words.append(
            f'<text x="{x:.0f}" y="{height - 12:.0f}" font-size="12" font-style="italic" fill="{FAINT}">once for the whole library</text>'
        )
    return words


def _line(start: Box, end: Box, every: bool) -> str:
    x1, y1, x2, y2 = start.x + WIDE, start.y + HIGH / 2, end.x, end.y + HIGH / 2
    bend = max(28.0, (x2 - x1) / 2)
    width = 3.2 if every else 1.3
    return f'<path d="M{x1:.1f} {y1:.1f} C{x1 + bend:.1f} {y1:.1f} {x2 - bend:.1f} {y2:.1f} {x2:.1f} {y2:.1f}" fill="none" stroke="{FAINT}" stroke-width="{width}"/>'


def _box(box: Box, states: Counter[str]) -> str:
    look = next((state for state in LOOKS if states[state]), "")
    fill, edge = LOOKS[look]
    told = ", ".join(f"{states[state]} {WORDS.get(state, state)}" for state in LOOKS if states[state])
    name, kind = box.entry.name, box.entry.kind.name
    title = f"{name}: {kind}" + (f" ({told})" if told else "")
    dash = ' stroke-dasharray="4 3"' if look in ("skipped", "blocked") else ""
    return (
        f'<g><title>{escape(title)}</title><rect x="{box.x:.1f}" y="{box.y:.1f}" width="{WIDE}" height="{HIGH}" rx="4" fill="{fill}" stroke="{edge}" stroke-width="1.2"{dash}/>'
        f'<text x="{box.x + 11:.1f}" y="{box.y + 21:.1f}" font-size="14" fill="{INK}">{escape(_cut(name, 22))}</text>'
        f'<text x="{box.x + WIDE - 11:.1f}" y="{box.y + 21:.1f}" font-size="11" text-anchor="end" font-style="italic" fill="{FAINT}">{escape(kind if len(name) + len(kind) < 25 else "")}</text>'
        f'<text x="{box.x + 11:.1f}" y="{box.y + 41:.1f}" font-size="11" fill="{edge}">{escape(told or kind)}</text></g>'
    )


def _cut(text: str, length: int) -> str:
    return text if len(text) <= length else text[: length - 1] + "\u2026"
