"""The command line: exit status, and one clear message for every mistake of the user."""

from __future__ import annotations

import errno
import json
import os
import re
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest
from basin_project import BREAKS, HOLDS, PLANT, SPEC, WRONG

from linverify.cli import main, root_of

# it tips over for a torque that is far from enough: a kick that its local model catches makes it fall
TIPPING = """
import numpy as np
from linverify import Plant


def tip(t, x, u, p):
    return np.stack([x[1], 4.0 * np.sin(x[0]) - 0.2 * x[1] + 2.0 * np.clip(u[0], -1e-4, 1e-4)])


plant = Plant(states={"ang": "rad", "rate": "rad/s"}, inputs={"torque": "N*m"}, dynamics=tip,
              nominal={"ang": 0.1, "rate": 0.2, "torque": 0.5})
"""
LOOP = """
linverify: 1
plant: tipping.py:plant
envelope: {ang: [-1, 1]}
operating_points: {up: {hold: {ang: 0}}}
loops:
  hold:
    controller: {gain: [[10, 3]]}
    measures: [ang, rate]
    moves: [torque]
    delay: 10 ms
    require: {gain_margin: 3 dB}
    confirm: nonlinear
"""


@pytest.fixture
def project(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A project with a plant and no spec yet; the current folder."""
    (tmp_path / "pytest.ini").write_text("[pytest]\n")
    (tmp_path / "specs").mkdir()
    (tmp_path / "specs/plant.py").write_text(PLANT)
    monkeypatch.chdir(tmp_path)
    return tmp_path


def _write(project: Path, name: str, text: str) -> Path:
    path = project / name
    path.write_text(text, encoding="utf-8")
    return path


def _record(project: Path, name: str = "linverify.json") -> dict[str, Any]:
    return dict(json.loads((project / "reports" / name).read_text(encoding="utf-8")))


def test_check_that_all_holds(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    _write(project, "specs/basin.yaml", SPEC)
    assert main(["check", "specs"]) == 0
    out = capsys.readouterr().out
    assert "specs/basin.yaml::low::trims: pass\n" in out
    assert out.endswith("4 checks: 4 pass\nreport: reports/compliance.md\n")
    assert _record(project)["body"]["counts"]["pass"] == 4


def test_check_names_saved_drives_where_they_are(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    _write(project, "specs/breaks.yaml", BREAKS)
    assert main(["check", "--reports", "out/here", "specs"]) == 1
    files = re.findall(r"^  replay .* (\S+\.json)$", capsys.readouterr().out, flags=re.MULTILINE)
    assert files
    assert all(name.startswith("out/here/evidence/") and Path(name).is_file() for name in files)


def test_check_that_something_does_not_hold(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    _write(project, "specs/basin.yaml", WRONG)
    assert main(["check", "specs/basin.yaml"]) == 1
    out = capsys.readouterr().out
    assert "specs/basin.yaml::high::trims: fail\n" in out
    assert "4 checks: 1 fail, 3 pass" in out


def test_check_writes_the_record_that_pytest_writes(project: Path) -> None:
    _write(project, "specs/breaks.yaml", BREAKS)
    assert main(["check", "--reports", "here", "specs"]) == 1
    command = [sys.executable, "-m", "pytest", "--linverify", "-q", "specs"]
    done = subprocess.run(command, cwd=project, capture_output=True, text=True, check=False, timeout=120)
    assert done.returncode == 1, done.stdout
    ours = json.loads((project / "here/linverify.json").read_text(encoding="utf-8"))
    theirs = _record(project)
    assert json.dumps(ours["body"]) == json.dumps(theirs["body"])
    assert ours["provenance"]["sha256"] == theirs["provenance"]["sha256"]


def test_check_with_a_seed_and_the_quick_profile(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    _write(project, "specs/basin.yaml", SPEC)
    assert main(["check", "--seed", "9", "--profile", "quick", "specs"]) == 0
    assert "Quick profile: not for acceptance." in capsys.readouterr().out
    assert _record(project, "linverify-quick.json")["provenance"]["seed"] == 9


def test_schema_prints_what_editors_read(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["schema"]) == 0
    printed = json.loads(capsys.readouterr().out)
    assert printed["$schema"] == "http://json-schema.org/draft-07/schema#"
    assert {"plant", "operating_points", "error_bands"} <= printed["properties"].keys()


MISTAKES: list[tuple[list[str], str]] = [
    (["check", "nowhere"], "nowhere: no such file or folder"),
    (["check", "empty"], "no spec under empty"),
    (["check", "specs/plant.py"], "specs/plant.py: is no spec; specs are .yaml files other than defaults.yaml"),
    (["explain", "specs/basin.yaml", "hihg"], "specs/basin.yaml has no operating point 'hihg'; did you mean 'high'?"),
    (["explain", "specs/nowhere.yaml"], "specs/nowhere.yaml: no such file or folder"),
    (["replay", "nowhere.json"], "nowhere.json: cannot be read: No such file or directory"),
    (["replay", "notes.json"], "notes.json: is no JSON: Expecting value: line 1 column 1 (char 0)"),
    (["pin", "nowhere.json"], "nowhere.json: cannot be read: No such file or directory"),
    (["replay", "specs/../no/where.json"], "specs/../no/where.json: cannot be read: No such file or directory"),
    (["replay", "specs"], "specs: cannot be read: Is a directory"),
    (["replay", "specs/plant.py"], "specs/plant.py: is no JSON: Expecting value: line 2 column 1 (char 1)"),
    (
        ["check", "--reports", "notes.json", "specs/basin.yaml"],
        "no reports can be written to notes.json: notes.json is in the way and no folder",
    ),
]


def test_what_a_plant_prints_is_told_once(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    _write(project, "specs/basin.yaml", SPEC)
    _write(project, "specs/plant.py", PLANT.replace("    return u", '    print("level is", x)\n    return u'))
    assert main(["check", "specs"]) == 0
    told = capsys.readouterr()
    assert "level is" not in told.out
    assert told.out.endswith("4 checks: 4 pass\nreport: reports/compliance.md\n")
    said = r"note: the plant printed \d+ lines while it was called, which are not shown; it began with 'level is .*'\n"
    assert re.fullmatch(said, told.err)


def test_a_disk_that_fills_up_takes_nothing_from_the_verdicts(
    project: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Evidence and reports cannot be saved: each says so in a sentence, and the verdicts are told all the same."""
    _write(project, "specs/breaks.yaml", BREAKS)
    full = OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
    opened = Path.open

    def open_less(path: Path, mode: str = "r", *rest: Any, **named: Any) -> Any:
        if "x" in mode:
            raise full
        return opened(path, mode, *rest, **named)

    monkeypatch.setattr(Path, "open", open_less)
    assert main(["check", "specs"]) == 1
    told = capsys.readouterr()
    assert "specs/breaks.yaml::low::follows: fail" in told.out
    assert "(not saved: No space left on device)" in told.out
    assert re.search("\\d+ checks: .* fail", told.out)
    assert re.search("^the reports could not be written: .*: No space left on device$", told.out, flags=re.MULTILINE)
    assert not told.err


@pytest.mark.parametrize("words, message", MISTAKES, ids=[" ".join(words) for words, _ in MISTAKES])
def test_mistakes_are_one_message(
    project: Path, capsys: pytest.CaptureFixture[str], words: list[str], message: str
) -> None:
    _write(project, "specs/basin.yaml", SPEC)
    _write(project, "notes.json", "notes")
    (project / "empty").mkdir()
    assert main(words) == 2
    assert capsys.readouterr().err == f"{message}\n"
    assert not (project / "reports").exists()


def test_mistakes_in_all_specs_are_told_together_and_nothing_is_written(
    project: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    _write(project, "specs/a.yaml", SPEC.replace("title", "titel"))
    _write(project, "specs/b.yaml", SPEC.replace("plant:", "palnt:"))
    _write(project, "specs/c.yaml", SPEC)
    assert main(["check", "specs"]) == 2
    lines = capsys.readouterr().err.splitlines()
    assert any(line.startswith("specs/a.yaml:2:1: ") for line in lines)
    assert any(line.startswith("specs/b.yaml:3:1: ") for line in lines)
    assert not (project / "reports").exists()


@pytest.mark.parametrize("words", [[], ["chekc"], ["check"], ["check", "--seed", "x", "specs"]])
def test_words_that_are_no_command(project: Path, capsys: pytest.CaptureFixture[str], words: list[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main(words)
    assert ended.value.code == 2
    assert "usage: linverify" in capsys.readouterr().err


def test_explain_tells_where_every_value_comes_from(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    _write(project, "specs/basin.yaml", SPEC)
    _write(project, "specs/defaults.yaml", "trims: {accuracy: 1e-9}\n")
    assert main(["explain", "specs/basin.yaml", "high"]) == 0
    out = capsys.readouterr().out
    assert out.startswith("specs/basin.yaml::high\n")
    assert "specs/basin.yaml:9:" in out  # the point's hold
    assert "specs/defaults.yaml:1:" in out
    assert "::low" not in out


def test_a_failing_drive_is_replayed_with_the_same_figures_and_pinned(
    project: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    _write(project, "specs/breaks.yaml", BREAKS)
    assert main(["check", "specs"]) == 1
    capsys.readouterr()
    item = next(one for one in _record(project)["body"]["items"] if one["id"].endswith("low::follows"))
    worst = next(one for one in item["evidence"] if one["role"] == "worst")
    quoted = next(one for one in item["figures"] if one["what"] == "peak error")
    file = f"reports/evidence/{worst['drive']}.json"

    assert main(["replay", item["id"], file]) == 1
    out = capsys.readouterr().out
    assert f"{quoted['worst']:.4g} {quoted['unit']}" in out
    assert quoted["unit"] == "cm"

    assert main(["replay", file]) == 1  # the file itself says which check it belongs to
    assert capsys.readouterr().out == out

    assert main(["pin", item["id"], file]) == 0
    out = capsys.readouterr().out
    (kept,) = (project / "specs/pinned").iterdir()
    assert f"kept specs/pinned/{kept.name}" in out
    assert 'pinned: "pinned/*.json"' in out  # the spec does not look there yet

    _write(project, "specs/breaks.yaml", BREAKS.replace("search: 10}", 'search: 10, pinned: "pinned/*.json"}'))
    assert main(["pin", item["id"], file]) == 0
    assert "replayed first from now on" in capsys.readouterr().out
    assert main(["check", "specs"]) == 1


def test_a_drive_that_breaks_no_band_replays_as_a_pass(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    _write(project, "specs/breaks.yaml", BREAKS)
    assert main(["check", "specs"]) == 1
    item = next(one for one in _record(project)["body"]["items"] if one["id"].endswith("low::follows"))
    _write(project, "specs/holds.yaml", HOLDS)
    capsys.readouterr()
    file = f"reports/evidence/{item['evidence'][0]['drive']}.json"
    assert main(["replay", "specs/holds.yaml::low::follows", file]) == 0
    assert ": pass" in capsys.readouterr().out


def test_a_margin_that_breaks_on_the_plant_is_replayed_and_not_pinned(
    project: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    _write(project, "specs/tipping.py", TIPPING)
    _write(project, "specs/tipping.yaml", LOOP)
    assert main(["check", "specs"]) == 1
    out = capsys.readouterr().out
    found = re.search(r"^  replay .* replay (\S+) (\S+\.json)$", out, flags=re.MULTILINE)
    assert found is not None
    assert "linverify pin" not in out  # which would refuse it
    assert main(["replay", found[1], found[2]]) == 1
    assert "to the last digit: gain margin (downwards) 1" in capsys.readouterr().out


def test_replay_works_from_a_folder_below(project: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    _write(project, "specs/breaks.yaml", BREAKS)
    assert main(["check", "specs"]) == 1
    (file, *_) = sorted((project / "reports/evidence").iterdir())
    monkeypatch.chdir(project / "specs")
    assert main(["replay", str(file)]) == 1


@pytest.mark.parametrize(
    "item, message",
    [
        ("specs/breaks.yaml::low", "a check is named SPEC::POINT::CHECK, got 'specs/breaks.yaml::low'"),
        (
            "specs/breaks.yaml::low::trims",
            "specs/breaks.yaml::low::trims drives nothing; a drive belongs to a check `follows`",
        ),
        ("specs/breaks.yaml::low::folows", "specs/breaks.yaml::low has no check 'folows'; did you mean 'follows'?"),
    ],
)
def test_a_check_that_is_not_there(project: Path, capsys: pytest.CaptureFixture[str], item: str, message: str) -> None:
    _write(project, "specs/breaks.yaml", BREAKS)
    assert main(["check", "specs"]) == 1
    (file, *_) = sorted((project / "reports/evidence").iterdir())
    capsys.readouterr()
    assert main(["replay", item, str(file)]) == 2
    assert capsys.readouterr().err == f"{message}\n"


def test_the_root_is_where_a_mark_of_a_project_stands(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    deep = tmp_path / "a/specs/ferry"
    deep.mkdir(parents=True)
    (tmp_path / "a/pyproject.toml").touch()
    assert root_of([deep]) == tmp_path / "a"
    assert root_of([deep, tmp_path / "a/specs"]) == tmp_path / "a"
