"""Height maps, and a colour texture for each material."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from tangentry.graphs.ferry_terminal.making.modelling import TEXTURE
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.model import Asset, Image, MapUse, Material
from tangentry.pipeline.flow import Array

# A pattern of light and dark for each material, and the bands painted over it, each from a height v upward.
Colour = tuple[int, int, int]
PAINT: dict[str, tuple[str, list[tuple[float, Colour]]]] = {
    "ash wood": ("upright grain", [(0, (206, 170, 118)), (0.9, (186, 52, 44)), (0.955, (206, 170, 118))]),
    "boards": ("planks", [(0, (74, 122, 138))]),
    "cast iron": ("worn", [(0, (62, 66, 72)), (0.62, (214, 170, 52))]),
    "cobbles": ("stones", [(0, (182, 178, 170))]),
    "decking": ("narrow planks", [(0, (168, 132, 92))]),
    "flanks": ("worn", [(0, (128, 126, 122))]),
    "galvanised steel": ("worn", [(0, (158, 168, 176))]),
    "glass": ("worn", [(0, (250, 214, 130))]),
    "green paint": ("worn", [(0, (34, 84, 66))]),
    "oak": ("grain", [(0, (176, 128, 76))]),
    "painted steel": ("worn", [(0, (178, 40, 36)), (0.42, (232, 226, 212)), (0.6, (178, 40, 36))]),
    "planks": ("planks", [(0, (182, 138, 88))]),
    "plaster": ("worn", [(0, (226, 214, 190))]),
    "rail": ("worn", [(0, (226, 226, 220))]),
    "red canvas": ("worn", [(0, (196, 44, 38))]),
    "risers": ("worn", [(0, (112, 110, 106))]),
    "shingles": ("courses", [(0, (142, 62, 48))]),
    "timber": ("upright grain", [(0, (72, 58, 46)), (0.12, (112, 86, 60)), (0.7, (230, 226, 214))]),
    "treads": ("worn", [(0, (170, 166, 156))]),
    "white canvas": ("worn", [(0, (240, 236, 226))]),
    "wrought iron": ("worn", [(0, (54, 58, 62))]),
}


def cobbles(size: int = 256, across: int = 14) -> Array:
    """(size, size, 1) uint16: rounded stones in staggered rows; it tiles."""
    x, y = _texel_centres(size)
    row = np.floor(y * across).astype(int)
    along = x * across + 0.5 * (row % 2)
    dx, dy = along % 1 - 0.5, y * across % 1 - 0.5
    lift = np.random.default_rng(7).uniform(0.7, 1.0, (across, across))[row, along.astype(int) % across]
    dome = np.clip(1 - (np.abs(dx) / 0.47) ** 4, 0, 1) * np.clip(1 - (np.abs(dy) / 0.47) ** 4, 0, 1)
    return np.rint(np.sqrt(dome) * lift * 65535).astype(np.uint16)[..., None]


def wood_grain(size: int = 256, planks: int = 12) -> Array:
    """(size, size, 1) uint8: planks along x with a gap between, the grain in gentle waves; it tiles."""
    x, y = _texel_centres(size)
    bend = 0.02 * np.sin(2 * np.pi * x) + 0.01 * np.sin(6 * np.pi * x + 1)
    grain = 0.6 + 0.2 * np.sin(2 * np.pi * 16 * (y + bend)) + 0.15 * np.sin(2 * np.pi * 37 * (y + bend) + 2)
    gap = np.minimum(1, (0.5 - np.abs(y * planks % 1 - 0.5)) * 10)
    return np.rint(np.clip(grain, 0, 1) * gap * 255).astype(np.uint8)[..., None]


def paint(name: str, size: int = TEXTURE) -> Array:
    """(size, size, 3) uint8: the colour texture of a material."""
    pattern, bands = PAINT[name]
    _, y = _texel_centres(size)
    colour = np.empty((size, size, 3))
    for low, tint in bands:
        colour[1 - y[:, 0] >= low] = tint
    if name == "boards":
        ticket_window(colour)
    return np.rint(np.clip(colour * shade(pattern, size)[..., None], 0, 255)).astype(np.uint8)


def shade(pattern: str, size: int) -> Array:
    """(size, size) float64 about 1: how light a material is, texel by texel; it tiles."""
    if pattern == "stones":
        return 0.45 + 0.6 * cobbles(size)[..., 0] / 65535
    if pattern.endswith(("grain", "planks")):
        grain = wood_grain(size, {"planks": 12, "narrow planks": 32}.get(pattern, 1))[..., 0] / 255
        return 0.7 + 0.4 * (grain.T if "upright" in pattern else grain)
    x, y = _texel_centres(size)
    worn = 1 + 0.04 * sum(
        np.sin(2 * np.pi * (a * x + b * y) + c) for a, b, c in ((3, 1, 0), (-2, 5, 1), (7, 4, 2), (5, -9, 3))
    )
    if pattern == "courses":
        row = np.floor(y * 24)
        joint = (0.5 - np.abs((x * 16 + 0.5 * (row % 2)) % 1 - 0.5)) * 8
        return worn * (0.6 + 0.4 * np.minimum(1, np.minimum(joint, (1 - y * 24 % 1) * 4)))
    return worn


def ticket_window(colour: Array) -> None:
    """Paint a window with a sill, and a door, into the charts of the kiosk's gables."""
    for (u0, v0, u1, v1), tint in (
        ((0.145, 0.26, 0.355, 0.50), (236, 228, 206)),
        ((0.157, 0.28, 0.343, 0.488), (38, 52, 66)),
        ((0.658, 0.01, 0.842, 0.53), (236, 228, 206)),
        ((0.67, 0.01, 0.83, 0.518), (122, 58, 44)),
    ):
        x, y = _texel_centres(len(colour))
        colour[((x > u0) & (x < u1) & (1 - y > v0) & (1 - y < v1))] = tint


def painted(asset: Asset) -> Asset:
    """The asset with a colour texture in each material."""
    names = [one.name for one in asset.materials]
    return replace(
        asset,
        materials=tuple(Material(name, (MapUse("colour", row),)) for row, name in enumerate(names)),
        images=tuple(Image(f"{name.replace(' ', '_')}.png", "image/png", write_png(paint(name))) for name in names),
    )


def _texel_centres(size: int) -> tuple[Array, Array]:
    """x rightward and y downward, 0 to 1, of every texel."""
    at = (np.arange(size) + 0.5) / size
    return at[None, :], at[:, None]
