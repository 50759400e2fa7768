"""The run record: complete, in order, the same bytes however verdicts arrive, and read back or refused."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace
from typing import Any, cast

import jsonschema
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from invented import EVERY, FOLLOWS, NOT_RUN_ID, PLANNED, POINTS, PROVENANCE, SKIPPED_ID, SPEC, TRIMS, described

from linverify.core.case import Case, CheckAsk, Requirement, Setting
from linverify.core.errors import Place, RecordError
from linverify.core.verdict import Status
from linverify.report import record


def built(**changes: Any) -> dict[str, Any]:
    arguments: dict[str, Any] = {"planned": PLANNED, "points": POINTS, "provenance": PROVENANCE, **changes}
    return record.build(arguments.pop("verdicts", EVERY), **arguments)


def statuses(run: dict[str, Any]) -> dict[str, str]:
    return {item["id"]: item["status"] for item in run["body"]["items"]}


@settings(deadline=None, derandomize=True, max_examples=30)
@given(st.permutations(EVERY), st.permutations(POINTS), st.permutations(PLANNED))
def test_the_order_of_arrival_does_not_matter(verdicts: list[Any], points: list[Any], planned: list[str]) -> None:
    same = built(verdicts=verdicts, points=points, planned=planned)
    assert record.canonical(same) == record.canonical(built())


def test_points_stand_in_the_order_in_which_people_read_them() -> None:
    run = built()
    ids = [item["id"] for item in run["body"]["items"]]
    assert ids.index(f"{SPEC}::wind9::trims") < ids.index(f"{SPEC}::wind10::differentiable")
    assert [point["point"] for point in run["body"]["points"]] == ["wind9", "wind10", "wind30"]


def test_what_was_planned_and_did_not_report_is_not_run() -> None:
    run = built()
    assert statuses(run)[NOT_RUN_ID] == "not run"
    assert run["body"]["counts"] == {"fail": 2, "not run": 1, "pass": 3, "skipped": 1, "undecided": 1}
    item = next(item for item in run["body"]["items"] if item["id"] == NOT_RUN_ID)
    assert item["place"] == {"file": SPEC, "line": 12, "column": 3}
    assert "no verdict arrived" in item["reason"]


def test_a_reason_for_a_missing_verdict_is_told() -> None:
    run = built(why={NOT_RUN_ID: "the process that ran it died"})
    item = next(item for item in run["body"]["items"] if item["id"] == NOT_RUN_ID)
    assert item["reason"] == "the process that ran it died"


def test_skipped_cells_are_told_in_a_full_run_only() -> None:
    assert statuses(built())[SKIPPED_ID] == "skipped"
    assert SKIPPED_ID not in statuses(built(partial=True))
    assert statuses(built(partial=True, planned=(*PLANNED, SKIPPED_ID)))[SKIPPED_ID] == "skipped"


def test_requirements_of_what_did_not_run_are_kept() -> None:
    run = built(planned=[f"{SPEC}::wind9::follows.fast"], verdicts=(TRIMS,))
    item = next(item for item in run["body"]["items"] if item["check"] == "follows.fast")
    assert item["requirements"] == ["KT-1", "KT-2"]


def test_points_without_an_item_stay_out() -> None:
    run = record.build([TRIMS], points=[described("wind9"), described("wind77")], partial=True)
    assert [point["point"] for point in run["body"]["points"]] == ["wind9"]


def test_of_two_findings_on_one_item_the_severe_one_stays() -> None:
    passed = replace(FOLLOWS, status=Status.PASS)
    for verdicts in ((passed, FOLLOWS), (FOLLOWS, passed)):
        assert statuses(record.build(verdicts))[FOLLOWS.id] == "fail"


def test_an_id_of_another_form_is_refused() -> None:
    with pytest.raises(RecordError, match="SPEC::POINT::CHECK"):
        record.build([], planned=["test_x.py::test_y"])


def test_the_folder_of_one_machine_does_not_enter_the_body(tmp_path: Path) -> None:
    told = replace(
        TRIMS,
        reason=f"{tmp_path}/specs/plant.py raised",
        notes=(f"see {tmp_path}/a",),
        details={"x": [str(tmp_path / "b")]},
    )
    run = record.build([told], root=tmp_path)
    assert str(tmp_path) not in record.canonical(run["body"])
    assert run["body"]["items"][0]["reason"] == "specs/plant.py raised"


def test_provenance_stands_outside_the_body() -> None:
    one, other = built(provenance={"time": "now", "x": float("nan")}), built(provenance={"time": "later"})
    assert one["body"] == other["body"]
    assert one["provenance"] == {"time": "now", "x": {"$float": "nan"}}


def test_the_tolerances_that_checks_worked_with_are_told() -> None:
    trimmed = replace(TRIMS, details={"accuracy": {"value": 1e-8, "unit": "nominal sizes per s"}})
    driven = [
        replace(FOLLOWS, point=f"p{index}", details={"integration": {"tolerance": 10.0**-index}}) for index in (3, 2)
    ]
    run = record.build([*driven, trimmed], provenance={"tolerances": {"given": 1}})
    assert run["provenance"]["tolerances"] == {
        "given": 1,
        "integration, share of the state errors that bands allow": [0.001, 0.01],
        "scaled residual of a trim, nominal sizes per s": [1e-8],
    }


def test_a_record_comes_back_from_its_file(tmp_path: Path) -> None:
    path = tmp_path / "linverify.json"
    path.write_text(record.canonical(built()), encoding="utf-8")
    run = record.read(path)
    assert run == built()
    assert list(run["body"]) == list(built()["body"])
    assert len(record.verdicts_of(run)) == 8


def test_an_empty_run_has_a_record() -> None:
    assert record.build([])["body"]["items"] == []


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda run: run.update(format=2), "has format 2; this version of linverify reads format 1"),
        (lambda run: run.pop("format"), "has format None"),
        (lambda run: run.pop("provenance"), "has the words body, format, provenance"),
        (lambda run: run["body"].pop("items"), "the body of .* has the words"),
        (lambda run: run.update(body=[]), "the body of .* has the words"),
        (lambda run: run["body"]["items"][0].update(status="green"), "not a verdict of format 1"),
        (lambda run: run["body"].update(items=3), "items and points are lists"),
    ],
)
def test_other_records_are_refused(tmp_path: Path, change: Any, message: str) -> None:
    run = built()
    change(run)
    path = tmp_path / "old.json"
    path.write_text(json.dumps(run), encoding="utf-8")
    with pytest.raises(RecordError, match=message) as caught:
        record.read(path)
    assert str(path) in str(caught.value)


@pytest.mark.parametrize("content", [b"", b"{", b"[1, 2]", b"\xff\xfe", b'{"format": NaN}', b"null"])
def test_what_is_no_record_is_refused_with_its_name(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "broken.json"
    path.write_bytes(content)
    with pytest.raises(RecordError, match=r"broken\.json"):
        record.read(path)


def test_a_missing_record_is_named(tmp_path: Path) -> None:
    with pytest.raises(RecordError, match=r"nowhere\.json cannot be read"):
        record.read(tmp_path / "nowhere.json")


def test_a_case_is_described_by_what_the_report_tells() -> None:
    ask = CheckAsk("trims", Place(SPEC, 12, 3))
    plant = SimpleNamespace(
        states={"b": "m", "a": "1"}, inputs={"u": "N"}, outputs={"a": "1"}, time_unit="s", step=None
    )
    case = SimpleNamespace(
        spec=SPEC,
        point="wind9",
        title="Lift",
        plant=plant,
        checks=(ask,),
        requirements=(Requirement("KT-1", "Flies.", "Invented", ("trims",)),),
        settings=(Setting("time", "0 s", "default"),),
        skipped="",
    )
    told = record.describe(cast(Case, case))
    assert told["signals"]["states"] == [["b", "m"], ["a", "1"]]
    assert told["checks"] == ["trims"]
    assert told["places"] == {"trims": f"{SPEC}:12:3"}
    assert json.loads(json.dumps(told)) == told


SCHEMA = json.loads((Path(record.__file__).parent / "record.schema.json").read_text(encoding="utf-8"))


def test_the_record_keeps_its_published_schema() -> None:
    jsonschema.Draft7Validator.check_schema(SCHEMA)
    for run in (built(), built(profile="quick", partial=True), record.build([])):
        jsonschema.validate(json.loads(record.canonical(run)), SCHEMA)


@pytest.mark.parametrize("word", ["headroom", "worst", "status"])
def test_the_schema_sees_a_missing_word(word: str) -> None:
    run = built()
    item = next(item for item in run["body"]["items"] if item["figures"])
    del item["figures"][0][word]
    with pytest.raises(jsonschema.ValidationError, match=word):
        jsonschema.validate(run, SCHEMA)
