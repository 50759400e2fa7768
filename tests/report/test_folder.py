"""A folder that reports cannot be written to is seen before anything is computed."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from linverify.checks import evidence
from linverify.report.folder import EVIDENCE, refusal


def test_saved_drives_are_where_the_folder_is_looked_at() -> None:
    assert evidence.FOLDER == EVIDENCE


def test_a_folder_that_can_be_made_is_not_made(tmp_path: Path) -> None:
    assert refusal(tmp_path / "out" / "deep") == ""
    assert list(tmp_path.iterdir()) == []
    assert refusal(tmp_path) == ""


@pytest.mark.parametrize("name", ["out", "out/deep", "out/deep/deeper"])
def test_a_file_in_the_way(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, name: str) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "out").write_text("a file")
    assert refusal(tmp_path / name) == f"no reports can be written to {name}: out is in the way and no folder"


def test_a_file_where_drives_would_be_saved(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "evidence").symlink_to("nowhere")
    said = "no reports can be written to out: out/evidence is in the way and no folder"
    assert refusal(tmp_path / "out") == said


def test_a_folder_for_reading_only(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The mode of a folder does not stop an administrator, who may be running this."""
    asked: list[tuple[Path, int]] = []

    def access(place: Path, mode: int) -> bool:
        asked.append((Path(place), mode))
        return False

    monkeypatch.setattr("os.access", access)
    assert refusal(tmp_path / "out") == f"no reports can be written to {tmp_path}/out: {tmp_path} cannot be written to"
    assert asked == [(tmp_path, os.W_OK | os.X_OK)]
