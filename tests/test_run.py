"""The road that the command line and pytest share: finding specs, the books of a run, what is written."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import pytest
from basin_project import PLANT, SPEC, WRONG

from linverify import run
from linverify.core.case import Options
from linverify.core.errors import SpecError
from linverify.core.verdict import Status, Verdict
from linverify.report import record


@pytest.fixture
def root(tmp_path: Path) -> Path:
    """A project with one spec of two points."""
    (tmp_path / "specs").mkdir()
    (tmp_path / "specs/plant.py").write_text(PLANT, encoding="utf-8")
    (tmp_path / "specs/basin.yaml").write_text(SPEC, encoding="utf-8")
    return tmp_path


def _books(root: Path, verdicts: Sequence[Verdict], **more: object) -> run.Books:
    cases = run.cases_of(run.find([root / "specs"]), root)
    planned = tuple(f"{case.spec}::{case.point}::{ask.name}" for case in cases for ask in case.checks)
    books = run.Books(tuple(verdicts), planned, tuple(record.describe(case) for case in cases), cases[0].files, False)
    return replace(books, **more)  # type: ignore[arg-type]


def _judged(root: Path) -> list[Verdict]:
    told: list[Verdict] = []
    run.check_paths([root / "specs"], Options(), root, told=told.append)
    return told


def test_specs_are_found_once_each_in_a_fixed_order(tmp_path: Path) -> None:
    for name in ("b/two.yaml", "b/defaults.yaml", "a/one.yaml", "a/notes.yml", "a/plant.py", "three.yaml"):
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).touch()
    found = run.find([tmp_path, tmp_path / "b", tmp_path / "a/one.yaml"])
    assert [path.relative_to(tmp_path).as_posix() for path in found] == ["a/one.yaml", "b/two.yaml", "three.yaml"]


def test_everything_is_judged_in_the_order_of_the_spec_and_told_at_once(root: Path) -> None:
    verdicts = _judged(root)
    assert [verdict.id for verdict in verdicts] == [
        "specs/basin.yaml::low::trims",
        "specs/basin.yaml::low::differentiable",
        "specs/basin.yaml::high::trims",
        "specs/basin.yaml::high::differentiable",
    ]
    assert {verdict.status for verdict in verdicts} == {Status.PASS}
    assert not (root / "reports").exists()  # no folder was given, so nothing is written


def test_the_same_run_twice_writes_the_same_body(root: Path) -> None:
    (root / "specs/wrong.yaml").write_text(WRONG, encoding="utf-8")
    texts = []
    for name in ("one", "two"):
        result = run.check_paths([root / "specs"], Options(reports=root / name), root)
        assert not result.passed
        assert {path.name for path in result.written} == {"linverify.json", "compliance.md", "compliance.csv"}
        texts.append(json.dumps(json.loads((root / name / "linverify.json").read_text(encoding="utf-8"))["body"]))
    assert texts[0] == texts[1]


def test_a_planned_check_without_a_verdict_is_not_run_and_no_pass(root: Path) -> None:
    verdicts = _judged(root)
    why = {"specs/basin.yaml::low::trims": "the power went out"}
    result = run.conclude(_books(root, verdicts[1:], partial=True, why=why), Options(reports=root / "out"), root)
    assert not result.passed
    items = {item["id"]: item for item in result.record["body"]["items"]}
    assert items["specs/basin.yaml::low::trims"]["status"] == "not run"
    assert items["specs/basin.yaml::low::trims"]["reason"] == "the power went out"
    assert {path.name for path in result.written} == {
        "linverify-partial.json",
        "linverify-partial.md",
        "linverify-partial.csv",
    }


@pytest.mark.parametrize("status", [Status.FAIL, Status.UNDECIDED, Status.NOT_RUN])
def test_every_status_but_pass_and_skipped_stops_the_build(root: Path, status: Status) -> None:
    verdicts = _judged(root)
    assert run.conclude(_books(root, verdicts), Options(), root).passed
    verdicts[2] = replace(verdicts[2], status=status, reason="for some reason")
    assert not run.conclude(_books(root, verdicts), Options(), root).passed
    verdicts[2] = replace(verdicts[2], status=Status.SKIPPED)
    assert run.conclude(_books(root, verdicts), Options(), root).passed


def test_what_is_in_the_way_leaves_earlier_reports_as_they_were(root: Path) -> None:
    out = root / "out"
    run.check_paths([root / "specs"], Options(reports=out), root)
    before = {path.name: path.read_bytes() for path in out.iterdir()}
    (out / "compliance.md").unlink()
    (out / "compliance.md").mkdir()
    result = run.check_paths([root / "specs"], Options(seed=5, reports=out), root)
    said = f"the reports could not be written: {out}/compliance.md cannot be written: "
    assert result.lines[-1].startswith(said)
    assert (result.passed, result.written) == (False, ())
    assert any("4 pass" in line for line in result.lines)  # the verdicts are told all the same
    assert {path.name for path in out.iterdir()} == set(before)
    assert (out / "linverify.json").read_bytes() == before["linverify.json"]


def test_mistakes_of_all_specs_come_together_before_anything_is_judged(root: Path) -> None:
    (root / "specs/one.yaml").write_text(SPEC.replace("title", "titel"), encoding="utf-8")
    (root / "specs/two.yaml").write_text(SPEC.replace("level: 2 m", "level: 2 kg"), encoding="utf-8")
    told: list[Verdict] = []
    with pytest.raises(SpecError) as raised:
        run.check_paths([root / "specs"], Options(reports=root / "out"), root, told=told.append)
    assert {problem.place.file for problem in raised.value.problems} == {"specs/one.yaml", "specs/two.yaml"}
    assert told == []
    assert not (root / "out").exists()


def test_the_summary_ends_in_the_next_step(root: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from linverify.core.verdict import Evidence

    monkeypatch.chdir(root)
    verdicts = _judged(root)
    verdicts[3] = replace(
        verdicts[3], check="follows", status=Status.FAIL, reason="a band breaks",
        evidence=(Evidence("worst", "0123456789ab", "a step"),),
    )  # fmt: skip
    lines = run.conclude(_books(root, verdicts), Options(reports=root / "reports"), root).lines
    assert "report: reports/compliance.md" in lines
    assert lines[-3] == "next step:"
    assert lines[-2].split(maxsplit=1) == [
        "replay",
        "python -m linverify replay specs/basin.yaml::high::follows reports/evidence/0123456789ab.json",
    ]


def test_a_spec_is_found_from_anywhere_by_the_evidence_under_its_root(
    root: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(root.anchor)
    evidence = root / "reports/evidence/0123456789ab.json"
    assert run.root_above("specs/basin.yaml", evidence) == root
    case, ask = run.select("specs/basin.yaml::high::trims", evidence)
    assert (case.spec, ask.name) == ("specs/basin.yaml", "trims")


def test_no_specs_are_looked_for_where_pytest_looks_for_none(root: Path) -> None:
    expected = run.find([root])
    for folder in (".github", "node_modules/pack", "env/lib"):
        (root / folder).mkdir(parents=True)
        (root / folder / "other.yaml").write_text("a: 1")
    (root / "env/pyvenv.cfg").touch()
    assert run.find([root]) == expected
    assert len(run.find([root / ".github"])) == 1  # what is named is looked at


def test_a_spec_is_found_from_a_folder_below_its_root(root: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(root / "specs")
    assert run.root_above("specs/basin.yaml") == root
    case, ask = run.select("specs/basin.yaml::high::trims")
    assert (case.spec, case.point, ask.name) == ("specs/basin.yaml", "high", "trims")


@pytest.mark.parametrize(
    "item, message",
    [
        ("specs/basin.yaml::high", "a check is named SPEC::POINT::CHECK, got 'specs/basin.yaml::high'"),
        ("specs/basin.yaml::hihg::trims", "specs/basin.yaml has no operating point 'hihg'; did you mean 'high'?"),
        ("specs/basin.yaml::mid::trims", "specs/basin.yaml has no operating point 'mid'; it has low, high"),
        ("specs/basin.yaml::low::trim", "specs/basin.yaml::low has no check 'trim'; did you mean 'trims'?"),
    ],
)
def test_a_check_that_is_not_there_is_told_with_the_nearest_name(
    root: Path, monkeypatch: pytest.MonkeyPatch, item: str, message: str
) -> None:
    monkeypatch.chdir(root)
    with pytest.raises(run.SelectionError) as raised:
        run.select(item)
    assert str(raised.value) == message
