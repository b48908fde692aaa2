"""The animations of a glTF document and their values at a time (specification, 3.11 and appendix C)."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from tangentry.nodes.formats.gltf_accessors import Accessors
from tangentry.nodes.formats.gltf_container import EXPORT_AGAIN
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array

WIDTHS = {"translation": 3, "rotation": 4, "scale": 3, "weights": 0}  # 0: as many as there are morph targets
WAYS = ("STEP", "LINEAR", "CUBICSPLINE")


class Channel(NamedTuple):
    """What one property of one node does."""

    node: int
    path: str  # "translation", "rotation", "scale" or "weights"
    way: str  # one of WAYS
    times: Array  # (keys,) float64, seconds, growing
    values: Array  # (keys, 3, width) float64: in-tangent, value, out-tangent; tangents are zero but for CUBICSPLINE


class Animation(NamedTuple):
    """Channels that play together."""

    name: str
    channels: tuple[Channel, ...]

    @property
    def span(self) -> tuple[float, float]:
        """The times of the first key and of the last."""
        return min(one.times[0] for one in self.channels), max(one.times[-1] for one in self.channels)


def animations_of(document: dict[str, Any], accessors: Accessors) -> list[Animation]:
    """The animations that move nodes. Raises InputError naming the animation and the channel that can't be played."""
    made = []
    for number, entry in enumerate(document.get("animations", [])):
        name = str(entry.get("name", f"animation {number}"))
        channels = [
            _channel(f"animation {number}, channel {c}", one, entry.get("samplers", []), document, accessors)
            for c, one in enumerate(entry.get("channels", []))
            if "node" in one.get("target", {}) and one["target"].get("path") in WIDTHS
        ]
        if channels:
            made.append(Animation(name, tuple(channels)))
    return made


def _channel(
    place: str, entry: dict[str, Any], samplers: list[dict[str, Any]], document: dict[str, Any], accessors: Accessors
) -> Channel:
    def refuse(found: str) -> InputError:
        return InputError(accessors.file, place, found, EXPORT_AGAIN)

    node, path, number = entry["target"]["node"], entry["target"]["path"], entry.get("sampler", len(samplers))
    if node >= len(document.get("nodes", [])):
        raise refuse(f"node {node} does not exist")
    if number >= len(samplers) or not {"input", "output"} <= samplers[number].keys():
        raise refuse(f"sampler {number} does not exist, or lacks its input or output")
    way = samplers[number].get("interpolation", "LINEAR")
    if way not in WAYS:
        raise refuse(f'interpolation "{way}" is none of {", ".join(WAYS)}')
    times = accessors.values(samplers[number]["input"], f"{place}, input")[:, 0].astype(np.float64)
    if not (np.isfinite(times).all() and (np.diff(times) > 0).all()):
        raise refuse("its times do not grow from key to key")
    values = accessors.values(samplers[number]["output"], f"{place}, output").astype(np.float64)
    rows = len(times) * (3 if way == "CUBICSPLINE" else 1)
    width = WIDTHS[path] or values.size // rows
    if values.size != rows * width or not width:
        raise refuse(f"{values.size} numbers for {len(times)} keys of {path}")
    if way != "CUBICSPLINE":
        values = np.pad(values.reshape(len(times), 1, width), ((0, 0), (1, 1), (0, 0)))
    return Channel(node, path, way, times, values.reshape(len(times), 3, width))


def value_at(channel: Channel, time: float) -> Array:
    """(width,) float64: the value at a time in seconds; before the first key its value, after the last likewise."""
    after = int(np.searchsorted(channel.times, time, "right"))
    if after == 0 or after == len(channel.times) or channel.way == "STEP":
        held: Array = channel.values[max(after - 1, 0), 1]
        return held
    (_, start, leaving), (arriving, end, _) = channel.values[after - 1 : after + 1]
    length = channel.times[after] - channel.times[after - 1]
    t = (time - channel.times[after - 1]) / length
    if channel.way == "CUBICSPLINE":
        curve: Array = (2 * t**3 - 3 * t**2 + 1) * start + length * (t**3 - 2 * t**2 + t) * leaving
        curve = curve + (3 * t**2 - 2 * t**3) * end + length * (t**3 - t**2) * arriving
        return curve / max(float(np.linalg.norm(curve)), 1e-30) if channel.path == "rotation" else curve
    if channel.path == "rotation":
        return _slerp(start, end, t)
    between: Array = (1 - t) * start + t * end
    return between


def _slerp(start: Array, end: Array, t: float) -> Array:
    """Along the shorter arc (appendix C.4)."""
    along = float(start @ end)
    angle = np.arccos(min(abs(along), 1.0))
    if angle < 1e-6:
        return start
    turned: Array = np.sin(angle * (1 - t)) * start + np.copysign(np.sin(angle * t), along) * end
    return turned / np.sin(angle)
