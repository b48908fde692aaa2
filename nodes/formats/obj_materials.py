"""OBJ's material libraries: names, and the images they map (MTL; Advanced Visualizer manual, appendix B1)."""

from __future__ import annotations

import math
import ntpath

from tangentry.nodes.formats.obj_bump import holds_normals
from tangentry.nodes.formats.scan import as_words, shown
from tangentry.nodes.formats.side_images import image_beside
from tangentry.nodes.model import Image, MapUse, Material
from tangentry.pipeline.flow import InputFile

ROLES = {
    "map_kd": "colour",
    "map_ke": "emissive",
    "map_ks": "specular",
    "map_ns": "gloss",
    "map_d": "opacity",
    "map_ka": "ambient",
    "map_pr": "roughness",
    "map_pm": "metallic",
    "bump": "height",
    "map_bump": "height",
    "disp": "height",
    "norm": "normal",
    "map_kn": "normal",
}  # norm, map_kn, map_pr and map_pm: common practice, no source
PLACING = ("-o", "-s", "-t")
OPTION_WORDS = {
    "-blendu": 1,
    "-blendv": 1,
    "-boost": 1,
    "-bm": 1,
    "-cc": 1,
    "-clamp": 1,
    "-imfchan": 1,
    "-mm": 2,
    "-texres": 1,
    "-type": 1,
    "-o": 3,
    "-s": 3,
    "-t": 3,
}


class Materials:
    """The materials of a file as they are met: those its libraries describe, and bare names."""

    def __init__(self, file: InputFile) -> None:
        self._file = file
        self._maps: dict[str, list[MapUse]] = {}
        self._normal_maps: dict[int, bool] = {}
        self._libraries: set[str] = set()
        self._rows: dict[str, int] = {}
        self._image_rows: dict[str, int] = {}
        self.images: list[Image] = []
        self.notes: list[str] = []

    def library(self, name: str) -> None:
        """Read a library beside the file; one that is not there is noted."""
        if name in self._libraries:
            return
        self._libraries.add(name)
        beside = self._file.beside(_beside(name))
        if not beside.exists:
            self.notes.append(f"material library {shown(name)} is not there")
            return
        material, maps = "", {}  # type: str, dict[str, list[MapUse]]
        for line in as_words(beside.bytes().tobytes()).splitlines():
            keyword, _, rest = line.strip().replace("\t", " ").partition(" ")
            if keyword.lower() == "newmtl":
                material = rest.strip()
                maps.setdefault(material, [])
            elif keyword.lower() in ROLES and material and rest.strip():
                use = self._use(ROLES[keyword.lower()], rest.strip(), beside, material)
                if use is not None:
                    maps[material].append(use)
        self._maps = {**maps, **self._maps}

    def row(self, name: str) -> int:
        """The row of a material, by order of first use."""
        return self._rows.setdefault(name, len(self._rows))

    def all(self) -> tuple[Material, ...]:
        """The materials that were used."""
        return tuple(Material(name, tuple(self._maps.get(name, ()))) for name in self._rows)

    def _use(self, role: str, words: str, library: InputFile, material: str) -> MapUse | None:
        name, strength, placed = _image_name(words)
        if not name:
            return None
        if placed:
            self.notes.append(f'material "{shown(material)}": how {shown(name)} is placed (-o, -s, -t) is passed over')
        if name not in self._image_rows:
            self._image_rows[name] = len(self.images)
            beside, place = library.beside(_beside(name)), f'material "{shown(material)}", '
            self.images.append(image_beside(self._file, beside, name, place, self.notes))
        row = self._image_rows[name]
        if role == "height" and self._is_normal_map(row):
            self.notes.append(
                f'material "{shown(material)}": {shown(name)} holds normals, so it is no bump map of heights'
            )
            role = "normal"
        return MapUse(role, row, strength=strength)

    def _is_normal_map(self, row: int) -> bool:
        if row not in self._normal_maps:
            self._normal_maps[row] = holds_normals(self.images[row].content, self.images[row].name)
        return self._normal_maps[row]


def _image_name(words: str) -> tuple[str, float, bool]:
    """The image that a map statement names after its options, its bump multiplier, and do options move or scale it?"""
    parts = words.split()
    at, strength, placed = 0, 1.0, False
    while at < len(parts) and parts[at].lower() in OPTION_WORDS:
        option = parts[at].lower()
        at += 1
        placed |= option in PLACING
        for taken in range(OPTION_WORDS[option]):  # -o, -s and -t take one to three numbers
            if at >= len(parts) or (OPTION_WORDS[option] > 1 and not _is_number(parts[at])):
                break
            if option == "-bm" and taken == 0 and _is_number(parts[at]):
                strength = float(parts[at])
            at += 1
    return (words.split(maxsplit=at)[at] if at < len(parts) else ""), strength, placed


def _is_number(word: str) -> bool:
    try:
        return math.isfinite(float(word))
    except ValueError:
        return False


def _beside(name: str) -> str:
    """A path as written, relative to the file; of an absolute one, from somebody's machine, the last part."""
    if name.startswith(("/", "\\")) or ntpath.splitdrive(name)[0]:
        return ntpath.basename(name)
    return name.replace("\\", "/")
