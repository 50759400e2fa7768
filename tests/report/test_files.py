"""Writing: whole files or none, earlier reports kept, partial runs beside full ones."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any

import pytest
from invented import EVERY, PLANNED, POINTS, PROVENANCE

from linverify.core.errors import RecordError
from linverify.report import files, markdown, record


def run(**changes: Any) -> dict[str, Any]:
    return record.build(EVERY, **{"planned": PLANNED, "points": POINTS, "provenance": PROVENANCE, **changes})


def contents(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in sorted(folder.iterdir()) if path.is_file()}


def test_a_run_leaves_record_report_and_rows(tmp_path: Path) -> None:
    folder = tmp_path / "deep" / "reports"
    written = files.write(run(), folder)
    assert [path.name for path in written] == ["linverify.json", "compliance.md", "compliance.csv"]
    assert set(contents(folder)) == {path.name for path in written}
    assert record.read(folder / "linverify.json") == run()
    assert (folder / "compliance.md").read_text(encoding="utf-8") == markdown.page(run())


def test_the_same_run_leaves_the_same_bytes(tmp_path: Path) -> None:
    files.write(run(), tmp_path / "a")
    files.write(
        record.build(EVERY[::-1], planned=PLANNED[::-1], points=POINTS[::-1], provenance=PROVENANCE), tmp_path / "b"
    )
    assert contents(tmp_path / "a") == contents(tmp_path / "b")


def test_a_partial_run_leaves_a_full_report_alone(tmp_path: Path) -> None:
    files.write(run(), tmp_path)
    before = contents(tmp_path)
    written = files.write(run(partial=True), tmp_path)
    assert [path.name for path in written] == [
        "linverify-partial.json",
        "linverify-partial.md",
        "linverify-partial.csv",
    ]
    assert {name: data for name, data in contents(tmp_path).items() if "partial" not in name} == before


def test_a_quick_run_leaves_a_full_report_alone(tmp_path: Path) -> None:
    files.write(run(), tmp_path)
    before = contents(tmp_path)
    written = files.write(record.build(EVERY, profile="quick"), tmp_path)
    assert [path.name for path in written] == ["linverify-quick.json", "linverify-quick.md", "linverify-quick.csv"]
    assert {name: data for name, data in contents(tmp_path).items() if "quick" not in name} == before


def test_a_later_run_replaces_an_earlier_one(tmp_path: Path) -> None:
    files.write(run(), tmp_path)
    files.write(record.build(EVERY[:1]), tmp_path)
    assert len(record.read(tmp_path / "linverify.json")["body"]["items"]) == 1


@pytest.mark.parametrize("failing", [1, 2, 3])
def test_a_full_disk_keeps_earlier_reports(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, failing: int) -> None:
    files.write(run(), tmp_path)
    before = contents(tmp_path)
    calls = iter(range(1, 9))
    flush = os.fsync

    def full(handle: int) -> None:
        if next(calls) == failing:
            raise OSError(28, "No space left on device")
        flush(handle)

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(RecordError, match=r"(linverify\.json|compliance\.\w+) cannot be written: .*No space left"):
        files.write(record.build(EVERY[:1]), tmp_path)
    assert contents(tmp_path) == before


def test_a_report_that_cannot_be_rendered_leaves_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    files.write(run(), tmp_path)
    before = contents(tmp_path)
    monkeypatch.setattr(markdown, "page", lambda run: 1 / 0)
    with pytest.raises(ZeroDivisionError):
        files.write(record.build(EVERY[:1]), tmp_path)
    assert contents(tmp_path) == before


def test_a_folder_in_the_way_is_named_and_nothing_is_written(tmp_path: Path) -> None:
    (tmp_path / "compliance.md").mkdir()
    with pytest.raises(RecordError, match=r"compliance\.md cannot be written: a folder of that name is in the way"):
        files.write(run(), tmp_path)
    assert contents(tmp_path) == {}


def test_a_file_in_place_of_the_folder_is_named(tmp_path: Path) -> None:
    (tmp_path / "reports").write_text("mine", encoding="utf-8")
    with pytest.raises(RecordError, match="cannot be written"):
        files.write(run(), tmp_path / "reports")
    assert (tmp_path / "reports").read_text(encoding="utf-8") == "mine"


def test_a_failing_rename_leaves_no_temporary_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def denied(self: Path, target: Path) -> Path:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "replace", denied)
    with pytest.raises(RecordError, match="Permission denied"):
        files.write(run(), tmp_path)
    assert contents(tmp_path) == {}


def test_text_that_is_no_unicode_is_refused_before_anything_is_replaced(tmp_path: Path) -> None:
    path = tmp_path / "a.txt"
    path.write_text("old", encoding="utf-8")
    with pytest.raises(RecordError, match=r"a\.txt cannot be written"):
        files.write_texts({path: "\ud800"})
    assert contents(tmp_path) == {"a.txt": b"old"}
