"""A graph as a picture: its nodes in columns from left to right, each with what the last build made of it, as SVG."""

from __future__ import annotations

from collections import Counter
from html import escape
from typing import Any

from tangentry.pipeline.arrange import Arrangement, Spot, arrange
from tangentry.pipeline.graph import Graph
from tangentry.pipeline.linking import Entry

WIDE, HIGH = 168, 62  # of a box
GAP = 52  # between columns
MARGIN, TOP, FOOT = 30, 52, 40
INK, PAPER, FAINT, RULE = "#20303c", "#fbfaf6", "#6b767d", "#c9cdc8"
# State -> fill, edge: told apart by lightness too, and always by words.
LOOKS = {
    "failed": ("#f6d5cc", "#a8361c"),
    "blocked": ("#efe6e2", "#a8361c"),
    "faulty": ("#fae6c0", "#8a5800"),
    "ran": ("#d3e8e4", "#17665a"),
    "reused": ("#eef1ee", "#5f6d68"),
    "skipped": ("#ffffff", "#8a949b"),
    "": ("#ffffff", "#6b767d"),
}
WORDS = {"skipped": "left out"}


def draw(graph: Graph, record: dict[str, Any] | None = None) -> str:
    """The graph as an SVG document; `record` is the last build's, in plain data."""
    entries = {**graph.per_asset, **graph.whole_library}
    inputs = {name: [source.node for source in entry.inputs.values()] for name, entry in entries.items()}
    arranged = arrange(inputs, frozenset(graph.whole_library))
    states = _states(record or {})
    width = 2 * MARGIN + (1 + max(arranged.column.values())) * (WIDE + GAP) - GAP
    height = TOP + (max(arranged.place.values()) + 0.5) * HIGH + FOOT
    title = f"{graph.path.name}: {graph.about}" if graph.about else graph.path.name
    return "\n".join(
        [
            f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {width} {height:.0f}" width="{width}" '
            f'height="{height:.0f}" font-family="Georgia, \'DejaVu Serif\', serif">',
            f'<rect width="100%" height="100%" fill="{PAPER}"/>',
            _text(MARGIN, 28, 15, INK, _cut(title, width // 8)),
            *_sections(graph, arranged, height),
            *_lines(graph, arranged),
            *(_box(entry, _corner(arranged, name), states.get(name, Counter())) for name, entry in entries.items()),
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


def _corner(arranged: Arrangement, spot: Spot) -> tuple[float, float]:
    """The left end of a spot's middle."""
    return MARGIN + arranged.column[spot] * (WIDE + GAP), TOP + arranged.place[spot] * HIGH


def _sections(graph: Graph, arranged: Arrangement, height: float) -> list[str]:
    """A word under each section, and a rule between them."""
    words = [("once for each asset", MARGIN)] if graph.per_asset else []
    rules = []
    if graph.whole_library:
        x = min(_corner(arranged, name)[0] for name in graph.whole_library)
        words.append(("once for the whole library", int(x)))
        if graph.per_asset:
            path = f"M{x - GAP / 2:.0f} {TOP - 8}V{height - 8:.0f}"
            rules.append(f'<path d="{path}" stroke="{RULE}" stroke-dasharray="2 4"/>')
    return rules + [_text(x, height - 12, 12, FAINT, word, italic=True) for word, x in words]


def _lines(graph: Graph, arranged: Arrangement) -> list[str]:
    """The lines between boxes; those that carry the values of all assets are thicker."""
    pieces = []
    for start, end in arranged.joints:
        (x1, y1), (x2, y2) = _corner(arranged, start), _corner(arranged, end)
        x1 += WIDE
        through = f"H{x2 + WIDE:.0f}" if isinstance(end, tuple) else ""
        path = (
            f"M{x1:.0f} {y1:.1f}C{(x1 + x2) / 2:.0f} {y1:.1f} {(x1 + x2) / 2:.0f} {y2:.1f} {x2:.0f} {y2:.1f}{through}"
        )
        from_asset = (start if isinstance(start, str) else start[0]) in graph.per_asset
        every = from_asset and arranged.leads_to[end] <= set(graph.whole_library)
        pieces.append(f'<path d="{path}" fill="none" stroke="{FAINT}" stroke-width="{2.8 if every else 1.2}"/>')
    return pieces


def _box(entry: Entry, corner: tuple[float, float], states: Counter[str]) -> str:
    x, y = corner[0], corner[1] - HIGH / 2
    look = next((state for state in LOOKS if states[state]), "")
    fill, edge = LOOKS[look]
    told = ", ".join(f"{states[state]} {WORDS.get(state, state)}" for state in LOOKS if states[state])
    title = f"{entry.name}: {entry.kind.name}" + (f" ({told})" if told else "")
    dash = ' stroke-dasharray="4 3"' if look in ("skipped", "blocked") else ""
    return (
        f'<g><title>{escape(title)}</title><rect x="{x:.0f}" y="{y:.1f}" width="{WIDE}" height="{HIGH}" rx="4" '
        f'fill="{fill}" stroke="{edge}" stroke-width="1.2"{dash}/>'
        + _text(x + 10, y + 20, 14, INK, _cut(entry.name, 20))
        + _text(x + 10, y + 36, 11, FAINT, _cut(entry.kind.name, 26), italic=True)
        + _text(x + 10, y + 52, 11, edge, _cut(told, 28))
        + "</g>"
    )


def _text(x: float, y: float, size: int, colour: str, words: str, italic: bool = False) -> str:
    style = ' font-style="italic"' if italic else ""
    return f'<text x="{x:.0f}" y="{y:.1f}" font-size="{size}" fill="{colour}"{style}>{escape(words)}</text>'


def _cut(text: str, length: int) -> str:
    return text if len(text) <= length else text[: length - 1] + "\u2026"
