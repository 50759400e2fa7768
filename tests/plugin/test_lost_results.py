"""What was selected and has no verdict is a row NOT RUN, and fails the build: a gate must not lose a failure."""

from __future__ import annotations

import pytest
from basin_project import SPEC, WRONG, Project

DIES = "\n    if abs(float(np.ravel(x)[0]) - 0.5) < 1e-3:\n        os._exit(0)\n    return u"


def _deadly(project: Project) -> None:
    """The plant ends its process near the level of the point `low`, with exit status 0."""
    source = (project.path / "specs/plant.py").read_text(encoding="utf-8")
    project.write("specs/plant.py", source.replace("\n    return u", DIES))
    points = "".join(f"  p{level}:\n    hold: {{level: 1.{level} m}}\n" for level in range(4))
    project.write("specs/basin.yaml", SPEC + points)


def test_a_worker_that_dies_loses_only_the_checks_it_died_on(project: Project) -> None:
    _deadly(project)
    result = project.spawn("-n", "2", "specs")
    assert result.ret == 1
    statuses = project.statuses("linverify-partial.json")
    assert len(statuses) == 12
    lost = {name for name, status in statuses.items() if status == "not run"}
    assert lost == {"basin.yaml::low::trims", "basin.yaml::low::differentiable"}  # each of them ends a process
    assert {status for name, status in statuses.items() if name not in lost} == {"pass"}
    result.stdout.fnmatch_lines(["not run *the process that ran this check died while it ran*low::trims*"])
    crashes = [line for line in result.outlines if "crashed while running" in line and line.startswith("worker")]
    assert len(crashes) == 2  # none is run twice


def test_a_worker_that_dies_and_is_not_replaced_leaves_named_rows(project: Project) -> None:
    _deadly(project)
    result = project.spawn("-n", "1", "--max-worker-restart=0", "specs")
    assert result.ret not in (0, 5)
    statuses = project.statuses("linverify-partial.json")
    assert len(statuses) == 12
    assert set(statuses.values()) == {"not run"}
    reasons = {item["reason"] for item in project.body("linverify-partial.json")["items"]}
    assert "the process that ran this check died while it ran" in reasons


@pytest.mark.parametrize("workers", ["1", "2"])
def test_a_result_that_cannot_be_sent_is_not_run(project: Project, workers: str) -> None:
    """A property that no channel can carry makes the worker lose the report of a check."""
    project.write("specs/basin.yaml", SPEC)
    project.write(
        "conftest.py",
        "import pytest\n@pytest.fixture(autouse=True)\ndef broken(request):\n"
        "    if request.node.nodeid.endswith('low::trims'):\n"
        "        request.node.user_properties.append(('odd', object()))\n",
    )
    result = project.spawn("-n", workers, "specs")
    assert result.ret not in (0, 5)
    statuses = project.statuses("linverify-partial.json")
    assert statuses["basin.yaml::low::trims"] == "not run"
    assert len(statuses) == 4


def test_a_verdict_that_arrives_broken_is_not_run(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write(
        "conftest.py",
        "import pytest\n@pytest.hookimpl(tryfirst=True)\ndef pytest_runtest_logreport(report):\n"
        "    if report.nodeid.endswith('low::trims'):\n"
        "        report.user_properties = [(name, value[:-9]) for name, value in report.user_properties]\n",
    )
    result = project.run("specs")
    assert result.ret == 1
    items = {item["id"]: item for item in project.body("linverify-partial.json")["items"]}
    assert items["specs/basin.yaml::low::trims"]["status"] == "not run"
    assert items["specs/basin.yaml::low::trims"]["reason"].startswith("its verdict arrived broken")


def test_a_fixture_that_fails_leaves_its_check_not_run(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write(
        "conftest.py",
        "import pytest\n@pytest.fixture(autouse=True)\ndef broken(request):\n"
        "    assert not request.node.nodeid.endswith('low::trims')\n",
    )
    result = project.run("specs")
    assert result.ret == 1
    items = {item["id"]: item for item in project.body("linverify-partial.json")["items"]}
    assert items["specs/basin.yaml::low::trims"]["reason"] == "its setup phase failed before there was a verdict"


def test_a_second_verdict_cannot_hide_a_failure(project: Project) -> None:
    """As it would come from a plugin that runs failed tests again."""
    project.write("specs/basin.yaml", WRONG)
    project.write(
        "conftest.py",
        "import pytest\n@pytest.hookimpl(tryfirst=True)\ndef pytest_runtest_logreport(report):\n"
        "    if report.when == 'teardown':\n        report.user_properties = [\n"
        '            (name, value.replace(\'"status":"fail"\', \'"status":"pass"\'))'
        " for name, value in report.user_properties]\n",
    )
    assert project.run("specs").ret == 1
    assert project.statuses()["basin.yaml::high::trims"] == "fail"
