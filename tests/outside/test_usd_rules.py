"""USD layers pass the validators that come with the library (usd-core, UsdValidation: OpenUSD's own rules)."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from shapes import box_part, torus_part
from tangentry.nodes.formats.images import write_png
from tangentry.nodes.formats.usd import write_usd
from tangentry.nodes.frames import frames
from tangentry.nodes.model import Asset, Image, MapUse, Material


@pytest.mark.parametrize("suffix", [".usda", ".usdc"])
def test_no_rule_of_usd_is_broken(tmp_path, suffix):
    usd, validation = pytest.importorskip("pxr.Usd"), pytest.importorskip("pxr.UsdValidation")
    image = Image("wood.png", "image/png", np.asarray(write_png(np.full((1, 1, 3), 128, np.uint8))))
    material = Material("wood", (MapUse("colour", 0), MapUse("normal", 0), MapUse("metallic roughness", 0)))
    parts = replace(torus_part(6, 4), material=0), replace(box_part(), material=0)
    for file in write_usd(frames(Asset("pier", parts, (material,), (image,))), "pier", suffix):
        (tmp_path / file.name).write_bytes(file.content.tobytes())

    stage = usd.Stage.Open(str(tmp_path / f"pier{suffix}"))
    rules = validation.ValidationRegistry().GetOrLoadAllValidators()
    found = validation.ValidationContext(rules).Validate(stage)

    assert len(rules) > 10 and [one.GetMessage() for one in found] == []
