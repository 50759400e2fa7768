"""Failing drives are saved, replayed with the same figures, pinned, and told when they no longer fit."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from oscillator import DRIVES, case, model, study

from linverify.checks.judge import judge_study
from linverify.checks.replay import replayed_study
from linverify.core.case import Amplitude, Band, Case, Options
from linverify.core.drive import Drive
from linverify.core.model import LocalModel
from linverify.core.verdict import Status, Verdict
from linverify.drives import pinned

PEAK = Band("y", "peak", 0.02)
WRONG = model(w=2.1)


def failed(folder: Path, one: Case, local: LocalModel = WRONG) -> Verdict:
    found = judge_study(study(one, local, Options(reports=folder)), one.checks[0])
    assert found.status is Status.FAIL
    return found


def test_worst_and_simplest_are_saved_whole_and_canonically(tmp_path: Path) -> None:
    found = failed(tmp_path, case(PEAK))
    assert [item.role for item in found.evidence] == ["worst", "simplest"]
    files = sorted((tmp_path / "evidence").iterdir())
    assert sorted(path.stem for path in files) == sorted(item.drive for item in found.evidence)
    first = {path.name: path.read_bytes() for path in files}
    failed(tmp_path / "again", case(PEAK))
    assert first == {path.name: path.read_bytes() for path in (tmp_path / "again" / "evidence").iterdir()}
    data = json.loads(files[0].read_text())
    assert data["item"] == "specs/oscillator.yaml::rest::follows"
    assert set(data["plant"]) == set(data["model"]) == {"y"}
    assert np.shape(data["plant"]["y"]) == np.shape(data["times"])
    assert data["figures"][0]["what"] == "peak error"


def test_the_drive_of_every_figure_is_saved_and_open_to_all_readers(tmp_path: Path) -> None:
    bands = (PEAK, Band("y", "rms", 0.01), Band("y", "final", 0.02), Band("y", "relative", fraction=0.02))
    found = failed(tmp_path, case(*bands, parameters={"bend": 0.1}))
    cited = {figure.drive for figure in found.figures if figure.drive}
    assert len(cited) > 1
    assert cited <= {path.stem for path in (tmp_path / "evidence").iterdir()}
    plain = tmp_path / "plain"
    plain.write_text("written in the usual way")
    assert {path.stat().st_mode for path in (tmp_path / "evidence").iterdir()} == {plain.stat().st_mode}


def test_the_simplest_keeps_half_the_excess(tmp_path: Path) -> None:
    found = failed(tmp_path, case(PEAK))
    simplest = tmp_path / "evidence" / f"{found.evidence[1].drive}.json"
    excess = json.loads(simplest.read_text())["figures"][0]["worst"] - PEAK.limit
    assert excess >= 0.499 * (found.figures[0].worst - PEAK.limit)
    drive, _ = pinned.read(simplest)
    assert np.count_nonzero(np.diff(drive.values[:, 0], prepend=0.0)) <= 3


@pytest.mark.parametrize("options", [Options(), Options(seed=77, profile="quick")])
def test_a_replay_shows_the_same_figures(tmp_path: Path, options: Options) -> None:
    bands = (PEAK, Band("y", "rms", 0.01), Band("y", "relative", fraction=0.02))
    one = case(*bands, parameters={"bend": 0.1})
    found = failed(tmp_path, one)
    for item in found.evidence:
        drive, _ = pinned.read(tmp_path / "evidence" / f"{item.drive}.json")
        again = replayed_study(study(one, WRONG, options), one.checks[0], drive)
        assert again.status is Status.FAIL
        assert again.evidence[0].drive == item.drive
        quoted = [figure for figure in found.figures if figure.drive == item.drive]
        assert [figure for figure in again.figures if figure in quoted] == quoted
        assert (item.role == "worst") is bool(quoted)


def test_a_replay_on_the_right_model_passes_and_a_stranger_is_undecided(tmp_path: Path) -> None:
    one = case(PEAK)
    found = failed(tmp_path, one)
    drive, _ = pinned.read(tmp_path / "evidence" / f"{found.evidence[0].drive}.json")
    assert replayed_study(study(one), one.checks[0], drive).status is Status.PASS
    stranger = replayed_study(study(one), one.checks[0], drive.scaled(2.0), "old.json")
    assert stranger.status is Status.UNDECIDED
    assert stranger.reason.startswith("pinned drive old.json: f goes from")


def test_a_pinned_drive_is_replayed_and_found_again(tmp_path: Path) -> None:
    found = failed(tmp_path, case(PEAK))
    path = tmp_path / "evidence" / f"{found.evidence[0].drive}.json"
    few = replace(DRIVES, count=1, search=0, pinned=(path,))
    again = judge_study(study(case(PEAK, drives=few), WRONG), case(PEAK, drives=few).checks[0])
    assert again.details["drives"]["pinned"] == 1
    assert again.figures[0].worst >= found.figures[0].worst * (1 - 1e-9)


def test_a_pinned_drive_that_does_not_fit_leaves_it_undecided(tmp_path: Path) -> None:
    large = Drive(DRIVES.every, ("f",), np.full((DRIVES.intervals, 1), 2.0))
    gone = Drive(DRIVES.every, ("force",), np.full((DRIVES.intervals, 1), 0.2))
    broken = tmp_path / "broken.json"
    broken.write_text("{")
    paths = (pinned.write(tmp_path, large, {}, "large"), pinned.write(tmp_path, gone, {}, "gone"), broken)
    one = case(PEAK, drives=replace(DRIVES, pinned=paths))
    found = judge_study(study(one), one.checks[0])
    assert found.status is Status.UNDECIDED
    told = "\n".join((found.reason, *found.notes))
    large = "pinned drive large.json: f goes from +2 to +2 N about trim; the set allows -1 to +1 N; widen the set"
    assert large in told
    assert "pinned drive gone.json: the plant has no input 'force'" in told
    assert "pinned drive broken.json: is no JSON" in told


def test_a_drive_found_at_another_point_is_only_told_where_it_does_not_fit(tmp_path: Path) -> None:
    large = Drive(DRIVES.every, ("f",), np.full((DRIVES.intervals, 1), 2.0))
    path = pinned.write(tmp_path, large, {"item": "specs/oscillator.yaml::elsewhere::follows"}, "large")
    one = case(PEAK, drives=replace(DRIVES, pinned=(path,)))
    found = judge_study(study(one), one.checks[0])
    assert found.status is Status.PASS
    assert any("was found by specs/oscillator.yaml::elsewhere::follows" in note for note in found.notes)
    wide = case(PEAK, drives=replace(DRIVES, pinned=(path,), amplitude={"f": Amplitude(-2.0, 2.0)}))
    assert judge_study(study(wide), wide.checks[0]).details["drives"]["pinned"] == 1


def test_nothing_is_written_where_no_reports_go(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    one = case(PEAK)
    found = judge_study(study(one, WRONG), one.checks[0])
    assert len(found.evidence) == 2
    assert [path.name for path in tmp_path.rglob("*.json")] == []
