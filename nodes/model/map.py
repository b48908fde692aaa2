"""A map: texels with an explicit convention, one sheet per material or one for all."""

from __future__ import annotations

from tangentry.pipeline.flow import Array, flow_value


@flow_value
class Sheet:
    """The texels of one image and how to read them. Row 0 is the top of the image."""

    material: str  # name of the material it belongs to; "" serves all
    texels: Array  # (height, width, channels) uint8, uint16 or float32
    holds: str  # "normal", "height", "colour", "data"
    space: str = ""  # of normals: "tangent", "object" or "world"
    green: str = ""  # of tangent-space normals: "up" (y grows up the image), "down" or "undecided"
    encoding: str = "unorm"  # or "snorm", "xy", "octahedral", "hemi-octahedral", "float": see maps/encodings.py
    name: str = ""  # where it came from, for messages
    tagged: str = ""  # what its file says of itself: "sRGB" (a colour profile), "lossy", or nothing
    level: int = 0  # of a mip chain: 0 is the map itself


@flow_value
class Map:
    """One sheet per material that has one, or a chain of levels of each; a lone sheet with material "" serves all."""

    sheets: tuple[Sheet, ...]
