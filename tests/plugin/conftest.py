"""The project that the plugin is run on."""

from __future__ import annotations

import pytest
from basin_project import Project


@pytest.fixture()
def project(pytester: pytest.Pytester) -> Project:
    """A project with a plant and no spec yet."""
    return Project(pytester)
