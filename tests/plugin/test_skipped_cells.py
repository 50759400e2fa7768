"""Cells of a sweep that the spec skips on purpose: told with their reason, never silently left out."""

from __future__ import annotations

import pytest
from basin_project import SPEC, Project

SWEEP = (
    SPEC[: SPEC.index("operating_points")]
    + """\
operating_points:
  filled:
    sweep: {level: [0.5 m, 1 m, 3 m]}
    skip: ["filled-3m"]
"""
)


def test_a_skipped_cell_is_reported_and_does_not_fail_the_build(project: Project) -> None:
    project.write("specs/basin.yaml", SWEEP)
    result = project.run("-rs", "specs")
    assert result.ret == 0
    result.assert_outcomes(passed=4, skipped=2)
    result.stdout.fnmatch_lines(["SKIPPED * specs/basin.yaml: skipped by `skip: filled-3m`, specs/basin.yaml:8:12"])
    statuses = project.statuses()
    assert {name for name, status in statuses.items() if status == "skipped"} == {
        "basin.yaml::filled-3m::trims",
        "basin.yaml::filled-3m::differentiable",
    }
    assert project.body()["partial"] is False


def test_with_workers_the_record_is_the_same(project: Project) -> None:
    project.write("specs/basin.yaml", SWEEP)
    assert project.run("specs").ret == 0
    alone = project.body()
    assert project.spawn("-n", "2", "specs").ret == 0
    assert project.body() == alone


def test_a_spec_that_skips_everything_it_has_selected_is_told(project: Project) -> None:
    project.write("specs/basin.yaml", SWEEP)
    said = "every check that was selected is skipped, so nothing was judged"
    for run in (project.run("specs/basin.yaml::filled-3m"), project.spawn("-n", "2", "specs/basin.yaml::filled-3m")):
        assert run.ret == pytest.ExitCode.NO_TESTS_COLLECTED
        run.stdout.fnmatch_lines(["2 checks: 2 skipped", "Partial run:*", said])
