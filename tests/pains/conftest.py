"""The public road for plants that are written down in a test: plant.py and a spec in a folder, to verdicts."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from textwrap import dedent

import pytest
from basin_project import Project

from linverify.checks.judge import judge
from linverify.core.case import Case, Options
from linverify.core.verdict import Verdict
from linverify.spec.bind import load

HEAD = "import numpy as np\nfrom linverify import Plant\n\n"
Bind = Callable[[str, str], tuple[Case, ...]]
Judge = Callable[[str, str], dict[str, Verdict]]


@pytest.fixture
def bound(tmp_path: Path) -> Bind:
    """Writes plant.py and plant.yaml, and binds the spec: its cases, or SpecError."""

    def bind(plant: str, spec: str) -> tuple[Case, ...]:
        (tmp_path / "plant.py").write_text(HEAD + dedent(plant), encoding="utf-8")
        text = "linverify: 1\nplant: plant.py:plant\n" + dedent(spec)
        (tmp_path / "plant.yaml").write_text(text, encoding="utf-8")
        return load(tmp_path / "plant.yaml", tmp_path)

    return bind


@pytest.fixture
def judged(bound: Bind) -> Judge:
    """As `bound`, and judges everything: verdicts by `POINT.CHECK`."""

    def verdicts(plant: str, spec: str) -> dict[str, Verdict]:
        cases = bound(plant, spec)
        return {f"{case.point}.{ask.name}": judge(case, ask, Options()) for case in cases for ask in case.checks}

    return verdicts


@pytest.fixture
def project(pytester: pytest.Pytester) -> Project:
    """A project with a plant and no spec yet, for runs of pytest."""
    return Project(pytester)
