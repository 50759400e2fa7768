"""Runs with workers (pytest-xdist): the same record as alone, one trim a point, nothing lost."""

from __future__ import annotations

import json
import os
import re
from collections import Counter
from typing import Any

import pytest
from basin_project import BREAKS, HOLDS, SPEC, WRONG, Project

MODES = [
    ("-n", "0"),
    ("-n", "2"),
    ("-n", "2", "--dist", "loadscope"),
    ("-n", "2", "--dist", "worksteal"),
    ("-p", "no:xdist"),
]


def _record(project: Project, *arguments: str) -> tuple[int, str, Any]:
    result = project.spawn(*arguments, "specs")
    text = (project.path / "reports/linverify.json").read_text(encoding="utf-8")
    return int(result.ret), text[: text.index('"provenance"')], project.body()


@pytest.mark.slow
def test_the_same_record_alone_and_with_workers(project: Project) -> None:
    """Every mode twice, byte for byte, over checks that hold and one that breaks."""
    project.write("specs/holds.yaml", HOLDS)
    project.write("specs/breaks.yaml", BREAKS)
    alone = _record(project)
    assert alone[0] == 1
    assert alone[2]["counts"] == {"fail": 1, "not run": 0, "pass": 11, "skipped": 0, "undecided": 0}
    for mode in MODES:
        for _ in range(2):
            assert _record(project, *mode) == alone, mode


def test_two_workers_write_the_record_of_a_run_alone(project: Project) -> None:
    project.write("specs/breaks.yaml", BREAKS)
    assert _record(project, "-n", "2") == _record(project, "-n", "0")


@pytest.mark.parametrize("mode", [(), ("--dist", "loadscope")])
def test_a_point_stays_on_one_worker(project: Project, monkeypatch: pytest.MonkeyPatch, mode: tuple[str, ...]) -> None:
    points = "".join(f"  p{level}:\n    hold: {{level: 1.{level} m}}\n" for level in range(6))
    project.write("specs/basin.yaml", SPEC + points)
    result = project.spawn("-n", "2", "-v", *mode, "specs")
    assert result.ret == 0
    where: dict[str, set[str]] = {}
    for line in result.outlines:
        if match := re.match(r"\[(gw\d)\].* PASSED (\S+)::\w+", line):
            where.setdefault(match[2], set()).add(match[1])
    assert len(where) == 8
    assert all(len(workers) == 1 for workers in where.values())
    assert len(set().union(*where.values())) == 2


def test_linear_algebra_has_one_thread_in_every_worker(project: Project, monkeypatch: pytest.MonkeyPatch) -> None:
    for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
        monkeypatch.delenv(name, raising=False)
    project.write("specs/basin.yaml", SPEC)
    for mode in (("-n", "2"), ("-n", "0")):
        assert project.spawn(*mode, "specs").ret == 0
        record = json.loads((project.path / "reports/linverify.json").read_text(encoding="utf-8"))
        assert record["provenance"]["machine"]["threads"] == "1 (before numpy was loaded)"


def test_a_conftest_that_loads_numpy_first_does_not_bring_its_threads(
    project: Project, monkeypatch: pytest.MonkeyPatch
) -> None:
    for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
        monkeypatch.delenv(name, raising=False)
    project.write("early.py", "import numpy\n")
    project.write("specs/basin.yaml", SPEC)
    monkeypatch.setenv("PYTHONPATH", str(project.path) + os.pathsep + os.environ.get("PYTHONPATH", ""))
    assert project.spawn("-p", "early", "specs").ret == 0
    record = json.loads((project.path / "reports/linverify.json").read_text(encoding="utf-8"))
    assert record["provenance"]["machine"]["threads"] == "1 (after numpy was loaded, by the library's own call)"


def test_other_tests_are_shared_out_as_the_mode_says(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write(
        "specs/test_other.py",
        "import pytest, time\n@pytest.mark.parametrize('n', range(12))\ndef test_one(n):\n    time.sleep(0.05)\n",
    )
    result = project.spawn("-n", "2", "-v", "specs")
    assert result.ret == 0
    result.assert_outcomes(passed=16)
    workers = Counter(line.split()[0] for line in result.outlines if "test_one" in line and "PASSED" in line)
    assert len(workers) == 2


def test_stopping_at_the_first_failure_names_what_was_not_run(project: Project) -> None:
    points = "".join(f"  p{level}:\n    hold: {{level: 1.{level} m}}\n" for level in range(6))
    project.write("specs/basin.yaml", WRONG + points)
    result = project.spawn("-n", "2", "-x", "specs")
    assert result.ret in (1, 2)
    counts = project.body("linverify-partial.json")["counts"]
    assert counts["fail"] == 1
    assert counts["not run"] >= 1
    assert sum(counts.values()) == 16


def test_ctrl_c_in_a_worker_names_what_was_not_run(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write(
        "conftest.py",
        "import pytest\n@pytest.fixture(autouse=True)\ndef stop(request):\n"
        "    if request.node.nodeid.endswith('high::trims'):\n        raise KeyboardInterrupt\n",
    )
    result = project.spawn("-n", "2", "specs")
    assert result.ret == 2
    statuses = project.statuses("linverify-partial.json")
    assert len(statuses) == 4
    assert statuses["basin.yaml::high::trims"] == "not run"
