"""The small project of texts, for every test of the pipeline."""

from __future__ import annotations

from pathlib import Path

import pytest
from text_project import Project


@pytest.fixture
def project(tmp_path: Path) -> Project:
    """A project with three assets and five nodes."""
    return Project(tmp_path)


@pytest.fixture(scope="session")
def make_project() -> type[Project]:
    """Makes a project in a folder."""
    return Project
