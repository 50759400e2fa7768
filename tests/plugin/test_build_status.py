"""The exit status of the build, and which report a run may write over."""

from __future__ import annotations

import pytest
from basin_project import SPEC, WRONG, Project

FULL = ["compliance.csv", "compliance.md", "linverify.json"]
PARTIAL = ["linverify-partial.csv", "linverify-partial.json", "linverify-partial.md"]


def test_all_pass(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    result = project.run("specs")
    assert result.ret == 0
    assert project.reports == FULL
    assert project.body()["counts"] == {"fail": 0, "not run": 0, "pass": 4, "skipped": 0, "undecided": 0}
    result.stdout.fnmatch_lines(["4 checks: 4 pass", "report: reports/compliance.md"])


@pytest.mark.parametrize("argument", ["-x", "--maxfail=1"])
def test_stopping_at_the_first_failure_leaves_rows_that_were_not_run(project: Project, argument: str) -> None:
    project.write("specs/a_wrong.yaml", WRONG.replace("inflow: 2.5", "inflow: 2.6"))
    project.write("specs/basin.yaml", SPEC)
    result = project.run(argument, "specs")
    assert result.ret == 1
    assert project.reports == PARTIAL
    counts = project.body("linverify-partial.json")["counts"]
    assert counts == {"fail": 1, "not run": 5, "pass": 2, "skipped": 0, "undecided": 0}
    reasons = {i["reason"] for i in project.body("linverify-partial.json")["items"] if i["status"] == "not run"}
    assert reasons == {"the run ended before this check began: stopping after 1 failures"}


@pytest.mark.parametrize("workers", [(), ("-n", "2")])
def test_one_spec_by_its_name_is_a_full_report_of_it(project: Project, workers: tuple[str, ...]) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write("specs/beside.yaml", SPEC)
    result = project.run("specs/basin.yaml", *workers)
    assert result.ret == 0
    assert project.reports == FULL
    assert {name.split("::")[0].rpartition("/")[2] for name in project.statuses()} == {"basin.yaml"}


def test_ctrl_c_leaves_rows_that_were_not_run(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write(
        "conftest.py",
        "import pytest\n@pytest.fixture(autouse=True)\ndef stop(request):\n"
        "    if request.node.nodeid.endswith('high::trims'):\n        raise KeyboardInterrupt\n",
    )
    result = project.spawn("specs")
    assert result.ret == 2
    assert project.reports == PARTIAL
    assert project.statuses("linverify-partial.json") == {
        "basin.yaml::low::trims": "pass",
        "basin.yaml::low::differentiable": "pass",
        "basin.yaml::high::trims": "not run",
        "basin.yaml::high::differentiable": "not run",
    }


@pytest.mark.parametrize("arguments", [("-k", "low", "specs"), ("specs/basin.yaml::low",), ("specs", "--lf")])
def test_a_partial_run_never_writes_over_a_full_report(project: Project, arguments: tuple[str, ...]) -> None:
    project.write("specs/basin.yaml", WRONG)
    project.write("specs/other.yaml", SPEC)
    assert project.run("specs").ret == 1
    before = (project.path / "reports/linverify.json").read_bytes()
    result = project.run(*arguments)
    result.stdout.fnmatch_lines(["Partial run:*", "report: reports/linverify-partial.md"])
    assert (project.path / "reports/linverify.json").read_bytes() == before
    assert project.body("linverify-partial.json")["partial"] is True
    assert len(project.statuses("linverify-partial.json")) < 8


def test_no_spec_at_all_is_no_pass(project: Project) -> None:
    project.write("specs/test_other.py", "def test_other():\n    pass\n")
    result = project.run("specs")
    assert result.ret == 5
    result.assert_outcomes(passed=1)
    result.stdout.fnmatch_lines(["--linverify was given, but no spec (*.yaml) was found, so nothing was judged"])
    assert project.reports == []


def test_nothing_selected_is_no_pass(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write("specs/test_other.py", "def test_other():\n    pass\n")
    result = project.run("-k", "test_other", "specs")
    assert result.ret == 5
    result.stdout.fnmatch_lines(["no check of a spec was selected, so nothing was judged"])


def test_a_check_that_was_marked_away_is_not_run_and_no_pass(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write(
        "conftest.py",
        "import pytest\ndef pytest_collection_modifyitems(items):\n"
        "    items[0].add_marker(pytest.mark.skip(reason='no'))\n",
    )
    result = project.run("specs")
    assert result.ret == 1
    assert project.statuses("linverify-partial.json")["basin.yaml::low::trims"] == "not run"


def test_an_expected_failure_still_fails_the_build(project: Project) -> None:
    project.write("specs/basin.yaml", WRONG)
    project.write(
        "conftest.py",
        "import pytest\ndef pytest_collection_modifyitems(items):\n"
        "    [item.add_marker(pytest.mark.xfail(reason='no')) for item in items if 'trims' in item.name]\n",
    )
    result = project.run("specs")
    assert result.ret == 1
    assert project.statuses()["basin.yaml::high::trims"] == "fail"


def test_without_a_cache(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    assert project.run("-p", "no:cacheprovider", "specs").ret == 0


def test_without_a_terminal_the_verdict_is_the_same(project: Project) -> None:
    project.write("specs/basin.yaml", WRONG)
    result = project.run("-p", "no:terminal", "specs")
    assert result.ret == 1
    assert project.body()["counts"]["fail"] == 1


def test_quick_is_marked_in_the_summary_and_the_record(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    result = project.run("--linverify-profile", "quick", "specs")
    assert result.ret == 0
    result.stdout.fnmatch_lines(["Quick profile: not for acceptance."])
    assert project.body("linverify-quick.json")["profile"] == "quick"


def test_reports_that_cannot_be_written_fail_the_build(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write("out/compliance.md/keep", "a folder in the way")
    result = project.run("--linverify-reports", "out", "specs")
    assert result.ret == 1
    result.stdout.fnmatch_lines(["the reports could not be written: *compliance.md*"])
    assert sorted(path.name for path in (project.path / "out").iterdir()) == ["compliance.md"]
