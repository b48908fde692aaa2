"""Makes the props of the ferry terminal, and the flawed ones that are sent back; each time the same bytes.

python graphs/ferry_terminal/make_props.py [FOLDER]     into this folder, or another
"""

from __future__ import annotations

import sys
from pathlib import Path

from tangentry.graphs.ferry_terminal.making import flaws, props, textures
from tangentry.nodes.formats.gltf import write_gltf
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.formats.obj_writing import write_obj
from tangentry.nodes.formats.ply_writing import write_ply
from tangentry.nodes.model import Asset
from tangentry.pipeline.flow import OutFile

PROPS = {
    props.bollard: ".obj",
    props.life_ring: ".glb",
    props.buoy: ".ply",
    props.crate: ".obj",
    props.quay_slab: ".obj",
    props.stair: ".obj",
    props.lantern: ".glb",
    props.bench: ".obj",
    props.oar: ".glb",
    props.ticket_kiosk: ".obj",
    props.cleat: ".obj",
    props.mooring_post: ".ply",
    props.gangway: ".glb",
}


def written(asset: Asset, name: str) -> tuple[OutFile, ...]:
    """One prop in the format of its name's suffix, its textures beside it or, in a GLB, inside."""
    stem, _, suffix = name.rpartition(".")
    if suffix == "glb":
        return write_gltf(asset, None, name)
    return (write_ply if suffix == "ply" else write_obj)(asset, stem)


def main(folder: Path) -> None:
    """Make everything."""

    def put(room: str, *files: OutFile) -> None:
        for file in files:
            (folder / room).mkdir(exist_ok=True)
            (folder / room / file.name).write_bytes(file.content.tobytes())

    for make, suffix in PROPS.items():
        put("props", *written(textures.painted(make()), make.__name__ + suffix))
    put("props", OutFile("quay_slab_height.png", write_png(textures.cobbles())))
    put("props", OutFile("crate_height.png", write_png(textures.wood_grain())))
    put("detail", *written(props.cleat(6), "cleat_detailed.obj"))
    for name, asset in {
        "bench_sheared.obj": flaws.sheared(props.bench(), 60),
        "kiosk_half_unwrapped.obj": flaws.flattened(props.ticket_kiosk()),
        "oar_sharing_its_seam.glb": flaws.stored(props.oar(), flaws.shared_across_the_mirror),
        "life_ring_without_tangents.glb": flaws.stored(props.life_ring(), flaws.zeroed),
        "buoy_inside_out.ply": flaws.inside_out(props.buoy()),
        "crate_with_a_fin.obj": flaws.with_a_fin(),
        "post_without_uvs.obj": flaws.without_uvs(props.mooring_post()),
    }.items():
        put("sent_back", *written(asset, name))
    stair, *beside = written(props.stair(), "stair_cut_off.obj")
    put("sent_back", flaws.robbed(stair), *beside)


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent)
