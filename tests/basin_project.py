"""A small project of our own that the plugin is run on: a leaking basin, two operating points, no drives."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

PLANT = '''
import os
import numpy as np
from linverify import Plant

def dynamics(t, x, u, p):
    """A basin that leaks: a linear part, and one that grows with the square of the level."""
    if os.environ.get("BASIN_LOG") and np.ndim(x) == 1:
        with open(os.environ["BASIN_LOG"], "a") as log:
            log.write(f"{os.getpid()}\\\\n")
    return u - p["leak"] * x - p["bend"] * x**2

basin = Plant(
    states={"level": "m"},
    inputs={"inflow": "m/s"},
    parameters={"leak": (1.0, "1/s"), "bend": (0.0, "1/m/s")},
    dynamics=dynamics,
)
'''

SPEC = """\
linverify: 1
title: A leaking basin
plant: plant.py:basin
envelope: {level: [-1 m, 4 m], inflow: [-1 m/s, 8 m/s]}
operating_points:
  low:
    hold: {level: 0.5 m}
  high:
    hold: {level: 2 m}
"""
WRONG = SPEC + "    expect: {inflow: 2.5 m/s +- 1 %}\n"  # it is 2 m/s
DRIVES = """\
drives: {horizon: 2 s, every: 250 ms, amplitude: {inflow: 0.5 m/s}, count: 60, search: 10}
"""
HOLDS = SPEC + DRIVES + "error_bands: {level: {peak: 1 cm}}\n"
BREAKS = HOLDS.replace("plant.py:basin\n", "plant.py:basin\nparameters: {bend: 0.5}\n")


class Project:
    """Writes specs, runs pytest on them, and reads what came of it."""

    def __init__(self, pytester: pytest.Pytester) -> None:
        self.pytester = pytester
        self.path = pytester.path
        pytester.makeini("[pytest]\naddopts = --strict-markers\n")
        self.write("specs/plant.py", PLANT)

    def write(self, name: str, text: str) -> Path:
        """Write a file under the project's root."""
        path = self.path / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
        return path

    def run(self, *arguments: str) -> pytest.RunResult:
        """Run pytest in this process."""
        return self.pytester.runpytest_inprocess("--linverify", *(arguments or ("specs",)))

    def spawn(self, *arguments: str) -> pytest.RunResult:
        """Run pytest in a process of its own: for workers, and for what ends a process."""
        return self.pytester.runpytest_subprocess("--linverify", *(arguments or ("specs",)), timeout=120)

    def body(self, name: str = "linverify.json", folder: str = "reports") -> dict[str, Any]:
        """The body of a record."""
        return dict(json.loads((self.path / folder / name).read_text(encoding="utf-8"))["body"])

    def statuses(self, name: str = "linverify.json") -> dict[str, str]:
        """Status of each item of a record, ids without `specs/`."""
        return {item["id"].removeprefix("specs/"): item["status"] for item in self.body(name)["items"]}

    @property
    def reports(self) -> list[str]:
        """Names of the files in reports/."""
        folder = self.path / "reports"
        return sorted(path.name for path in folder.iterdir()) if folder.exists() else []
