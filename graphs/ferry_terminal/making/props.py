"""The props, each from its measures in metres."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from tangentry.graphs.ferry_terminal.making.modelling import Mesh, Place, each_part, oblong, with_stored_frames
from tangentry.nodes.model import Asset, Part, Stream
from tangentry.nodes.normals import normals
from tangentry.nodes.weld import weld


def bollard() -> Asset:
    """Cast iron, with a hard rim and a lid of one polygon with sixteen corners."""
    mesh = Mesh("bollard")
    mesh.lathe([(0.22, 0.0), (0.22, 0.06), (0.15, 0.10)], 16, (0.01, 0.01, 0.99, 0.15), "cast iron", 1)
    mesh.lathe([(0.15, 0.10), (0.13, 0.3), (0.13, 0.42), (0.16, 0.5)], 16, (0.01, 0.18, 0.99, 0.6), "cast iron", 2)
    mesh.lathe([(0.16, 0.5), (0.2, 0.53), (0.2, 0.57), (0.17, 0.6)], 16, (0.01, 0.63, 0.69, 0.74), "cast iron", 3)
    mesh.cap(0.17, 0.6, 16, (0.72, 0.63, 0.99, 0.9), "cast iron")
    return mesh.asset()


def life_ring(columns: int = 32, rows: int = 12) -> Asset:
    """A torus in two materials, each band unwrapped once and reused mirrored."""
    mesh = Mesh("life_ring")
    a, b = np.linspace(0, 2 * np.pi, columns + 1), np.linspace(0, 2 * np.pi, rows + 1)
    ring = np.stack(
        np.broadcast_arrays(
            (0.3 + 0.07 * np.cos(b)) * np.cos(a)[:, None],
            0.07 * np.sin(b),
            -(0.3 + 0.07 * np.cos(b)) * np.sin(a)[:, None],
        ),
        axis=-1,
    )
    step = columns // 8
    for band in range(8):
        part = ring[band * step : (band + 1) * step + 1]
        u = np.linspace(0, 1, step + 1) if band % 4 < 2 else np.linspace(1, 0, step + 1)
        low = 0.01 if band % 2 else 0.51
        uvs = np.stack(np.broadcast_arrays(0.01 + 0.98 * u[:, None], (low + 0.48 * b / (2 * np.pi))[None, :]), axis=-1)
        mesh.grid(part, uvs, "red canvas" if band % 2 else "white canvas", 1)
    return normals(weld(mesh.asset(), within=1e-6), method="angle")


def buoy() -> Asset:
    """A sphere, its poles degenerate as spheres' are."""
    mesh = Mesh("buoy")
    turn = np.linspace(-np.pi / 2, np.pi / 2, 17)
    profile = [(0.35 * max(np.cos(t), 0.0) if 0 < k < 16 else 0.0, 0.35 + 0.35 * np.sin(t)) for k, t in enumerate(turn)]
    mesh.lathe(profile, 32, (0.01, 0.01, 0.99, 0.99), "painted steel", collapsed=True)
    return mesh.asset()


def crate() -> Asset:
    """Planks: opposite sides share a chart, one of them mirrored; a height map of wood grain goes with it."""
    mesh = Mesh("crate")
    mesh.box((-0.4, 0.0, -0.4), (0.4, 0.6, 0.4), "planks", stacked=True)
    return mesh.asset()


def quay_slab() -> Asset:
    """Two metres of quay, its cobbles in a height map of 16 bits; open below, where nobody looks."""
    mesh = Mesh("quay_slab")
    wide, deep = 2.0, 0.15
    mesh.points = [(x, y, z) for y in (-deep, 0.0) for x, z in ((-1.0, 1.0), (1.0, 1.0), (1.0, -1.0), (-1.0, -1.0))]
    mesh.panel([4, 5, 6, 7], oblong(wide, wide), "cobbles")
    for side in range(4):
        after = (side + 1) % 4
        mesh.panel([side, after, 4 + after, 4 + side], oblong(wide, deep), "cobbles")
    return mesh.asset()


