"""OBJ's material libraries: names, and the images they map (MTL, as described in the Advanced Visualizer manual, appendix B1)."""

from __future__ import annotations

import ntpath

import numpy as np
from tangentry.nodes.formats.gltf_reading import sniff
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
}  # norm, map_pr and map_pm: common practice, no source
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
        self._maps: dict[str, tuple[MapUse, ...]] = {}
        self._rows: dict[str, int] = {}
        self._image_rows: dict[str, int] = {}
        self.images: list[Image] = []
        self.notes: list[str] = []

    def library(self, name: str) -> None:
        """Read a library beside the file; one that is not there is noted."""
        beside = self._file.beside(_beside(name))
        if not beside.exists:
            self.notes.append(f"material library {name} is not there")
            return
        material, maps = "", {}  # type: str, dict[str, tuple[MapUse, ...]]
        for line in beside.bytes().tobytes().decode("utf-8", "replace").splitlines():
            keyword, _, rest = line.strip().replace("\t", " ").partition(" ")
            if keyword.lower() == "newmtl":
                material = rest.strip()
                maps.setdefault(material, ())
            elif keyword.lower() in ROLES and material and rest.strip():
                use = self._use(ROLES[keyword.lower()], rest.strip(), beside)
                if use is not None:
                    maps[material] = (*maps.get(material, ()), use)
        self._maps = {**maps, **self._maps}

    def row(self, name: str) -> int:
        """The row of a material, by order of first use."""
        return self._rows.setdefault(name, len(self._rows))

    def all(self) -> tuple[Material, ...]:
        """The materials that were used."""
        return tuple(Material(name, self._maps.get(name, ())) for name in self._rows)

    def _use(self, role: str, words: str, library: InputFile) -> MapUse | None:
        name, strength = _image_name(words)
        if not name:
            return None
        if name not in self._image_rows:
            beside = library.beside(_beside(name))
            there = beside.exists
            if not there:
                self.notes.append(f"image {name} is not there")
            content = beside.bytes() if there else np.zeros(0, np.uint8)
            self._image_rows[name] = len(self.images)
            self.images.append(Image(beside.name, sniff(content), content))
        return MapUse(role, self._image_rows[name], strength=strength)


def _image_name(words: str) -> tuple[str, float]:
    """The image that a map statement names after its options, and its bump multiplier."""
    parts = words.split()
    at, strength = 0, 1.0
    while at < len(parts) and parts[at].lower() in OPTION_WORDS:
        count = OPTION_WORDS[parts[at].lower()]
        if parts[at].lower() == "-bm" and at + 1 < len(parts):
            try:
                strength = float(parts[at + 1])
            except ValueError:
                strength = 1.0
        taken = 0
        while taken < count and at + 1 + taken < len(parts) and (count == 1 or _is_number(parts[at + 1 + taken])):
            taken += 1
        at += 1 + taken
    if at >= len(parts):
        return "", strength
    return words[words.index(parts[at]) :] if at == 0 else words.split(maxsplit=at)[at], strength


def _is_number(word: str) -> bool:
    try:
        float(word)
    except ValueError:
        return False
    return True


def _beside(name: str) -> str:
    """A path as written, relative to the file; of an absolute one, from somebody's machine, the last part."""
    if name.startswith(("/", "\\")) or ntpath.splitdrive(name)[0]:
        return ntpath.basename(name)
    return name.replace("\\", "/")
