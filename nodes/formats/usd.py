"""USD layers, text (.usda) and binary (.usdc): meshes with their frames as primvars, and preview materials."""

from __future__ import annotations

import tempfile
from pathlib import Path
from typing import Any

import numpy as np
from tangentry.nodes.formats.side_images import images_beside
from tangentry.nodes.geometry.corners import distinct_rows
from tangentry.nodes.model import Asset, MapUse, Material, Part
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, OutFile

INPUTS = {
    "colour": (("diffuseColor", "rgb"),),
    "normal": (("normal", "rgb"),),
    "emissive": (("emissiveColor", "rgb"),),
    "roughness": (("roughness", "r"),),
    "metallic": (("metallic", "r"),),
    "metallic roughness": (("roughness", "g"), ("metallic", "b")),
    "occlusion": (("occlusion", "r"),),
    "opacity": (("opacity", "r"),),
}  # by a map's role, what of the preview surface it feeds and from which channels (UsdPreviewSurface specification)
COLOURS = ("diffuseColor", "emissiveColor")


def write_usd(asset: Asset, stem: str, suffix: str) -> tuple[OutFile, ...]:
    """A USD layer, and the images of its materials beside it. v grows upward, y is up, a unit is a metre.

    Each part is a Mesh of polygons under /stem: normals, primvars:st (further sets st1 ...), displayColor, and as the
    frames primvars:tangents and primvars:bitangents, all by corner. Raises InputError where usd-core is not installed.
    """
    try:
        from pxr import Usd, UsdGeom
    except ImportError:
        advice = "pip install 'tangentry[usd]'"
        raise InputError(f"{stem}{suffix}", "", "USD needs the package usd-core, which is not here", advice) from None

    stage = Usd.Stage.CreateInMemory()
    UsdGeom.SetStageUpAxis(stage, UsdGeom.Tokens.y)
    UsdGeom.SetStageMetersPerUnit(stage, 1.0)
    taken: set[str] = set()
    root = UsdGeom.Xform.Define(stage, f"/{_identifier(stem, taken)}")
    stage.SetDefaultPrim(root.GetPrim())
    names, images = images_beside(asset.images, f"{stem}{suffix}")
    path, taken = str(root.GetPath()), {"materials"}
    materials = _materials(stage, f"{path}/Materials", asset.materials, names)
    for part in asset.parts:
        mesh = UsdGeom.Mesh.Define(stage, f"{path}/{_identifier(part.name or stem, taken)}")
        _mesh(mesh, part, asset.v_down)
        if part.material >= 0:
            _bind(mesh, materials[part.material])
    shown = {names[use.image] for one in asset.materials for use in one.maps if use.role in INPUTS}
    content = _content(stage, suffix)
    return (OutFile(f"{stem}{suffix}", content), *(image for image in images if image.name in shown))


def _content(stage: Any, suffix: str) -> Array:
    """The layer's bytes: the library writes them to disk and nowhere else."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / f"layer{suffix}"
        stage.GetRootLayer().Export(str(path))
        return np.fromfile(path, np.uint8)


def _identifier(name: str, taken: set[str]) -> str:
    from pxr import Tf

    plain = Tf.MakeValidIdentifier(name)
    while plain.lower() in taken:
        plain += "_"
    taken.add(plain.lower())
    return str(plain)


def _mesh(mesh: Any, part: Part, v_down: bool) -> None:
    from pxr import Sdf, UsdGeom

    corner, types = UsdGeom.Tokens.faceVarying, Sdf.ValueTypeNames
    points = part.points.values
    mesh.CreatePointsAttr(_array(points))
    mesh.CreateFaceVertexCountsAttr(_array(np.diff(part.starts)))
    mesh.CreateFaceVertexIndicesAttr(_array(part.points.index))
    mesh.CreateSubdivisionSchemeAttr(UsdGeom.Tokens.none)
    mesh.CreateExtentAttr(_array(np.stack([points.min(axis=0), points.max(axis=0)])))
    if part.normals is not None:
        mesh.CreateNormalsAttr(_array(part.normals.values[part.normals.index]))
        mesh.SetNormalsInterpolation(corner)
    primvars = UsdGeom.PrimvarsAPI(mesh)

    def add(name: str, kind: Any, values: Array, index: Array) -> None:
        primvar = primvars.CreatePrimvar(name, kind, corner)
        primvar.Set(_array(values))
        primvar.SetIndices(_array(index))

    for k, uv in enumerate(part.uvs):
        add(f"st{k or ''}", types.TexCoord2fArray, uv.values * (1, -1) + (0, 1) if v_down else uv.values, uv.index)
    for colour in part.colours[:1]:
        add("displayColor", types.Color3fArray, colour.values[:, :3], colour.index)
    if part.frames is not None and part.normals is not None:
        tangents, bitangents, index = _frames(part)
        add("tangents", types.Vector3fArray, tangents, index)
        add("bitangents", types.Vector3fArray, bitangents, index)


def _array(values: Array) -> Any:
    """The library's own array of (n,) int or (n, 2 or 3) float numbers."""
    from pxr import Vt

    kind = {1: Vt.IntArray, 2: Vt.Vec2fArray, 3: Vt.Vec3fArray}[values.shape[1] if values.ndim == 2 else 1]
    # A file's bytes may lie at any place; the library wants numbers where the machine does.
    return kind.FromNumpy(np.require(values, np.int32 if values.ndim == 1 else np.float32, ["C", "A"]))