def stair() -> Asset:
    """Five steps, hard edged: treads and risers in materials of their own, the flanks one polygon each."""
    mesh = Mesh("stair")
    for step in range(5):
        y, z = 0.18 * step, -0.3 * step
        for name, tall, corners in (
            ("risers", 0.18, [(-0.6, y, z), (0.6, y, z), (0.6, y + 0.18, z), (-0.6, y + 0.18, z)]),
            (
                "treads",
                0.3,
                [(-0.6, y + 0.18, z), (0.6, y + 0.18, z), (0.6, y + 0.18, z - 0.3), (-0.6, y + 0.18, z - 0.3)],
            ),
        ):
            mesh.panel(mesh.placed(corners), oblong(1.2, tall), name)
    outline = [(0.0, 0.0)]
    for step in range(5):
        outline += [(-0.3 * step, 0.18 * (step + 1)), (-0.3 * (step + 1), 0.18 * (step + 1))]
    outline.append((-1.5, 0.0))
    for x in (0.6, -0.6):
        ring = mesh.placed([(x, y, z) for z, y in outline])
        flat = [(-z if x > 0 else z, y) for z, y in outline]
        mesh.panel(ring[::-1] if x > 0 else ring, flat[::-1] if x > 0 else flat, "flanks")
    return mesh.asset()


def lantern() -> Asset:
    """A post, a glass and a hood; a second UV set for baked light."""
    mesh = Mesh("lantern")
    mesh.lathe([(0.09, 0.0), (0.09, 0.05), (0.035, 0.12), (0.03, 2.4)], 12, (0.01, 0.01, 0.48, 0.99), "green paint")
    mesh.lathe([(0.06, 2.4), (0.11, 2.45), (0.11, 2.7), (0.07, 2.75)], 12, (0.52, 0.01, 0.99, 0.45), "glass")
    mesh.lathe([(0.15, 2.75), (0.09, 2.85), (0.02, 2.92), (0.0, 2.95)], 12, (0.52, 0.5, 0.99, 0.99), "green paint", 2)

    def with_light(part: Part) -> Part:
        (uv,) = part.uvs
        return replace(part, uvs=(uv, Stream(uv.values * np.float32(0.5), uv.index)))

    return each_part(mesh.asset(), with_light)


def bench() -> Asset:
    """Three slats on two legs."""
    mesh = Mesh("bench")
    for z in (-0.2, -0.06, 0.08):
        mesh.box((-0.7, 0.42, z), (0.7, 0.46, z + 0.12), "oak")
    for x in (-0.55, 0.47):
        mesh.box((x, 0.0, -0.18), (x + 0.08, 0.42, 0.18), "wrought iron")
    return mesh.asset()


def oar() -> Asset:
    """A shaft and a blade, both halves of each on one chart, mirrored."""
    mesh = Mesh("oar")
    mesh.lathe(
        [(0.018, 0.0), (0.022, 0.2), (0.025, 1.6), (0.02, 1.9)],
        16,
        (0.01, 0.01, 0.05, 0.99),
        "ash wood",
        1,
        mirrored=True,
    )
    blade = [(0.02, 1.9), (0.06, 2.0), (0.08, 2.2), (0.07, 2.45), (0.03, 2.5)]
    mesh.lathe(blade, 16, (0.08, 0.01, 0.18, 0.32), "ash wood", 2, mirrored=True)

    def flat(part: Part) -> Part:
        x, y, z = part.points.values.T
        thin = np.where(y > 1.9, np.maximum(0.25, 1 - (y - 1.9) * 7), 1).astype(np.float32)
        return replace(part, points=Stream(np.stack([x, y, z * thin], axis=1), part.points.index))

    return normals(each_part(mesh.asset(), flat), method="angle")


