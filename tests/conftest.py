"""What every test may ask for: the folder of real samples, and the standard's glTF validator."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

SAMPLES = Path(__file__).parents[2] / "shared" / "samples"
VALIDATOR = Path(sys.prefix) / "npm" / "node_modules" / "gltf-validator"
VALIDATE = """
const {validateBytes} = require(process.argv[1]);
const fs = require("fs"), path = require("path");
const read = (file) => new Uint8Array(fs.readFileSync(file));
(async () => {
  const reports = {};
  for (const file of JSON.parse(fs.readFileSync(0, "utf8"))) {
    reports[file] = await validateBytes(read(file), {
      uri: path.basename(file), maxIssues: 1000,
      externalResourceFunction: async (uri) => read(path.join(path.dirname(file), decodeURIComponent(uri))),
    });
  }
  console.log(JSON.stringify(reports));
})();
"""


@pytest.fixture(scope="session")
def samples() -> Path:
    """The folder of real meshes and maps made by others; tests that need it say so when it is not there."""
    if not SAMPLES.is_dir():
        pytest.skip("the folder of real samples is not beside this checkout")
    return SAMPLES


@pytest.fixture(scope="session")
def validate() -> Callable[..., dict[str, dict[str, Any]]]:
    """validate(file, ...) -> {file: report} by the standard's validator (npm gltf-validator, Khronos)."""
    if not VALIDATOR.is_dir() or not shutil.which("node"):
        pytest.skip("the glTF validator is not installed: npm install --prefix .venv/npm gltf-validator")

    def run(*files: Path) -> dict[str, dict[str, Any]]:
        done = subprocess.run(
            ["node", "-e", VALIDATE, str(VALIDATOR)],
            input=json.dumps([str(file) for file in files]),
            capture_output=True,
            text=True,
            check=True,
        )
        return dict(json.loads(done.stdout))

    return run
