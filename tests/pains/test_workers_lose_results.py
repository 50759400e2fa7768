"""Runs with workers (pytest-xdist): empty reports, work done twice, modes without effect, failures that vanish."""

from __future__ import annotations

import re
from collections import defaultdict

from basin_project import SPEC, Project

FOUR = SPEC + "".join(f"  p{level}:\n    hold: {{level: 1.{level} m}}\n" for level in (1, 2))


def _nothing_is_missing(project: Project) -> None:
    """The report is written once, by the process that started the workers, and has all of it."""
    statuses = project.statuses()
    assert len(statuses) == 8
    assert set(statuses.values()) == {"pass"}
    rows = (project.path / "reports" / "compliance.csv").read_text(encoding="utf-8").splitlines()
    assert len(rows) == 1 + 8


def test_a_point_is_worked_on_once_and_reported_once(project: Project) -> None:
    """xdist 3.8 on its own works out four points eight times over two workers, and leaves reports to each of them."""
    project.write("specs/basin.yaml", FOUR)
    result = project.spawn("-n", "2", "-v", "specs")
    assert result.ret == 0
    workers: dict[str, set[str]] = defaultdict(set)
    for line in result.outlines:
        if match := re.match(r"\[(gw\d)\].* PASSED (\S+)::\w+", line):
            workers[match[2]].add(match[1])
    assert len(workers) == 4
    assert all(len(each) == 1 for each in workers.values())
    _nothing_is_missing(project)


def test_a_mode_without_effect_costs_time_only(project: Project) -> None:
    """loadgroup groups nothing on pytest 9.2: whoever insists on it gets the same report, only later."""
    project.write("specs/basin.yaml", FOUR)
    assert project.spawn("-n", "2", "--dist", "loadgroup", "specs").ret == 0
    _nothing_is_missing(project)


def test_a_crash_is_one_failure_and_what_it_took_along_is_named(project: Project) -> None:
    """xdist 3.8 runs a crashing test again and again, and with a limit on restarts drops the tests that are left."""
    source = (project.path / "specs/plant.py").read_text(encoding="utf-8")
    dies = "\n    if abs(float(np.ravel(x)[0]) - 0.5) < 1e-3:\n        os._exit(0)\n    return u"
    project.write("specs/plant.py", source.replace("\n    return u", dies))
    project.write("specs/basin.yaml", FOUR)
    result = project.spawn("-n", "2", "--max-worker-restart=0", "specs")
    assert result.ret not in (0, 5)
    statuses = project.statuses("linverify-partial.json")
    assert len(statuses) == 8  # everything that was planned has a row
    lost = {name.removeprefix("basin.yaml::") for name, status in statuses.items() if status == "not run"}
    assert lost >= {"low::trims", "low::differentiable"}
    assert set(statuses.values()) <= {"pass", "not run"}
    items = {item["id"]: item for item in project.body("linverify-partial.json")["items"]}
    assert items["specs/basin.yaml::low::trims"]["reason"] == "the process that ran this check died while it ran"
