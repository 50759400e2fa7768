"""A spec with mistakes: all of them in one collection error, the build fails, earlier reports stay."""

from __future__ import annotations

import pytest
from basin_project import SPEC, Project

BAD = SPEC.replace("title", "titel").replace("0.5 m}", "0.5 kg}")
EXPECTED = [
    "specs/bad.yaml:2:1: *'titel'*did you mean 'title'?",
    "specs/bad.yaml:7:*'0.5 kg'*",
]


def test_all_mistakes_in_one_error_and_nothing_is_run(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    assert project.run("specs").ret == 0
    before = (project.path / "reports/linverify.json").read_bytes()
    project.write("specs/bad.yaml", BAD)
    result = project.run("specs")
    assert result.ret == 2
    result.stdout.fnmatch_lines(["*ERROR collecting specs/bad.yaml*", *EXPECTED])
    result.stdout.fnmatch_lines(["nothing was judged, because of the mistakes above; earlier reports are kept"])
    result.stdout.no_fnmatch_line("*Traceback*")
    assert (project.path / "reports/linverify.json").read_bytes() == before
    assert project.reports == ["compliance.csv", "compliance.md", "linverify.json"]


def test_the_other_specs_are_judged_where_errors_do_not_stop_the_run(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write("specs/bad.yaml", BAD)
    result = project.run("--continue-on-collection-errors", "specs")
    assert result.ret == 1
    result.stdout.fnmatch_lines(["specs/bad.yaml was not judged: it could not be read", "4 checks: 4 pass"])
    assert project.body("linverify-partial.json")["partial"] is True


def test_with_workers_too(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write("specs/bad.yaml", BAD)
    result = project.spawn("-n", "2", "specs")
    assert result.ret == 1
    result.stdout.fnmatch_lines(["*ERROR collecting specs/bad.yaml*", *EXPECTED])
    result.stdout.fnmatch_lines(["specs/bad.yaml was not judged: it could not be read", "4 checks: 4 pass"])
    assert project.reports == ["linverify-partial.csv", "linverify-partial.json", "linverify-partial.md"]


def test_a_yaml_file_that_is_no_spec_is_an_error(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write("specs/notes.yaml", "colour: blue\n")
    result = project.run("specs")
    assert result.ret == 2
    result.stdout.fnmatch_lines(["specs/notes.yaml:1:1: *linverify*"])


@pytest.mark.parametrize(
    "given, near",
    [
        ("specs/basin.yaml::low::trim", "specs/basin.yaml::low::trims"),
        ("specs/basin.yaml::hihg::trims", "specs/basin.yaml::high::trims"),
        ("specs/basin.yaml::hihg", "specs/basin.yaml::high"),
    ],
)
def test_a_check_that_is_not_there_is_told_with_the_nearest(project: Project, given: str, near: str) -> None:
    project.write("specs/basin.yaml", SPEC)
    result = project.run(given)
    assert result.ret == 4
    result.stdout.fnmatch_lines([f"there is no {given}; did you mean '{near}'?"])


def test_a_plant_that_cannot_be_imported_is_named_without_our_traceback(project: Project) -> None:
    project.write("specs/plant.py", "import a_module_that_is_not_there\n")
    project.write("specs/basin.yaml", SPEC)
    result = project.run("specs")
    assert result.ret == 2
    result.stdout.fnmatch_lines(["specs/basin.yaml:3:*a_module_that_is_not_there*"])
    result.stdout.no_fnmatch_line("*linverify/pytest_plugin*")


def test_a_plant_that_is_called_wrongly_leaves_its_checks_undecided(project: Project) -> None:
    project.write(
        "specs/plant.py",
        (project.path / "specs/plant.py").read_text().replace("def dynamics(t, x, u, p)", "def dynamics(t, x, u)"),
    )
    project.write("specs/basin.yaml", SPEC)
    result = project.run("specs")
    assert result.ret == 1
    assert set(project.statuses().values()) == {"undecided"}
