"""Findings on vertices: splits that cost a vertex for nothing."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from tangentry.nodes.checks.view import View
from tangentry.nodes.formats.vertices import label_of, tangent_rows
from tangentry.nodes.geometry.corners import distinct_rows
from tangentry.nodes.model import Stream
from tangentry.pipeline.flow import Finding


def vertex_findings(view: View) -> Iterator[Finding]:
    """Vertices of a file, or of `split`, that equal another in all they carry.

    A skinned or morphed mesh is passed over: its vertices carry more than a part says.
    """
    part = view.part
    number = part.vertices if part.vertices is not None else part.source
    if number is None or part.morphs or (view.asset.document is not None and '"JOINTS_0"' in view.asset.document.text):
        return
    if part.vertices is not None and part.frames is None:
        return  # the frames to come may be what the split is for
    streams = [part.points, *([part.normals] if part.normals else []), *part.uvs, *part.colours]
    if part.frames is not None:
        streams.append(Stream(tangent_rows(part.frames), part.frames.index))
    label = distinct_rows(*(label_of(stream) for stream in streams))[0]
    first = distinct_rows(number, label)[1]
    carried = label[first]
    needless = np.ones(len(first), bool)
    needless[np.unique(carried, return_index=True)[1]] = False
    if needless.any():
        yield view.finding(
            "vertex-needless",
            "note",
            f"vertices that equal another in all they carry, of {len(first)}",
            "nothing: they are joined on export; where the file is made, joining them saves memory",
            "corner",
            first[needless],
        )
