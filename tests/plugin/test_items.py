"""Items of a spec: their ids, where they point, and how they are selected."""

from __future__ import annotations

import xml.etree.ElementTree as ElementTree

from basin_project import HOLDS, SPEC, Project

IDS = [
    "specs/basin.yaml::low::trims",
    "specs/basin.yaml::low::differentiable",
    "specs/basin.yaml::high::trims",
    "specs/basin.yaml::high::differentiable",
]
REQUIREMENTS = 'requirements: {BA-7: {text: The basin rests., source: BA 1, checks: ["low.trims"]}}\n'


def test_ids_read_as_sentences(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    result = project.run("--collect-only", "-q", "specs")
    assert [line for line in result.outlines if "::" in line] == IDS
    assert result.ret == 0
    assert project.reports == []  # nothing was judged, so there is nothing to report


def test_a_point_names_its_drives_only_where_they_have_a_name(project: Project) -> None:
    project.write("specs/one.yaml", HOLDS)
    project.write(
        "specs/two.yaml", HOLDS.replace("drives: {", "drives: {fast: {").replace("search: 10}", "search: 10}}")
    )
    result = project.run("--collect-only", "-q", "specs")
    ids = [line for line in result.outlines if "follows" in line]
    assert ids == [
        "specs/one.yaml::low::follows",
        "specs/one.yaml::high::follows",
        "specs/two.yaml::low::follows.fast",
        "specs/two.yaml::high::follows.fast",
    ]


def test_without_the_flag_a_spec_is_no_test(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    result = project.pytester.runpytest_inprocess("specs")
    assert result.ret == 5
    result.stdout.no_fnmatch_line("*linverify:*")


def test_defaults_are_no_spec(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write("specs/defaults.yaml", "trims: {accuracy: 1e-9}\n")
    result = project.run("--collect-only", "-q", "specs")
    assert [line for line in result.outlines if "::" in line] == IDS


def _run_ids(project: Project, *arguments: str) -> list[str]:
    result = project.run("-v", *arguments)
    return [line.split()[0] for line in result.outlines if " PASSED" in line]


def test_one_check_by_its_id(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    assert _run_ids(project, IDS[2]) == [IDS[2]]


def test_one_point_by_its_id(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    assert _run_ids(project, "specs/basin.yaml::high") == IDS[2:]


def test_by_words(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    assert _run_ids(project, "-k", "low and trims", "specs") == [IDS[0]]


def test_by_marker_of_the_kind(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    assert _run_ids(project, "-m", "linverify_differentiable", "specs") == [IDS[1], IDS[3]]


def test_by_requirement(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC + REQUIREMENTS)
    assert _run_ids(project, "-k", "BA-7", "specs") == [IDS[0]]


def test_python_tests_run_beside_specs(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write("specs/test_other.py", "def test_other():\n    pass\n")
    result = project.run("specs")
    result.assert_outcomes(passed=5)
    assert project.body()["counts"]["pass"] == 4


def test_an_item_points_at_its_operating_point(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    result = project.run("--junitxml=junit.xml", "-o", "junit_family=xunit1", "specs")
    assert result.ret == 0
    cases = list(ElementTree.parse(project.path / "junit.xml").iter("testcase"))
    lines = SPEC.splitlines()
    pointed = [(case.get("file"), lines[int(case.get("line", "-1"))].strip()) for case in cases]
    assert pointed == [("specs/basin.yaml", f"{point}:") for point in ("low", "low", "high", "high")]


def test_fixtures_for_all_tests_reach_items_too(project: Project) -> None:
    project.write("specs/basin.yaml", SPEC)
    project.write(
        "conftest.py",
        "import pytest\n@pytest.fixture(autouse=True)\ndef noted(request, tmp_path):\n"
        "    with (request.config.rootpath / 'noted.txt').open('a') as notes:\n"
        "        notes.write(request.node.name + '\\n')\n",
    )
    assert project.run("specs").ret == 0
    assert (project.path / "noted.txt").read_text().split() == [name.rpartition("::")[2] for name in IDS]
