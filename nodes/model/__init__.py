"""What flows along the edges: Asset and Map (Files and Findings are the pipeline's own)."""

from tangentry.nodes.model.asset import (
    TANGENT_SPACE_ROLES,
    Asset,
    Document,
    Frames,
    Image,
    MapUse,
    Material,
    Morph,
    Part,
    Stream,
)
from tangentry.nodes.model.map import Map, Sheet

__all__ = [
    "TANGENT_SPACE_ROLES",
    "Asset",
    "Document",
    "Frames",
    "Image",
    "Map",
    "MapUse",
    "Material",
    "Morph",
    "Part",
    "Sheet",
    "Stream",
]
