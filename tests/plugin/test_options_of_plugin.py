"""The options of the plugin, and their mistakes."""

from __future__ import annotations

import json

import pytest
from basin_project import SPEC, Project

from linverify.checks import TABLE
from linverify.pytest_plugin.options import KINDS


@pytest.mark.parametrize("seed", ["x", "-1", "1.5", str(2**63)])
def test_a_seed_that_is_no_seed_is_told_before_anything_runs(project: Project, seed: str) -> None:
    result = project.run(f"--linverify-seed={seed}", "specs")
    assert result.ret == 4
    result.stderr.fnmatch_lines([f"*a seed is a whole number from 0 to {2**63 - 1}, got '{seed}'"])


def test_an_unknown_profile_is_told(project: Project) -> None:
    result = project.run("--linverify-profile=fast", "specs")
    assert result.ret == 4
    result.stderr.fnmatch_lines(["*invalid choice: 'fast'*"])


def test_a_reports_folder_that_is_a_file_is_told_before_anything_runs(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write("out", "a file")
    result = project.run("--linverify-reports=out", "specs")
    assert result.ret == 4
    result.stderr.fnmatch_lines(["ERROR: no reports can be written to out: out is in the way and no folder"])


def test_a_folder_that_cannot_be_written_to_is_told_before_anything_runs(
    project: Project, monkeypatch: pytest.MonkeyPatch
) -> None:
    project.write("specs/basin.yaml", SPEC)
    monkeypatch.setattr("os.access", lambda place, mode: False)  # as on a disk mounted for reading only
    result = project.run("specs")
    assert result.ret == 4
    result.stderr.fnmatch_lines(["ERROR: no reports can be written to reports: . cannot be written to"])
    assert project.run("--collect-only", "specs").ret == 0  # writes nothing


def test_seed_profile_and_folder_arrive_in_the_header_and_the_record(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    result = project.run("--linverify-seed=7", "--linverify-profile=quick", "--linverify-reports=out/deep", "specs")
    assert result.ret == 0
    result.stdout.fnmatch_lines(["linverify: version *, seed 7, profile quick"])
    record = json.loads((project.path / "out/deep/linverify-quick.json").read_text(encoding="utf-8"))
    assert record["provenance"]["seed"] == 7
    assert record["body"]["profile"] == "quick"
    assert project.reports == []


def test_the_markers_are_told(project: Project) -> None:
    result = project.pytester.runpytest_inprocess("--markers")
    result.stdout.fnmatch_lines(["@pytest.mark.linverify: *", "@pytest.mark.linverify_trims: *"])


def test_every_check_has_its_marker() -> None:
    from linverify.checks import TABLE
    from linverify.pytest_plugin.options import KINDS

    assert set(KINDS) == set(TABLE)


def test_there_is_a_marker_for_every_kind_of_check() -> None:
    # the names stand in the plugin a second time, since a run without specs must not import the checks
    assert tuple(TABLE) == KINDS
