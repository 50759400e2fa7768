"""The command `derive`: models written for every operating point, read back by the spec that asks for them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from basin_project import PLANT, SPEC

from linverify import run
from linverify.checks.judge import judge
from linverify.checks.study import study_of
from linverify.cli import main
from linverify.core.case import CheckAsk, Options
from linverify.core.verdict import Status

TARGETS = ("models/{point}.json", "models/{point}.csv", "models/{point}.npz", "models/{point}.mat", "models/{point}",
           "all.json", "all.csv", "all.npz", "all.mat")  # fmt: skip


@pytest.fixture
def project(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A project with one spec; the current folder."""
    (tmp_path / "pytest.ini").write_text("[pytest]\n")
    (tmp_path / "plant.py").write_text(PLANT)
    (tmp_path / "basin.yaml").write_text(SPEC)
    monkeypatch.chdir(tmp_path)
    return tmp_path


@pytest.mark.parametrize("to", TARGETS)
def test_what_is_derived_is_delivered_again(project: Path, to: str, capsys: pytest.CaptureFixture[str]) -> None:
    derived = run.points(Path("basin.yaml"))
    (project / "basin.yaml").write_text(f'{SPEC}local_models: {{source: "{to}"}}\n')  # not there yet
    assert main(["derive", "basin.yaml", "--to", to]) == 0
    names = [case.point for case in derived]
    paths = dict.fromkeys(to.replace("{point}", name) for name in names)
    assert capsys.readouterr().out.splitlines() == [f"wrote {path}" for path in paths]
    for before, after in zip(derived, run.points(Path("basin.yaml")), strict=True):
        model, read = study_of(before, Options()).derived(), after.local.delivered
        assert read is not None
        for word in "ABCD":
            np.testing.assert_array_equal(getattr(read, word), getattr(model, word))
        assert (read.states, read.inputs, read.outputs) == (model.states.names, model.inputs.names, model.outputs.names)
        assert dict(read.x0) == dict(zip(model.states.names, model.at.x, strict=True))
        assert dict(read.u0) == dict(zip(model.inputs.names, model.at.u, strict=True))
        assert dict(read.y0) == dict(zip(model.outputs.names, model.at.y, strict=True))


def test_one_point_alone(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["derive", "basin.yaml", "low", "--to", "low.json"]) == 0
    assert '"point": "low"' in (project / "low.json").read_text()


def test_nothing_is_replaced_unasked(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (project / "all.json").write_text("kept")
    assert main(["derive", "basin.yaml", "--to", "all.json"]) == 2
    assert capsys.readouterr().err == "all.json: is there already; --force replaces it\n"
    assert (project / "all.json").read_text() == "kept"
    assert main(["derive", "basin.yaml", "--to", "all.json", "--force"]) == 0
    assert (project / "all.json").read_text() != "kept"


def test_a_point_without_a_trim_stops_the_writing(project: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text = SPEC.replace("8 m/s", "3 m/s") + "  dry:\n    hold: {level: 3.5 m}\n"
    (project / "basin.yaml").write_text(text)
    assert main(["derive", "basin.yaml", "--to", "all.json"]) == 1
    told = capsys.readouterr()
    assert told.out == ""
    assert told.err.startswith("basin.yaml::dry: no operating point to work from: ")
    assert told.err.endswith("\nnothing was written\n")
    assert not (project / "all.json").exists()


LOOP = """\
loops:
  hold:
    controller: {pid: {kp: 3 1/s, ki: 1 s^-2}}
    measures: [level]
    moves: [inflow]
"""
INSIDE = 'local_models: {with: [hold], source: "TO", agree: {entries: 0.1 %}}\n'
SAMPLED = LOOP.replace("moves: [inflow]", "moves: [inflow]\n    sample: 100 ms")


@pytest.mark.parametrize("loop", [LOOP, SAMPLED], ids=["continuous", "sampled"])
@pytest.mark.parametrize("to", TARGETS)
def test_a_model_with_its_loop_inside_is_delivered_again(project: Path, to: str, loop: str) -> None:
    """Its file names what the loop adds, and the gate finds nothing to say about it."""
    (project / "basin.yaml").write_text(SPEC + loop + INSIDE.replace("TO", to))
    assert main(["derive", "basin.yaml", "--to", to]) == 0
    for case in run.points(Path("basin.yaml")):
        study, read = study_of(case, Options()), case.local.delivered
        assert read is not None
        model = study.reference()
        for word in "ABCD":
            np.testing.assert_array_equal(getattr(read, word), getattr(model, word))
        assert read.states == ("level", "hold.1")
        assert read.inputs == ("inflow", "hold.set_point.level")
        assert read.outputs == ("level", "inflow")
        assert dict(read.u0)["hold.set_point.level"] == case.trim.hold["level"]
        assert read.step == (0.1 if loop is SAMPLED else None)
        assert judge(case, CheckAsk("agrees", case.place), Options()).status is Status.PASS
