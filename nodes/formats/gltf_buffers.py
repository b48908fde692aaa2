"""The buffers of a glTF document to be written: one, and those that carry a name or more (specification, 3.6.1)."""

from __future__ import annotations

from typing import Any

import numpy as np
from tangentry.pipeline.flow import Array

ALIGN = 4
DATA = ("uri", "byteLength")  # what a buffer says of its data alone


def joined(document: dict[str, Any], contents: list[Array]) -> list[Array]:
    """The buffers' contents, each (size,) uint8; the document's buffers and the places of its views are put right.

    contents  of the document's views, one for one, each (size,) uint8

    Views go into the first buffer, but for those of a buffer with a name, extras or extensions: that stays one.
    """
    before = document.pop("buffers", []) or [{}]
    carried = [{name: value for name, value in buffer.items() if name not in DATA} for buffer in before]
    views: list[dict[str, Any]] = document.get("bufferViews", [])
    members: dict[int, list[int]] = {}
    for number, view in enumerate(views):
        buffer = view.get("buffer", 0)
        members.setdefault(buffer if carried[buffer] else 0, []).append(number)
    bodies: list[Array] = []
    for buffer, numbers in sorted(members.items()):
        size, packed = 0, []
        for number in numbers:
            padding = -len(contents[number]) % ALIGN
            packed += [contents[number], np.zeros(padding, np.uint8)]
            views[number] |= {"buffer": len(bodies), "byteOffset": size}
            if size == 0:
                del views[number]["byteOffset"]
            size += len(contents[number]) + padding
        document.setdefault("buffers", []).append({**carried[buffer], "byteLength": size})
        bodies.append(np.concatenate(packed))
    return bodies
