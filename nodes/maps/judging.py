"""What is wrong with a normal map, as its own texels tell.

All of it is common practice, no source, but for the green test (see conventions.py). Shares are of all texels; of maps
larger than 4096 x 4096, of bands of rows spread evenly over them, that many texels together.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from tangentry.nodes.maps.conventions import measure_green
from tangentry.nodes.model import Sheet
from tangentry.pipeline.flow import Array, Finding

MAP_IDS = (
    "map-two-channel",
    "map-height",
    "map-object-space",
    "map-negative-z",
    "map-unnormalised",
    "map-srgb",
    "map-tagged-srgb",
    "map-lossy",
    "map-blocky",
    "map-flat-offset",
    "map-green-contradicted",
    "map-green-undecided",
    "map-size",
    "map-error",
)
GREY = 2 / 255  # by which the channels of a grey texel may differ
OFF = 0.1  # by which a vector's length may differ from 1
MOST, BAND = 4096 * 4096, 64  # texels that are looked at, and rows of a band, which whole blocks of any size fit into
BLOCKS = 1.4  # times that steps across borders of blocks may exceed those within


@dataclass(frozen=True)
class Judged:
    """A sheet of unorm or float normals under judgement."""

    sheet: Sheet

    @cached_property
    def texels(self) -> Array:
        """(rows, width, channels): the sheet's own, of a large one bands of rows."""
        height, width = self.sheet.texels.shape[:2]
        if height * width <= MOST or height < 2 * BAND:
            return self.sheet.texels
        bands = np.unique(np.linspace(0, height // BAND - 1, max(1, MOST // (BAND * width))).astype(int))
        return self.sheet.texels[(bands[:, None] * BAND + np.arange(BAND)).ravel()]

    @cached_property
    def codes(self) -> Array:
        """(rows, width, 3) float32: channels as 0..1."""
        texels = self.texels[..., :3]
        if texels.dtype.kind == "f":
            return np.asarray((texels + 1) / 2, np.float32)
        return texels.astype(np.float32) / np.float32(np.iinfo(texels.dtype).max)

    @cached_property
    def vectors(self) -> Array:
        """(rows, width, 3) float32, as they are."""
        return self.codes * 2 - 1

    @cached_property
    def length(self) -> Array:
        """(rows, width) float32."""
        return np.asarray(np.sqrt(np.einsum("...i,...i->...", self.vectors, self.vectors)))

    @cached_property
    def varies(self) -> Array:
        """(3,) float64: the standard deviation of each channel, in 0..1."""
        return self.codes.std(axis=(0, 1), dtype=np.float64)

    @cached_property
    def flat(self) -> Array:
        """(2,): the value of red and green that most texels have."""
        steps = np.rint(self.codes[..., :2] * 255).astype(np.uint8).reshape(-1, 2)
        return np.array([np.bincount(steps[:, k], minlength=256).argmax() for k in (0, 1)]) / 255


def map_findings(sheet: Sheet) -> Iterator[Finding]:
    """Findings on a sheet of tangent-space normals; one that is no such thing at all gives that finding alone."""
    yield from _of_the_file(sheet)
    if sheet.encoding not in ("unorm", "float") or sheet.space == "object" or sheet.texels.shape[2] < 3:
        return
    judged = Judged(sheet)
    kind = next(_other_kinds(judged), None)
    if kind is not None:
        yield kind
        return
    yield from _vectors(judged)
    yield from _codes(judged)
    yield from _green(judged)


def _of_the_file(sheet: Sheet) -> Iterator[Finding]:
    if sheet.tagged == "sRGB":
        advice = "save it without a colour profile: it holds no colours"
        yield _finding(sheet, "map-tagged-srgb", "note", "the file says that its texels are sRGB colours", advice)
    if sheet.tagged == "lossy":
        yield _finding(
            sheet, "map-lossy", "warning", "the file was compressed with losses", "export it as PNG, TIFF or EXR"
        )


def _other_kinds(judged: Judged) -> Iterator[Finding]:
    sheet, codes = judged.sheet, judged.codes
    spread = np.abs(codes.max(axis=2) - codes.min(axis=2))
    grey = float((spread <= GREY).mean())
    if grey > 0.98:
        yield _finding(
            sheet,
            "map-height",
            "fault",
            f"{grey:.0%} of the texels are grey: it is a height map",
            "turn it into normals: relief",
            grey,
            0.98,
        )
    srgb = _srgb(judged)
    if srgb > 0:
        yield _finding(
            sheet,
            "map-srgb",
            "fault",
            f"{srgb:.0%} of the normals are not unit until an sRGB curve is undone: they were converted as colours are",
            "export it as linear data",
            srgb,
        )
    if _two_channels(judged):
        yield _finding(
            sheet,
            "map-two-channel",
            "fault",
            "blue is the same everywhere: directions lie in red and green",
            "state it: texture, encoding: xy",
        )
    behind = _share(judged.vectors[..., 2] < -0.05)
    if behind > 0.1 and _share(np.abs(judged.length - 1) > OFF) < 0.5:
        yield _finding(
            sheet,
            "map-object-space",
            "fault",
            f"{behind:.0%} of the normals point backward: they are those of the mesh itself, not of its frames",
            "re-encode it: reencode, made_for: object",
            behind,
            0.1,
        )


def _vectors(judged: Judged) -> Iterator[Finding]:
    sheet = judged.sheet
    behind = _share(judged.vectors[..., 2] < -0.02)
    if behind > 0:
        yield _finding(
            sheet,
            "map-negative-z",
            "warning",
            f"{behind:.2%} of the normals point into the surface",
            "bake it again, or clamp them",
            behind,
            0.0,
        )
    off = _share(np.abs(judged.length - 1) > OFF)
    if off > 0.02:
        middle = float(np.median(judged.length))
        yield _finding(
            sheet,
            "map-unnormalised",
            "warning",
            f"{off:.1%} of the normals are more than {OFF:g} away from length 1 (median {middle:.3f})",
            "make them unit: decode, then encode",
            off,
            0.02,
        )


def _codes(judged: Judged) -> Iterator[Finding]:
    sheet = judged.sheet
    if sheet.texels.dtype == np.uint8 and (np.abs(judged.flat * 255 - 127.5) < 4).all():
        flat = np.rint(judged.flat * 255).astype(int)
        if (flat != 128).any() and _share((judged.texels[..., :2] == flat).all(axis=2)) > 0.05:
            yield _finding(
                sheet,
                "map-flat-offset",
                "note",
                f"flat is ({flat[0]}, {flat[1]}) where 128 is usual",
                "round codes when exporting",
            )
    ratio, size = _blocks(judged.codes, judged.texels is not sheet.texels)
    if ratio > BLOCKS:
        yield _finding(
            sheet,
            "map-blocky",
            "warning",
            f"steps between blocks of {size} x {size} are {ratio:.2f} times those within them",
            "export it from its source without compression",
            ratio,
            BLOCKS,
        )


def _srgb(judged: Judged) -> float:
    """The share of texels that are no unit normals, if undoing an sRGB curve makes them so and centres them; else 0."""
    off = _share(np.abs(judged.length - 1) > OFF)
    if off < 0.5:
        return 0.0
    for curve in (_linear, _encoded):
        vectors = curve(np.clip(judged.codes, 0, 1)) * 2 - 1
        length = np.sqrt(np.einsum("...i,...i->...", vectors, vectors))
        centred = (np.abs(vectors[..., :2].mean(axis=(0, 1))) < 0.15).all()
        if centred and _share(np.abs(length - 1) > OFF) < 0.4 * off:
            return off
    return 0.0


def _encoded(x: Array) -> Array:
    """IEC 61966-2-1, linear 0..1 to sRGB."""
    return np.where(x <= 0.0031308, 12.92 * x, 1.055 * x ** np.float32(1 / 2.4) - 0.055)


def _linear(x: Array) -> Array:
    """Its inverse."""
    return np.where(x <= 0.04045, x / 12.92, ((x + 0.055) / 1.055) ** np.float32(2.4))


def _two_channels(judged: Judged) -> bool:
    """Is blue empty, half or full everywhere, though red and green ask for another z?"""
    blue = float(judged.codes[..., 2].mean(dtype=np.float64))
    if judged.varies[2] >= 0.004 or judged.varies[:2].max() < 0.004 or min(abs(blue - k) for k in (0, 0.5, 1)) > 0.02:
        return False
    x, y = judged.vectors[..., 0], judged.vectors[..., 1]
    z = np.sqrt(np.maximum(0, 1 - x * x - y * y))
    return bool(z.std() > 0.016 or abs(float(z.mean()) - (2 * blue - 1)) > 0.2)


def _blocks(codes: Array, banded: bool) -> tuple[float, int]:
    """How much larger steps are across borders of blocks than elsewhere, along both axes; for the worst size.

    banded   steps between bands are none, so those at their borders are left out
    """
    worst = (0.0, 0)
    for size in (4, 8):
        ratios = []
        for axis in (0, 1):
            steps = np.abs(np.diff(codes, axis=axis)).mean(axis=(1 - axis, 2), dtype=np.float64)
            place = np.arange(len(steps)) + 1
            if banded:
                steps, place = steps[place % BAND != 0], place[place % BAND != 0]
            border = place % size == 0
            if border.sum() < 4 or not steps[~border].mean() > 0:
                return 0.0, 0
            ratios.append(steps[border].mean() / steps[~border].mean())
        worst = max(worst, (float(min(ratios)), size))
    return worst


def _green(judged: Judged) -> Iterator[Finding]:
    sheet, measured = judged.sheet, measure_green(judged.sheet.texels)
    if sheet.green == "undecided":
        yield _finding(
            sheet,
            "map-green-undecided",
            "warning",
            f"its texels do not tell which way green points ({measured.correlation:.2f})",
            "state it: texture, green: up or down",
        )
    elif measured.verdict != "undecided" and measured.verdict != sheet.green:
        yield _finding(
            sheet,
            "map-green-contradicted",
            "fault",
            f"green is said to point {sheet.green}, its texels say {measured.verdict} ({measured.correlation:.2f})",
            f"state it: texture, green: {measured.verdict}",
            measured.correlation,
        )


def _share(chosen: Array) -> float:
    return float(chosen.mean())


def _finding(
    sheet: Sheet,
    id: str,
    severity: str,
    what: str,
    advice: str,
    measured: float | None = None,
    limit: float | None = None,
) -> Finding:
    figures = np.array([] if measured is None else [measured], np.float32)
    none = np.zeros(len(figures), np.int32)
    return Finding(id, severity, 1, what, advice, sheet.name, sheet.material, "", none, figures, limit)
