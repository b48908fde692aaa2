"""The page: what it says, that it is one safe file, and that its viewer gets what the mesh has."""

from __future__ import annotations

import json
import re
from base64 import b64decode
from dataclasses import replace
from html.parser import HTMLParser

import numpy as np
import pytest
from numpy.testing import assert_allclose
from shapes import asset, box_part, grid_part, torus_part
from tangentry.nodes.check import check
from tangentry.nodes.frames import frames
from tangentry.nodes.layout import layout
from tangentry.nodes.model import Map, Material, Sheet
from tangentry.nodes.page import page
from tangentry.nodes.pages.scene import VERTEX
from tangentry.nodes.preview import preview
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Finding, Findings


class Reader(HTMLParser):
    """What stands in a page: tags with their attributes, and text by the tag it is in."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.words: list[tuple[str, str]] = []
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))

    def handle_data(self, data):
        self.words.append((self.tags[-1][0] if self.tags else "", data))

    def attributes(self, tag: str, name: str) -> list[str]:
        return [own[name] or "" for one, own in self.tags if one == tag and name in own]


def text(findings, **more) -> str:
    (file,) = page(findings, file="library.html", **more).files
    return file.content.tobytes().decode()


def scene(page_text: str) -> dict:
    return json.loads(re.search(r'class="scene">(.*?)</script>', page_text)[1])


def unpacked(code: str, kind) -> np.ndarray:
    return np.frombuffer(b64decode(code), kind)


def finding(severity: str, accepted: str = "", what: str = "what", elements=(0,)) -> Finding:
    rows = np.array(elements, np.int32)
    return Finding(
        "uv-skewed", severity, len(rows), what, "advice", "box", "", "face", rows, rows * 0.0, None, accepted
    )


def test_the_worst_assets_come_first_and_are_counted():
    library = {
        "a": Findings("a", (), {}),
        "b": Findings("b", (finding("warning"),), {}),
        "c": Findings("c", (finding("fault"),), {}),
        "d": Findings("d", (finding("fault", "agreed"),), {}),
    }
    told = Reader(text(library))

    assert told.attributes("article", "data-verdict") == ["faulty", "warned", "sound", "sound"]
    assert ("p", "4 assets: 1 faulty, 1 warned, 2 sound") in told.words


@pytest.mark.parametrize("hostile", ["</script><script>alert(1)</script>", '"><img src=x onerror=alert(1)>', "$title"])
def test_names_from_files_are_only_text(hostile):
    part = replace(box_part(), name=hostile)
    one = Findings(hostile, (replace(finding("fault", what=hostile), part=hostile),), {hostile: hostile})
    plain = Reader(
        text({"box": Findings("box", (finding("fault"),), {"box": "box"})}, assets={"box": asset(box_part())})
    )

    told = Reader(text({hostile: one}, assets={hostile: asset(part)}))

    assert [tag for tag, _ in told.tags] == [tag for tag, _ in plain.tags]
    assert [words for tag, words in told.words if tag == "p"].count(hostile) == 1


def test_it_fetches_nothing():
    mesh = frames(asset(torus_part(8, 6)), where="all")
    found = check(mesh)
    made = text({"t": found}, assets={"t": mesh}, layouts={"t": layout(mesh, found, file="t.png", size=128)},
                previews={"t": preview(mesh, size=32)})  # fmt: skip
    told = Reader(made)

    assert all(source.startswith("data:image/png;base64,iVBOR") for source in told.attributes("img", "src"))
    assert len(told.attributes("img", "src")) == 2
    assert not re.search(r"https?:|url\(|@import|src=\"(?!data:)", made)


def test_the_viewer_gets_the_mesh_as_it_is():
    mesh = frames(asset(torus_part(16, 12)), where="all")
    part = mesh.parts[0]

    drawn = scene(text({"t": check(mesh)}, assets={"t": mesh}))
    rows, triangles = unpacked(drawn["vertices"], VERTEX), unpacked(drawn["triangles"], "<u4")
    low, sides = np.array(drawn["box"]).reshape(2, 3)
    points = low + rows["point"][triangles, :3] / 65535 * sides

    assert len(triangles) == 3 * 2 * part.face_count == 3 * drawn["groups"][0]["count"]
    assert_allclose(np.unique(points.round(3), axis=0), np.unique(part.points.values.round(3), axis=0), atol=2e-3)
    assert_allclose(np.linalg.norm(rows["normal"][:, :3] / 32767, axis=1), 1, atol=1e-4)
    assert_allclose(np.linalg.norm(rows["tangent"][:, :3] / 32767, axis=1), 1, atol=1e-4)
    assert set(np.unique(rows["tangent"][:, 3])) == {32767}


def test_a_finding_is_shown_on_the_triangles_of_its_faces():
    mesh = asset(replace(box_part(), name="box"))
    found = Findings("b", (finding("fault", elements=(1, 4)), finding("note", elements=())), {})

    drawn = scene(text({"b": found}, assets={"b": mesh}))

    assert {key: unpacked(code, "<u4").tolist() for key, code in drawn["marks"].items()} == {"0": [2, 3, 8, 9]}


def test_each_part_has_the_map_of_its_material():
    parts = tuple(replace(grid_part(), name=name, material=row) for row, name in enumerate(("stone", "bare")))
    mesh = frames(replace(asset(*parts), materials=(Material("stone"), Material("bare"))), where="all")
    flat = np.full((4, 4, 3), (128, 128, 255), np.uint8)
    map = Map((Sheet("stone", flat, "normal", "tangent", "up"),))

    drawn = scene(text({"g": check(mesh)}, assets={"g": mesh}, maps={"g": map}))

    assert [group["map"] for group in drawn["groups"]] == [0, -1]
    assert b64decode(drawn["maps"][0]).startswith(b"\x89PNG")


def test_meshes_beyond_the_limit_have_no_viewer():
    mesh = asset(box_part())
    found = {"b": check(mesh)}

    assert 'class="scene"' in text(found, assets={"b": mesh}, viewer=12)
    assert 'class="scene"' not in text(found, assets={"b": mesh}, viewer=11)


def test_only_html_is_written():
    with pytest.raises(InputError, match="only HTML is written"):
        page({}, file="library.pdf")
