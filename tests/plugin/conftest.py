"""The project that the plugin is run on."""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from basin_project import BREAKS, PLANT, Project

from linverify.cli import main


@pytest.fixture(scope="session", autouse=True)
def _everything_is_loaded(tmp_path_factory: pytest.TempPathFactory) -> None:
    """Loads what is imported late: a run inside a test forgets what it loads, and numpy cannot be loaded twice."""
    folder: Path = tmp_path_factory.mktemp("warm")
    (folder / "plant.py").write_text(PLANT)
    (folder / "spec.yaml").write_text(BREAKS)
    before = dict(os.environ)
    assert main(["check", "--profile", "quick", str(folder)]) in (0, 1)
    os.environ.clear()
    os.environ.update(before)


@pytest.fixture
def project(pytester: pytest.Pytester) -> Project:
    """A project with a plant and no spec yet."""
    return Project(pytester)
