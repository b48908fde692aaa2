"""What findings are called. The names are part of the record and of graph files: they stay."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from tangentry.pipeline.errors import InputError, nearest

IDS = (
    "uv-missing",
    "uv-degenerate",
    "uv-mirrored",
    "uv-skewed",
    "uv-stretched",
    "uv-out-of-tile",
    "uv-density",
    "uv-overlapping",
    "uv-overlapping-itself",
    "uv-gutter",
    "value-not-finite",
    "face-zero-area",
    "face-duplicate",
    "edge-non-manifold",
    "edge-t-junction",
    "edge-hard-in-chart",
    "edge-soft-on-border",
    "winding-inconsistent",
    "vertex-needless",
    "normal-non-unit",
    "normal-far",
    "normal-inverted",
    "frame-missing",
    "frame-shared",
    "frame-fallback",
    "tangent-zero",
    "tangent-non-unit",
    "tangent-leaning",
    "tangent-unexplained",
    "tangent-without-uv",
    "side-invalid",
    "side-mixed",
    "side-flipped",
    "side-wrong",
    "map-green-down",
    "convention-mixed",
    "motion-skew",
    "motion-stretch",
)


def refuse_unknown(name: str, setting: str, given: Iterable[str], ids: Sequence[str] = IDS) -> None:
    """Raise InputError for an id that no finding has; `name` is the asset's or the map's."""
    for id in given:
        if id not in ids:
            raise InputError(
                name,
                f"setting {setting}",
                f'no finding is called "{id}"',
                f"the ids are {', '.join(ids)}.{nearest(id, ids)}",
            )
