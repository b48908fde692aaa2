"""A glTF document as an Asset: its triangles as parts, the document itself kept beside them."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
from tangentry.nodes.formats import gltf_draco, gltf_meshopt
from tangentry.nodes.formats.gltf_accessors import Accessors
from tangentry.nodes.formats.gltf_container import DATA_URI, EXPORT_AGAIN, read_container, resolve, side_file
from tangentry.nodes.formats.gltf_shape import check_texture
from tangentry.nodes.model import Asset, Document, Frames, Image, MapUse, Material, Morph, Part, Stream
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

TRIANGLES, STRIP, FAN = 4, 5, 6
MODES = {0: "points", 1: "lines", 2: "line loops", 3: "line strips"}
UNPACKING = ((gltf_meshopt.unpack, gltf_meshopt.NOTE), (gltf_draco.unpack, gltf_draco.NOTE))
UNDERSTOOD = frozenset(
    {"KHR_mesh_quantization", "KHR_texture_transform", "KHR_materials_variants", "EXT_mesh_gpu_instancing"}
)
CORE_MAPS = {"normalTexture": "normal", "occlusionTexture": "occlusion", "emissiveTexture": "emissive"}
METALLIC_MAPS = {"baseColorTexture": "colour", "metallicRoughnessTexture": "metallic roughness"}
IMAGE_EXTENSIONS = ("KHR_texture_basisu", "EXT_texture_webp", "EXT_texture_avif", "MSFT_texture_dds")


def read_gltf(file: InputFile) -> Asset:
    """The asset in a .gltf or .glb file, losslessly: what is not understood stays in `Asset.document`.

    Each primitive of triangles, strips or fans is one part, `place` its mesh and primitive, its streams sharing one
    index array; v grows downward. Raises InputError, naming accessor, mesh and primitive, for whatever is wrong, and by
    name for extensions that hold vertex data in a form that is not read.
    """
    document, buffers = read_container(file)
    unpacked = [note for unpack, note in UNPACKING if unpack(file, document, buffers)]
    _refuse_packed(file, document)
    accessors = Accessors(file, document, buffers)
    for number in range(len(accessors.views)):
        accessors.view(number, f"bufferView {number}")
    images = tuple(_image(file, number, one, accessors) for number, one in enumerate(document.get("images", [])))
    materials = tuple(
        _material(file, number, one, document) for number, one in enumerate(document.get("materials", []))
    )
    parts: list[Part] = []
    required = [name for name in document.get("extensionsRequired", []) if name not in UNDERSTOOD]
    notes = [f"the extension {name}, which the file requires, is carried through as it is" for name in required]
    notes += unpacked
    for m, mesh in enumerate(document.get("meshes", [])):
        for p, primitive in enumerate(mesh.get("primitives", [])):
            mode = primitive.get("mode", TRIANGLES)
            if mode in (TRIANGLES, STRIP, FAN):
                parts.append(
                    _Primitive(file, accessors, primitive, m, p, materials).part(mesh.get("name", f"mesh {m}"))
                )
            else:
                notes.append(f"mesh {m} primitive {p}: {MODES.get(mode, f'mode {mode}')} carried through as they are")
    if not parts:
        raise InputError(file, "", "there are no triangles in it", "export the mesh with its faces")
    return Asset(
        file.path,
        tuple(parts),
        materials,
        images,
        True,
        Document("gltf", json.dumps(document), tuple(buffers)),
        tuple(notes),
    )


def _refuse_packed(file: InputFile, document: dict[str, Any]) -> None:
    """Raise InputError for extensions by which vertex data is held in a form of its own."""
    primitives = [one for mesh in document.get("meshes", []) for one in mesh.get("primitives", [])]
    holders = [*primitives, *document.get("accessors", []), *document.get("bufferViews", [])]
    held = {name for one in holders for name in one.get("extensions", {})} - UNDERSTOOD
    for name in document.get("extensionsRequired", []):
        if name in held:
            raise InputError(file, name, "the file requires it for its vertex data, and it is not read", EXPORT_AGAIN)


# Materials and images


def _image(file: InputFile, number: int, image: dict[str, Any], accessors: Accessors) -> Image:
    place, mime = f"image {number}", image.get("mimeType", "")
    if "bufferView" in image:
        content, name = accessors.view(image["bufferView"], place), image.get("name") or f"image_{number}"
    elif "uri" in image and not DATA_URI.match(image["uri"]):
        beside = side_file(file, place, image["uri"])
        content, name = (beside.bytes() if beside.exists else np.zeros(0, np.uint8)), beside.name
    elif "uri" in image:
        content, stated = resolve(file, place, image["uri"])
        mime, name = mime or stated, image.get("name") or f"image_{number}"
    else:
        content, name = np.zeros(0, np.uint8), f"image_{number}"
    return Image(name, mime or sniff(content), content)


def sniff(content: Array) -> str:
    """The media type of an image by its first bytes; "" where they are not known."""
    head = content[:12].tobytes()
    if head.startswith(b"\x89PNG\r\n\x1a\n"):
        return "image/png"
    if head.startswith(b"\xff\xd8"):
        return "image/jpeg"
    if head.startswith(b"\xabKTX 20\xbb"):
        return "image/ktx2"
    if head.startswith(b"DDS "):
        return "image/vnd-ms.dds"
    if head[4:] == b"ftypavif":
        return "image/avif"
    return "image/webp" if head[:4] == b"RIFF" and head[8:] == b"WEBP" else ""


def _material(file: InputFile, number: int, material: dict[str, Any], document: dict[str, Any]) -> Material:
    place = f"material {number}"
    uses = [_use(file, f"{place}, {key}", material.get(key), role, document) for key, role in CORE_MAPS.items()]
    metallic = material.get("pbrMetallicRoughness", {})
    uses += [_use(file, f"{place}, {key}", metallic.get(key), role, document) for key, role in METALLIC_MAPS.items()]
    for name, extension in material.get("extensions", {}).items():
        for key, info in extension.items():
            if isinstance(info, dict) and type(info.get("index")) is int:
                check_texture(file, f"materials[{number}].extensions.{name}.{key}", info)
                uses.append(_use(file, f"{place}, {name}.{key}", info, _extension_role(name, key), document))
    return Material(material.get("name", f"material {number}"), tuple(use for use in uses if use is not None))


def _extension_role(name: str, key: str) -> str:
    if key == "clearcoatNormalTexture":
        return "clearcoat normal"
    if key == "anisotropyTexture":
        return "anisotropy"
    return f"{name.split('_')[-1]} {key.removesuffix('Texture')}"


def _use(
    file: InputFile, place: str, info: dict[str, Any] | None, role: str, document: dict[str, Any]
) -> MapUse | None:
    if info is None:
        return None
    textures = document.get("textures", [])
    index = info.get("index", len(textures))
    if not index < len(textures):
        raise InputError(file, place, f"texture {index} does not exist (there are {len(textures)})", EXPORT_AGAIN)
    source = _texture_image(textures[index])
    if source is None or not source < len(document.get("images", [])):
        return None
    moved = info.get("extensions", {}).get("KHR_texture_transform", {})
    offset, scale = moved.get("offset", [0, 0]), moved.get("scale", [1, 1])
    if len(offset) != 2 or len(scale) != 2:
        raise InputError(file, place, "the offset or scale of its transform has not two numbers", EXPORT_AGAIN)
    transform = tuple(float(value) for value in (*offset, moved.get("rotation", 0), *scale))
    strength = float(info.get("scale", info.get("strength", 1.0)))
    return MapUse(role, source, moved.get("texCoord", info.get("texCoord", 0)), transform, strength)


def _texture_image(texture: dict[str, Any]) -> int | None:
    extensions = texture.get("extensions", {})
    for name in IMAGE_EXTENSIONS:
        if "source" in extensions.get(name, {}):
            return int(extensions[name]["source"])
    source: int | None = texture.get("source")
    return source


# Primitives


class _Primitive:
    """One primitive under reading."""

    def __init__(
        self,
        file: InputFile,
        accessors: Accessors,
        primitive: dict[str, Any],
        m: int,
        p: int,
        materials: tuple[Material, ...],
    ) -> None:
        self.file, self.accessors, self.primitive, self.at = file, accessors, primitive, (m, p)
        self.place, self.materials = f"mesh {m} primitive {p}", materials
        self.attributes: dict[str, int] = primitive.get("attributes", {})
        if "POSITION" not in self.attributes:
            raise InputError(file, self.place, "it has no POSITION attribute", EXPORT_AGAIN)

    def part(self, name: str) -> Part:
        points = self._attribute("POSITION", (3,))
        assert points is not None
        finite = np.isfinite(points)
        if not finite.all():
            vertex = int(np.argmin(finite.all(axis=1)))
            raise InputError(
                self.file, f"{self.place}, vertex {vertex}", f"its position is {points[vertex].tolist()}", EXPORT_AGAIN
            )
        self.count = len(points)
        self._check_counts()
        index = self._corners()
        normals = self._attribute("NORMAL", (3,))
        uvs = self._sets("TEXCOORD", (2,))
        colours = self._sets("COLOR", (3, 4))
        return Part(
            name,
            self._material(),
            np.arange(len(index) // 3 + 1, dtype=np.int32) * 3,
            Stream(points, index),
            None if normals is None else Stream(normals, index),
            tuple(Stream(values, index) for values in uvs),
            tuple(Stream(values, index) for values in colours),
            None,
            None,
            self._frames(index, len(uvs)),
            self._morphs(),
            index,
            self.at,
        )

    def _check_counts(self) -> None:
        """Those that are only carried along too: a split takes them apart vertex by vertex."""
        for attributes in (self.attributes, *self.primitive.get("targets", ())):
            for name, number in attributes.items():
                place = f"{self.place}, {name}"
                count = self.accessors.entry(number, place).get("count", 0)
                if count != self.count:
                    raise InputError(self.file, place, f"{count} elements, but POSITION has {self.count}", EXPORT_AGAIN)

    def _attribute(self, name: str, widths: tuple[int, ...]) -> Array | None:
        if name not in self.attributes:
            return None
        place = f"{self.place}, {name}"
        values = self.accessors.values(self.attributes[name], place)
        if values.shape[1] not in widths:
            raise InputError(
                self.file, place, "its accessor is not of the type that this attribute needs", EXPORT_AGAIN
            )
        return values

    def _sets(self, stem: str, widths: tuple[int, ...]) -> list[Array]:
        found: list[Array] = []
        while (values := self._attribute(f"{stem}_{len(found)}", widths)) is not None:
            found.append(values)
        return found

    def _corners(self) -> Array:
        """(3 triangles,) int32: the vertex of every corner; strips and fans as triangles (specification, 3.7.2.1)."""
        if "indices" in self.primitive:
            raw = self.accessors.raw(self.primitive["indices"], f"{self.place}, indices")
            if raw.shape[1] != 1 or raw.dtype.kind != "u":
                raise InputError(
                    self.file, f"{self.place}, indices", "they are not unsigned whole numbers", EXPORT_AGAIN
                )
            index = raw[:, 0].astype(np.int64)
            if index.size and int(index.max()) >= self.count:
                corner = int(np.argmax(index >= self.count))
                raise InputError(
                    self.file,
                    f"{self.place}, indices",
                    f"index {corner} is {int(index[corner])}, but there are {self.count} vertices",
                    EXPORT_AGAIN,
                )
        else:
            index = np.arange(self.count, dtype=np.int64)
        mode = self.primitive.get("mode", TRIANGLES)
        if mode == STRIP:
            k = np.arange(max(len(index) - 2, 0))
            index = np.stack([index[k], index[k + 1 + k % 2], index[k + 2 - k % 2]], axis=1).ravel()
        elif mode == FAN:
            k = np.arange(max(len(index) - 2, 0))
            index = np.stack([index[k + 1], index[k + 2], np.broadcast_to(index[:1], k.shape)], axis=1).ravel()
        if len(index) < 3:
            raise InputError(self.file, self.place, f"{len(index)} corners are too few for a triangle", EXPORT_AGAIN)
        triangles = index[: len(index) // 3 * 3].reshape(-1, 3)
        if mode != TRIANGLES:  # strips are stitched together by triangles without area
            stitch = (
                (triangles[:, 0] == triangles[:, 1])
                | (triangles[:, 1] == triangles[:, 2])
                | (triangles[:, 2] == triangles[:, 0])
            )
            triangles = triangles[~stitch]
        return np.ascontiguousarray(triangles.ravel(), np.int32)

    def _material(self) -> int:
        material = self.primitive.get("material", -1)
        if material >= len(self.materials):
            raise InputError(
                self.file,
                self.place,
                f"material {material} does not exist (there are {len(self.materials)})",
                EXPORT_AGAIN,
            )
        return int(material)

    def _frames(self, index: Array, uv_sets: int) -> Frames | None:
        stored = self._attribute("TANGENT", (4,))
        if stored is None or "NORMAL" not in self.attributes:  # the specification has TANGENT ignored without NORMAL
            return None
        use = self.materials[self._material()].tangent_space_map if self._material() >= 0 else None
        uv = use.uv if use is not None and use.uv < uv_sets else min(0, uv_sets - 1)
        sides = np.sign(np.nan_to_num(stored[:, 3])).astype(np.int8)
        return Frames(
            np.ascontiguousarray(stored[:, :3]), None, sides, np.zeros(len(stored), bool), index, uv, "stored"
        )

    def _morphs(self) -> tuple[Morph, ...]:
        targets = self.primitive.get("targets", [])
        return tuple(
            Morph(*(self._displacement(t, target, name) for name in ("POSITION", "NORMAL", "TANGENT")))
            for t, target in enumerate(targets)
        )

    def _displacement(self, t: int, target: dict[str, int], name: str) -> Array | None:
        if name not in target:
            return None
        place = f"{self.place}, morph target {t}, {name}"
        values = self.accessors.values(target[name], place)
        if values.shape != (self.count, 3):
            raise InputError(self.file, place, f"it does not hold {self.count} vectors", EXPORT_AGAIN)
        return values
