"""What a check that does not pass shows: its finding, never a traceback; a defect keeps its traceback."""

from __future__ import annotations

import re

import pytest
from basin_project import BREAKS, SPEC, WRONG, Project

import linverify.pytest_plugin.nodes


def test_a_failed_check_shows_what_was_found_and_no_traceback(project: Project) -> None:
    project.write("specs/basin.yaml", WRONG)
    result = project.run("specs")
    assert result.ret == 1
    result.assert_outcomes(passed=3, failed=1)
    text = "\n".join(result.outlines)
    block = text[text.index("high: trims") :]
    line = WRONG.splitlines().index("  high:") + 1
    assert re.search(rf"asked at +specs/basin.yaml:{line}:", block)
    assert "inflow" in block
    assert "Traceback" not in text
    assert "nodes.py" not in text
    result.stdout.fnmatch_lines(["FAILED specs/basin.yaml::high::trims - distance from *"])


def test_a_broken_band_shows_the_drive_and_how_to_replay_it(project: Project) -> None:
    project.write("specs/basin.yaml", BREAKS)
    result = project.run("specs")
    text = "\n".join(result.outlines)
    block = text[text.index("low: follows") :]
    assert re.search(r"required +peak error of level at most 1 cm \(from specs/basin.yaml:\d+:\d+\)", block)
    assert re.search(r"found +\d\.\d+ cm .* on level at t = [\d.]+ s; headroom -\d+", block)
    assert re.search(r"simplest drive +inflow steps to -?0\.\d+ m/s at [\d.]+ s", block)
    assert re.search(
        r"replay +python -m linverify replay specs/basin.yaml::low::follows reports/evidence/[0-9a-f]{12}\.json", block
    )


def test_a_plant_that_raises_leaves_its_checks_undecided(project: Project) -> None:
    project.write(
        "specs/plant.py", (project.path / "specs/plant.py").read_text().replace("return u", "return 1 / 0 + u")
    )
    project.write("specs/basin.yaml", SPEC)
    result = project.run("specs")
    assert result.ret == 1
    assert set(project.statuses().values()) == {"undecided"}
    text = "\n".join(result.outlines)
    assert "ZeroDivisionError" in text
    assert "Traceback" not in text


def test_a_defect_of_ours_keeps_its_traceback_and_fails_the_build(
    project: Project, monkeypatch: pytest.MonkeyPatch
) -> None:
    def broken(*arguments: object) -> None:
        raise LookupError("a defect")

    monkeypatch.setattr(linverify.pytest_plugin.nodes, "judge", broken)
    project.write("specs/basin.yaml", SPEC)
    result = project.run("specs", "-k", "low and trims")
    assert result.ret == 1
    result.stdout.fnmatch_lines(["*raise LookupError(*", "E *LookupError: a defect"])
    assert project.statuses("linverify-partial.json") == {"basin.yaml::low::trims": "not run"}
