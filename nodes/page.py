"""A library as a page to read."""

from __future__ import annotations

from pathlib import PurePosixPath

import numpy as np
from tangentry.nodes.model import Asset, Map
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, Files, Findings, OutFile, OutputFile


def page(
    findings: dict[str, Findings],
    assets: dict[str, Asset] | None = None,
    maps: dict[str, Map] | None = None,
    layouts: dict[str, Files] | None = None,
    previews: dict[str, Map] | None = None,
    *,
    file: OutputFile | str,
    title: str = "The library at a glance",
    viewer: int = 50000,
) -> Files:
    """One self-contained HTML page: each asset's verdict, findings, facts and pictures, and the mesh to turn around.

    file    where to, .html
    title   what stands at the top
    viewer  triangles up to which an asset can be turned around; larger ones have their preview only

    `findings` come from `check`, `maps` from `encode` or `texture`, `layouts` from `layout`, `previews` from `preview`;
    all but the findings may be left out. In the viewer a finding's faces are shown on the mesh, its normal map can be
    switched off, and its frames drawn: tangent red, bitangent green, normal blue. The page fetches nothing. Raises
    InputError for other suffixes.
    """
    from tangentry.nodes.pages.document import Entry, document
    from tangentry.nodes.pages.scene import scene_of, triangle_count

    if PurePosixPath(file).suffix.lower() not in (".html", ".htm"):
        raise InputError(file, "", "only HTML is written", "end its name with .html")
    entries = {}
    for name, found in findings.items():
        asset = (assets or {}).get(name)
        turned = asset is not None and 0 < triangle_count(asset) <= viewer
        entries[name] = Entry(
            found,
            scene_of(asset, (maps or {}).get(name), found.items) if asset is not None and turned else None,
            _picture((previews or {}).get(name)),
            _pngs((layouts or {}).get(name)),
        )
    return Files((OutFile(file, np.frombuffer(document(title, entries).encode(), np.uint8)),))


def _picture(preview: Map | None) -> Array | None:
    from tangentry.nodes.formats.images import write_png

    return write_png(preview.sheets[0].texels) if preview is not None else None


def _pngs(layout: Files | None) -> tuple[Array, ...]:
    return tuple(one.content for one in layout.files if one.name.lower().endswith(".png")) if layout else ()
