"""Reading mesh files."""

from __future__ import annotations

from typing import Literal

from tangentry.nodes.model import Asset
from tangentry.pipeline.errors import InputError, nearest
from tangentry.pipeline.flow import InputFile

READ = (".obj", ".ply", ".stl", ".gltf", ".glb")
STARTS = {
    b"glTF": ".glb",
    b"ply\n": ".ply",
    b"ply\r": ".ply",
    b"\x89PNG": "a PNG image",
    b"\xff\xd8\xff": "a JPEG image",
    b"PK\x03\x04": "a ZIP archive",
}


def load(file: InputFile | str, *, if_missing: Literal["fail", "skip"] = "fail") -> Asset | None:
    """The asset in a mesh file: OBJ, PLY, STL, glTF or GLB, by its suffix.

    file        the mesh; the files it names (materials, buffers, images) are read beside it
    if_missing  skip: leave the asset out where there is no such file

    Nothing is lost: polygons, index streams and a glTF document are kept as they are; what of the others is passed over
    is noted. STL brings no UVs: `frames` refuses it. Raises InputError naming the file, the line, vertex, accessor or
    primitive, and the value that can't be used.
    """
    file = InputFile.of(file)
    if if_missing == "skip" and not file.exists:
        return None
    content = file.bytes()
    if not len(content):
        raise InputError(file, "", "the file is empty", "export it again")
    head = content[:4].tobytes()
    kind = next((kind for start, kind in STARTS.items() if head.startswith(start)), "")
    if file.suffix not in READ:
        raise InputError(
            file,
            "",
            f'suffix "{file.suffix}" names no mesh format; {", ".join(READ)} are read.{nearest(file.suffix, READ)}',
            "",
        )
    if kind and kind != file.suffix and (kind, file.suffix) != (".glb", ".gltf"):
        raise InputError(file, "", f"its suffix says {file.suffix}, but it holds {kind}", "give it its right suffix")
    if file.suffix == ".obj":
        from tangentry.nodes.formats.obj import read_obj

        return read_obj(file)
    if file.suffix == ".ply":
        from tangentry.nodes.formats.ply import read_ply

        return read_ply(file)
    if file.suffix == ".stl":
        from tangentry.nodes.formats.stl import read_stl

        return read_stl(file)
    from tangentry.nodes.formats.gltf import read_gltf

    return read_gltf(file)
