"""UV layouts as pictures: a tile for each material, charts in quiet tints, findings in the colour of their severity.

Tiles are drawn at three times their size from the owner of every pixel, and made smaller by averaging, so every line
is smooth. Faces too small to see get a ring around them.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from PIL import Image, ImageDraw, ImageFont
from tangentry.nodes.checks.view import View, views_of
from tangentry.nodes.geometry.texels import image_places, texel_owners
from tangentry.nodes.model import Asset
from tangentry.pipeline.flow import Array, Finding

FINE = 3  # pixels drawn for each that is kept, along a side
PAPER, TILE, GRID, INK, QUIET = (245, 243, 238), (253, 252, 250), (236, 233, 226), (43, 48, 58), (122, 127, 136)
BORDER = (92, 101, 118)
SEVERITY = {"fault": (200, 46, 38), "warning": (232, 146, 20), "note": (74, 132, 196)}
RANK = {"note": 1, "warning": 2, "fault": 3}
SEEN = 40  # pixels that a marked face must have to be seen without a ring
REPEATS, LAYERS = 16.0, 100.0  # tiles that a triangle may span to be drawn, and that all may span together
MOST_MARKS = 20000  # lines or dots drawn for a finding; of more, evenly chosen ones


class Mark(NamedTuple):
    """A finding in one of the views of a sheet."""

    view: int
    finding: Finding
    severity: str


class Sheet(NamedTuple):
    """The parts that share a tile, and what was found on them."""

    material: str
    views: list[View]
    marks: list[Mark]


def sheets_of(asset: Asset, items: tuple[Finding, ...], ids: tuple[str, ...]) -> list[Sheet]:
    """A sheet for each material that has parts with UVs; marks of the worst findings come last."""
    groups: dict[str, list[View]] = {}
    for view in views_of(asset):
        if view.uv is not None:
            groups.setdefault(asset.materials[view.part.material].name if view.part.material >= 0 else "", []).append(
                view
            )
    return [Sheet(material, views, _marks(views, material, items, ids)) for material, views in groups.items()]


def _marks(views: list[View], material: str, items: tuple[Finding, ...], ids: tuple[str, ...]) -> list[Mark]:
    marks = [
        Mark(number, item, "note" if item.accepted else item.severity)
        for item in items
        if item.material == material and item.element in ("face", "corner") and (not ids or item.id in ids)
        for number, view in enumerate(views)
        if view.part.name == item.part
        and int(item.elements.max(initial=-1))
        < (view.part.face_count if item.element == "face" else view.part.corner_count)
    ]
    return sorted(marks, key=lambda mark: RANK[mark.severity])


def drawn(title: str, sheets: list[Sheet], size: int) -> Array:
    """The picture of sheets side by side, with a title and a legend: (height, width, 3) uint8."""
    columns = int(np.ceil(np.sqrt(len(sheets))))
    tile = size if columns == 1 else max(384, size // columns)
    unit = max(12, min(tile, 1024) // 56)  # the height of text, and what spaces are measured in
    panels = [_panel(sheet, tile, unit) for sheet in sheets]
    gap = 2 * unit
    row_heights = [max(panel.height for panel in panels[k : k + columns]) for k in range(0, len(panels), columns)]
    width = gap + columns * (tile + gap)
    picture = Image.new("RGB", (width, 5 * unit + sum(height + gap for height in row_heights)), PAPER)
    pen = ImageDraw.Draw(picture)
    pen.text((gap, 2 * unit), _fitted(title, 1.5 * unit, width - 2 * gap), INK, _font(1.5 * unit), anchor="lm")
    y = 4 * unit
    for row, height in enumerate(row_heights):
        for column, panel in enumerate(panels[row * columns : (row + 1) * columns]):
            picture.paste(panel, (gap + column * (tile + gap), y))
        y += height + gap
    return np.asarray(picture)


def _font(size: float) -> ImageFont.FreeTypeFont | ImageFont.ImageFont:
    return ImageFont.load_default(size)


def _fitted(text: str, size: float, width: int) -> str:
    """The text, shortened where it is wider than its place."""
    font = _font(size)
    if font.getlength(text) <= width:
        return text
    while text and font.getlength(text + "…") > width:
        text = text[:-1]
    return text.rstrip() + "…"


def _panel(sheet: Sheet, tile: int, unit: int) -> Image.Image:
    faces = sum(view.part.face_count for view in sheet.views)
    charts = sum(view.chart_count for view in sheet.views)
    lines = _legend(sheet)
    panel = Image.new("RGB", (tile, 2 * unit + tile + (unit + 2 * unit * len(lines) if lines else 0)), PAPER)
    pen = ImageDraw.Draw(panel)
    counts = f"{faces:,} faces, {charts:,} charts"
    room = tile - int(_font(unit).getlength(counts)) - unit
    pen.text((0, unit // 2), _fitted(sheet.material or "no material", unit, room), INK, _font(unit), anchor="lm")
    pen.text((tile, unit // 2), counts, QUIET, _font(unit), anchor="rm")
    panel.paste(_tile(sheet, tile, unit), (0, 2 * unit))
    y = 2 * unit + tile + 2 * unit
    for severity, id, count, what in lines:
        pen.rounded_rectangle((0, y - unit // 2, unit, y + unit // 2), unit // 4, SEVERITY[severity])
        pen.text((2 * unit, y), f"{count:,}", INK, _font(unit), anchor="lm")
        pen.text((6 * unit, y), id, INK, _font(unit), anchor="lm")
        after = max(18 * unit, 7 * unit + int(_font(unit).getlength(id)))
        if tile - after > 12 * unit:
            pen.text((after, y), _fitted(what, unit, tile - after), QUIET, _font(unit), anchor="lm")
        y += 2 * unit
    return panel


def _legend(sheet: Sheet) -> list[tuple[str, str, int, str]]:
    """A line for each finding of the sheet, the worst first: severity, id, count over all its parts, what."""
    lines: dict[tuple[str, str], tuple[str, str, int, str]] = {}
    for mark in reversed(sheet.marks):
        key = (mark.severity, mark.finding.id)
        count = lines[key][2] if key in lines else 0
        lines[key] = (
            mark.severity,
            mark.finding.id,
            count + mark.finding.count,
            mark.finding.accepted or mark.finding.what,
        )
    return list(lines.values())


def _tile(sheet: Sheet, tile: int, unit: int) -> Image.Image:
    fine = tile * FINE
    guilty = [np.zeros(view.part.face_count, np.int8) for view in sheet.views]
    for mark in sheet.marks:
        if mark.finding.element == "face":
            guilty[mark.view][mark.finding.elements] = RANK[mark.severity]
    places = np.concatenate([_places(view)[view.triangles] for view in sheet.views])
    face = np.concatenate(_counted([view.face for view in sheet.views], [v.part.face_count for v in sheet.views]))
    rank = np.concatenate(guilty)[face]
    chart = np.concatenate(_counted([v.chart[v.face] for v in sheet.views], [v.chart_count for v in sheet.views]))
    order = _not_too_many(np.argsort(-rank, kind="stable"), places)  # whoever comes first owns the texel
    owner = texel_owners(places[order], fine, fine).triangle
    owner = np.where(owner >= 0, order[owner], -1)
    canvas = Image.fromarray(_painted(owner, face, chart, rank))
    pen = ImageDraw.Draw(canvas)
    shown = np.bincount(face[owner[owner >= 0]], minlength=int(face.max(initial=-1)) + 1) // FINE**2
    _rings(pen, places, face, rank, shown, fine, unit * FINE)
    for mark in sheet.marks:
        if mark.finding.element == "corner":
            _corners(pen, sheet.views[mark.view], mark, fine)
    smaller = canvas.reduce(FINE)
    ImageDraw.Draw(smaller).rectangle((0, 0, tile - 1, tile - 1), outline=BORDER)
    return smaller


def _not_too_many(order: Array, places: Array) -> Array:
    """The triangles to draw: not those that repeat all over the tile, nor those far below many others."""
    extent = np.prod(places.max(axis=1) - places.min(axis=1), axis=1)[order]
    few = order[extent <= REPEATS]
    layers = np.cumsum(extent[extent <= REPEATS])
    return few[layers <= LAYERS]


def _counted(each: list[Array], counts: list[int]) -> list[Array]:
    """Numbers that go on from one view to the next; negative ones stay."""
    starts = np.cumsum([0, *counts])[:-1]
    return [np.where(one >= 0, one + start, one) for one, start in zip(each, starts, strict=True)]


def _places(view: View) -> Array:
    """(corners, 2): where corners lie in the image, in shares of its sides from its top left corner."""
    assert view.uv is not None
    return image_places(view.uv.values[view.uv.index], view.asset.v_down)


def _tints(count: int) -> Array:
    """(count, 3) quiet colours of equal lightness, neighbours far apart in hue (by the golden section)."""
    angle = 2 * np.pi * ((np.arange(count) * 0.61803398875) % 1)
    shift = np.stack([np.cos(angle), np.cos(angle - 2.1), np.cos(angle + 2.1)], axis=1)
    return np.array([214, 219, 224]) + 13 * shift


def _painted(owner: Array, face: Array, chart: Array, rank: Array) -> Array:
    """(height, width, 3) uint8: paper and grid, charts, guilty faces, and the lines between faces and around charts."""
    tints = _tints(max(int(chart.max(initial=0)) + 1, 1))
    colour = np.where((chart >= 0)[:, None], tints[chart], 200.0)
    severe = np.array([(0, 0, 0), SEVERITY["note"], SEVERITY["warning"], SEVERITY["fault"]], float)
    weight = np.array([0, 0.45, 0.8, 0.9])[rank][:, None]
    colour = (1 - weight) * colour + weight * severe[rank]
    palette = np.concatenate([colour, [TILE]]).round().astype(np.uint8)
    picture = palette[owner]
    _draw_grid(picture, owner < 0)
    face_of, chart_of = np.append(face, -1)[owner], np.append(chart, -2)[owner]
    if (owner >= 0).sum() > 150 * FINE * max(len(np.unique(face)), 1):
        picture[_changes(face_of)] = (picture[_changes(face_of)] * np.float32(0.82)).astype(np.uint8)
    border = _changes(chart_of)
    border[1:] |= border[:-1].copy()
    border[:, 1:] |= border[:, :-1].copy()
    picture[border] = BORDER
    return picture


def _draw_grid(picture: Array, free: Array) -> None:
    """Eighths of the tile, where no face is."""
    size = len(picture)
    for k in range(1, 8):
        line = slice(k * size // 8 - 1, k * size // 8 + 1)
        picture[line][free[line]] = GRID
        picture[:, line][free[:, line]] = GRID


def _changes(label: Array) -> Array:
    """(height, width) bool: pixels that differ from the one to the right or below."""
    change = np.zeros(label.shape, bool)
    change[:, :-1] = label[:, :-1] != label[:, 1:]
    change[:-1] |= label[:-1] != label[1:]
    return change


def _rings(
    pen: ImageDraw.ImageDraw, places: Array, face: Array, rank: Array, shown: Array, fine: int, unit: int
) -> None:
    """A ring around guilty faces that are hardly seen, one for all that lie close together; notes do without."""
    small = np.flatnonzero((rank > RANK["note"]) & (shown[face] < SEEN) & np.isfinite(places).all(axis=(1, 2)))
    centre = np.mod(places[small].mean(axis=1), 1) * fine
    cell = np.floor(centre / (1.5 * unit)).astype(np.int64)
    _, first, group = np.unique(cell, axis=0, return_index=True, return_inverse=True)
    worst = np.zeros(len(first), np.int8)
    np.maximum.at(worst, group.ravel(), rank[small])
    names = {rank: name for name, rank in RANK.items()}
    for k in range(len(first)):
        x, y = centre[group.ravel() == k].mean(axis=0) if len(first) < 1000 else centre[first[k]]
        box = (x - 0.7 * unit, y - 0.7 * unit, x + 0.7 * unit, y + 0.7 * unit)
        pen.ellipse(box, outline=SEVERITY[names[int(worst[k])]], width=2 * FINE)


def _corners(pen: ImageDraw.ImageDraw, view: View, mark: Mark, fine: int) -> None:
    """Guilty edges as lines, guilty corners as dots."""
    corners = mark.finding.elements
    if len(corners) > MOST_MARKS:
        corners = corners[np.linspace(0, len(corners) - 1, MOST_MARKS).astype(np.int64)]
    places = _places(view)
    start, end = places[corners], places[view.edges.following[corners]]
    sound = np.isfinite(start).all(axis=1) & np.isfinite(end).all(axis=1)
    tile = np.floor((start + end) / 2)[sound]
    start, end = (start[sound] - tile) * fine, (end[sound] - tile) * fine
    colour, r = SEVERITY[mark.severity], 1.5 * FINE
    if mark.finding.id.startswith(("edge-", "winding-", "uv-gutter")):
        for a, b in zip(start.tolist(), end.tolist(), strict=True):
            pen.line((*a, *b), colour, 2 * FINE)
    else:
        for x, y in start.tolist():
            pen.ellipse((x - r, y - r, x + r, y + r), colour)
