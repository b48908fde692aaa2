"""Assets as delivered files."""

from __future__ import annotations

from pathlib import PurePosixPath
from typing import Literal

from tangentry.nodes.model import Asset, Map
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Files, Findings, OutFile, OutputFile

FORMS = {
    ".glb": ("float", "short", "byte"),
    ".gltf": ("float", "short", "byte"),
    ".npz": ("float", "short", "byte", "10-10-10-2", "octahedral", "quaternion"),
}
WRITTEN = (".glb", ".gltf", ".obj", ".ply", ".usda", ".usdc", ".npz")
WITHOUT_MAPS = (".ply", ".npz")


def export(
    asset: Asset,
    map: Map | None = None,
    unless_faulty: Findings | None = None,
    *,
    file: OutputFile | str,
    vectors: Literal["float", "short", "byte", "10-10-10-2", "octahedral", "quaternion"] = "float",
) -> Files | None:
    """The asset as a file, with its frames and its maps; left out where `unless_faulty` holds a fault.

    file     where to; its suffix says the format: .glb, .gltf (buffer and images beside it), .obj, .ply, .usda, .usdc
             (USD: needs the extra `usd`), .npz
    vectors  form of normals and tangents: glTF also takes short and byte (KHR_mesh_quantization), NPZ all; the largest
             error is 0.0015 degrees for short, 0.0025 octahedral, 0.004 quaternion, 0.1 for 10-10-10-2, 0.4 for byte

    One vertex is written for each corner that differs from all others. glTF: TANGENT, and the normal maps in their
    materials, green up; what came from a glTF file and did not change goes out as it came in. The others get each mesh
    in its own space. OBJ, polygons kept: material library, images, and the frames in a text beside it, `stem.frames`,
    whose head explains it. PLY: tx ty tz and side. USD, polygons kept: primvars:tangents and primvars:bitangents. NPZ:
    plain arrays. Raises InputError for other suffixes, and for a map where the format has no place for one.
    """
    if unless_faulty is not None and unless_faulty.faulty:
        return None
    path = PurePosixPath(file)
    suffix = path.suffix.lower()
    if suffix not in WRITTEN:
        raise InputError(file, "", f'suffix "{suffix}" names no format', f"write one of {', '.join(WRITTEN)}")
    if vectors not in FORMS.get(suffix, ("float",)):
        raise InputError(
            file, "setting vectors", f'"{vectors}" is nothing that {suffix} holds', f"{', '.join(FORMS)} hold more"
        )
    if map is not None and suffix in WITHOUT_MAPS:
        raise InputError(file, "input map", f"{suffix} has no place for maps", "leave it out, and use `write` for it")
    if suffix in (".glb", ".gltf"):
        from tangentry.nodes.formats.gltf import write_gltf

        return Files(write_gltf(asset, map, path.name, vectors))
    if suffix not in WITHOUT_MAPS:
        from tangentry.nodes.formats.side_images import with_maps

        asset = with_maps(asset, map, path.stem)
    if suffix == ".obj":
        from tangentry.nodes.formats.obj_writing import write_obj

        return Files(write_obj(asset, path.stem))
    if suffix in (".usda", ".usdc"):
        from tangentry.nodes.formats.usd import write_usd

        return Files(write_usd(asset, path.stem, suffix))
    if suffix == ".ply":
        from tangentry.nodes.formats.ply_writing import write_ply

        return Files(write_ply(asset, path.stem))
    from tangentry.nodes.formats.npz import write_npz

    return Files((OutFile(path.name, write_npz(asset, vectors)),))
