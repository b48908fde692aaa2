"""A mesh asset as authored: polygons whose corners carry attributes through separate index streams.

    face f owns the corners starts[f] : starts[f + 1]; corner c lies at points.values[points.index[c]]

So a UV seam is data (two corners, one point, two rows of UVs) and not an accident of the file. A glTF vertex is one
row of every stream at once: its streams share one index array until `weld` joins points.

Winding is counter-clockwise seen from outside, right-handed, in every format read here.
"""

from __future__ import annotations

from tangentry.pipeline.flow import Array, flow_value


@flow_value
class Stream:
    """An attribute with an index of its own: corner c has values[index[c]]."""

    values: Array  # (rows, width) float32
    index: Array  # (corners,) int32


@flow_value
class Frames:
    """Tangent frames: corner c has the frame of row index[c].

    The bitangent points the way v grows with v UP (for glTF, whose v grows downward, against its file's v):
    bitangent = cross(normal, tangent) * side, unless `bitangents` says more.
    """

    tangents: Array  # (frames, 3) float32, unit
    bitangents: Array | None  # (frames, 3) float32, unit; None: cross(normal, tangent) * side, so nothing is skewed
    sides: Array  # (frames,) int8, +1 or -1: the handedness, glTF's w
    fallback: Array  # (frames,) bool: nothing defined this frame; it was taken from neighbours or chosen
    index: Array  # (corners,) int32
    uv: int  # the UV set they follow; -1 where the file brought tangents without UVs
    method: str  # how they were solved; "stored" where the file brought them


@flow_value
class Morph:
    """Displacements of one morph target."""

    points: Array | None  # (source vertices, 3) float32
    normals: Array | None  # (source vertices, 3) float32
    tangents: Array | None  # (frames, 3) float32, by row of Part.frames


@flow_value
class Part:
    """The faces of one mesh that have one material."""

    name: str
    material: int  # row of Asset.materials; -1: none
    starts: Array  # (faces + 1,) int32: face f owns corners starts[f] : starts[f + 1]
    points: Stream  # width 3
    normals: Stream | None = None  # width 3, unit
    uvs: tuple[Stream, ...] = ()  # width 2 each; v up or down as Asset.v_down says; set number = place in the tuple
    colours: tuple[Stream, ...] = ()  # width 3 or 4
    smoothing: Array | None = None  # (faces,) int32: smoothing group, 0: none (faceted)
    vertices: Array | None = None  # (corners,) int32 by `split`: corners of one number may share a vertex and a frame
    frames: Frames | None = None
    morphs: tuple[Morph, ...] = ()
    source: Array | None = None  # (corners,) int32: vertex of the source document's primitive
    place: tuple[int, ...] = ()  # (mesh, primitive) in the source document

    @property
    def face_count(self) -> int:
        """How many polygons."""
        return len(self.starts) - 1

    @property
    def corner_count(self) -> int:
        """How many face corners."""
        return len(self.points.index)


@flow_value
class MapUse:
    """How a material uses one image."""

    role: str  # "normal", "clearcoat normal", "anisotropy", "height", "colour", ... : see TANGENT_SPACE_ROLES
    image: int  # row of Asset.images
    uv: int = 0  # UV set
    transform: tuple[float, ...] = (0.0, 0.0, 0.0, 1.0, 1.0)  # offset u v, rotation in radians, scale u v
    strength: float = 1.0  # factor on x and y of a normal map


TANGENT_SPACE_ROLES = frozenset({"normal", "clearcoat normal", "anisotropy"})


@flow_value
class Material:
    """A material: its name and the images it uses."""

    name: str
    maps: tuple[MapUse, ...] = ()

    @property
    def tangent_space_map(self) -> MapUse | None:
        """The map whose frames this material needs; None where it samples no tangent-space map."""
        return next((use for use in self.maps if use.role in TANGENT_SPACE_ROLES), None)


@flow_value
class Image:
    """An image file, byte for byte as it was found."""

    name: str  # file name, for messages and for writing beside the mesh
    mime: str  # "image/png", ...
    content: Array  # (size,) uint8; empty where the file was not found


@flow_value
class Document:
    """The file an asset came from, kept so that what is not understood goes out as it came in."""

    kind: str  # "gltf"
    text: str  # its JSON
    buffers: tuple[Array, ...]  # (size,) uint8 each


@flow_value
class Asset:
    """A mesh asset: parts, the materials and images they use, and the untouched source beside them."""

    name: str  # the file's path as the graph gives it
    parts: tuple[Part, ...]
    materials: tuple[Material, ...] = ()
    images: tuple[Image, ...] = ()
    v_down: bool = False  # True: v grows downward in the image (glTF); False: upward (OBJ, PLY)
    document: Document | None = None
    notes: tuple[str, ...] = ()  # what was carried through without being understood, in words