def _frames(part: Part) -> tuple[Array, Array, Array]:
    """Tangents and bitangents, (rows, 3) float32 each, and the row of every corner."""
    assert part.frames is not None and part.normals is not None
    index, corner = distinct_rows(part.frames.index, part.normals.index)
    row = part.frames.index[corner]
    tangents = part.frames.tangents[row]
    if part.frames.bitangents is not None:
        return tangents, part.frames.bitangents[row], index
    normals = part.normals.values[part.normals.index[corner]]
    across = np.cross(normals, tangents) * part.frames.sides[row, None]
    return tangents, across, index


def _bind(mesh: Any, material: Any) -> None:
    from pxr import UsdShade

    UsdShade.MaterialBindingAPI.Apply(mesh.GetPrim()).Bind(material)


def _materials(stage: Any, path: str, materials: tuple[Material, ...], images: list[str]) -> list[Any]:
    from pxr import Sdf, UsdGeom, UsdShade

    made: list[Any] = []
    taken: set[str] = set()
    if materials:
        UsdGeom.Scope.Define(stage, path)
    for material in materials:
        place = f"{path}/{_identifier(material.name or 'material', taken)}"
        made.append(UsdShade.Material.Define(stage, place))
        surface = UsdShade.Shader.Define(stage, f"{place}/surface")
        surface.CreateIdAttr("UsdPreviewSurface")
        made[-1].CreateSurfaceOutput().ConnectToSource(surface.ConnectableAPI(), "surface")
        for use in material.maps:
            if use.role not in INPUTS:
                continue
            texture = _texture(stage, f"{place}/{use.role.replace(' ', '_')}", use, images[use.image])
            for name, channels in INPUTS[use.role]:
                kind = Sdf.ValueTypeNames.Color3f if name in COLOURS else Sdf.ValueTypeNames.Normal3f
                kind = kind if len(channels) == 3 else Sdf.ValueTypeNames.Float
                texture.CreateOutput(channels, Sdf.ValueTypeNames.Float3 if len(channels) == 3 else kind)
                surface.CreateInput(name, kind).ConnectToSource(texture.ConnectableAPI(), channels)
    return made


def _texture(stage: Any, place: str, use: MapUse, image: str) -> Any:
    from pxr import Gf, Sdf, UsdShade

    reader = UsdShade.Shader.Define(stage, f"{place}_st")
    reader.CreateIdAttr("UsdPrimvarReader_float2")
    reader.CreateInput("varname", Sdf.ValueTypeNames.String).Set(f"st{use.uv or ''}")
    texture = UsdShade.Shader.Define(stage, place)
    texture.CreateIdAttr("UsdUVTexture")
    texture.CreateInput("file", Sdf.ValueTypeNames.Asset).Set(image)
    for side in ("wrapS", "wrapT"):
        texture.CreateInput(side, Sdf.ValueTypeNames.Token).Set("repeat")
    colours = any(name in COLOURS for name, _ in INPUTS[use.role])
    texture.CreateInput("sourceColorSpace", Sdf.ValueTypeNames.Token).Set("sRGB" if colours else "raw")
    if use.role == "normal":  # codes 0..1 to -1..1
        s = use.strength
        texture.CreateInput("scale", Sdf.ValueTypeNames.Float4).Set(Gf.Vec4f(2 * s, 2 * s, 2, 1))
        texture.CreateInput("bias", Sdf.ValueTypeNames.Float4).Set(Gf.Vec4f(-s, -s, -1, 0))
    output = reader.CreateOutput("result", Sdf.ValueTypeNames.Float2)
    texture.CreateInput("st", Sdf.ValueTypeNames.Float2).ConnectToSource(output)
    return texture