def ticket_kiosk() -> Asset:
    """A house for one, its gables polygons of five corners, in three materials."""
    mesh = Mesh("ticket_kiosk")
    w, h, top, d = 0.9, 2.1, 2.7, 0.8
    outline = [(-w, 0.0), (w, 0.0), (w, h), (0.0, top), (-w, h)]
    for z, flip in ((d, 1), (-d, -1)):
        mesh.panel(mesh.placed([(x * flip, y, z) for x, y in outline]), outline, "boards")
    slope = float(np.hypot(w, top - h))
    for flip in (1, -1):
        x, z = w * flip, d * flip
        mesh.panel(mesh.placed([(x, 0.0, z), (x, 0.0, -z), (x, h, -z), (x, h, z)]), oblong(2 * d, h), "plaster")
        roof = [(x, h, z), (x, h, -z), (0.0, top, -z), (0.0, top, z)]
        mesh.panel(mesh.placed(roof), oblong(2 * d, slope), "shingles")
    return mesh.asset()


def cleat(fine: int = 1) -> Asset:
    """A mooring cleat: a foot and a horn. `fine` multiplies its resolution, and its detailed twin has a dented foot.

    Each is a part of its own name: baked by name, the foot does not see the horn that passes through its top.
    """
    foot, horn = Mesh("foot"), Mesh("horn")
    around = [(0.07, 0.0), (0.068, 0.02), (0.05, 0.04), (0.03, 0.07)]
    along = [(0.0, -0.16), (0.012, -0.155), (0.02, -0.1), (0.026, 0.0), (0.02, 0.1), (0.012, 0.155), (0.0, 0.16)]
    foot.lathe(_refined(around, fine), 12 * fine, (0.01, 0.01, 0.99, 0.29), "galvanised steel", 1)
    horn.lathe(_refined(along, fine), 12 * fine, (0.01, 0.32, 0.25, 0.99), "galvanised steel", 2)
    horn.points = [(y, 0.085 - x, z) for x, y, z in horn.points]
    if fine > 1:
        foot.points = [(x * _dent(x, y, z), y, z * _dent(x, y, z)) for x, y, z in foot.points]
    base = foot.asset()
    return replace(base, name="cleat", parts=(*base.parts, *horn.asset().parts))


def _refined(profile: list[Place], fine: int) -> list[Place]:
    at, wanted = np.arange(len(profile)), np.linspace(0, len(profile) - 1, (len(profile) - 1) * fine + 1)
    radius, height = (np.interp(wanted, at, column).tolist() for column in zip(*profile, strict=True))
    return list(zip(radius, height, strict=True))


def _dent(x: float, y: float, z: float) -> float:
    return 1 - 0.02 * float(np.exp(-((y - 0.02) ** 2) / 2e-4)) * (1 + float(np.cos(9 * np.arctan2(z, x)))) / 2


def mooring_post() -> Asset:
    """A post of hammered timber, with a cap."""
    mesh = Mesh("mooring_post")
    mesh.lathe([(0.15, 0.0), (0.16, 0.8), (0.15, 1.5)], 20, (0.01, 0.01, 0.99, 0.69), "timber", 1)
    mesh.lathe([(0.17, 1.5), (0.16, 1.56), (0.08, 1.62), (0.0, 1.64)], 20, (0.01, 0.72, 0.99, 0.99), "timber", 2)
    return mesh.asset()


def gangway() -> Asset:
    """A ramp with two rails, in two materials; it brings the tangents it was made with."""
    mesh = Mesh("gangway")
    mesh.box((-0.6, 0.0, -2.0), (0.6, 0.08, 2.0), "decking")
    for x in (-0.6, 0.55):
        mesh.box((x, 0.9, -2.0), (x + 0.05, 0.95, 2.0), "rail")
        for z in (-1.9, -0.02, 1.86):
            mesh.box((x, 0.08, z), (x + 0.05, 0.9, z + 0.05), "rail")
    return with_stored_frames(mesh.asset())
