"""Loops on the whole road from a spec on disk to cases: points that override them, sweeps, defaults and files."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import yaml
from jsonschema import Draft7Validator
from loop_mistakes import A_FILE

from linverify.core.case import Case, CheckAsk, Setting
from linverify.core.errors import Place, SpecError
from linverify.spec import bind, schema

PLANT = (Path(__file__).parent / "bad" / "plant.py").read_text(encoding="utf-8")
HEAD = """\
linverify: 1
plant: plant.py:tank
every_point: {hold: {temperature: 60 degC, angle: 0 rad}}
operating_points:
"""
LOW = "  low: {hold: {level: 1 m}}\n"
PUMP = "{controller: {pid: {kp: 120 1/min, ki: 3}}, measures: [angle], moves: [pump]}"

Load = Callable[..., tuple[Case, ...]]


@pytest.fixture
def load(tmp_path: Path) -> Load:
    """Binds a spec of the heated tank in `specs/tank.yaml`, beside the files that are given."""

    def loaded(text: str, files: dict[str, str] | None = None) -> tuple[Case, ...]:
        written = {"specs/plant.py": PLANT, "specs/tank.yaml": HEAD + text, **(files or {})}
        for name, content in written.items():
            path = tmp_path / name
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_text(content, encoding="utf-8")
        return bind.load(tmp_path / "specs" / "tank.yaml", tmp_path)

    return loaded


def gains(cases: tuple[Case, ...], loop: str = "pump") -> list[float]:
    return [float(case.loops[loop].controller.D[0, 0]) for case in cases]


def test_every_point_has_the_loops_of_the_spec(load: Load) -> None:
    cases = load(LOW + "  high: {hold: {level: 2 m}}\nloops:\n  pump: " + PUMP + "\n")
    assert [list(case.loops) for case in cases] == [["pump"], ["pump"]]
    assert gains(cases) == [2.0, 2.0]
    assert CheckAsk("margins", Place("specs/tank.yaml", 8, 3), loop="pump") in cases[0].checks


def test_a_point_changes_a_number_and_keeps_the_rest(load: Load) -> None:
    high = "  high: {hold: {level: 2 m}, loops: {pump: {controller: {pid: {kp: 5}}, delay: 3 s}}}\n"
    low, changed = load(LOW + high + f"loops: {{pump: {PUMP}}}\n")
    assert gains((low, changed)) == [2.0, 5.0]
    assert changed.loops["pump"].controller.C.tolist() == [[3.0]]
    assert (low.loops["pump"].delay, changed.loops["pump"].delay) == (0.0, 0.05)
    assert changed.loops["pump"].controller.text == "{pid: {kp: 5, ki: 3}}"


def test_a_controller_of_another_form_takes_the_place_of_the_first(load: Load) -> None:
    high = "  high: {hold: {level: 2 m}, loops: {pump: {controller: {num: [4], den: [2]}}}}\n"
    assert gains(load(LOW + high + f"loops: {{pump: {PUMP}}}\n")) == [2.0, 2.0]


def test_a_loop_of_one_point_only(load: Load) -> None:
    cases = load(LOW + f"  high: {{hold: {{level: 2 m}}, loops: {{pump: {PUMP}}}}}\n")
    assert [list(case.loops) for case in cases] == [[], ["pump"]]


def test_limits_of_a_point_join_those_of_the_spec(load: Load) -> None:
    high = "  high: {hold: {level: 2 m}, loops: {pump: {require: {gain_margin: 4 dB}}}}\n"
    both = PUMP.replace("moves: [pump]", "moves: [pump], require: {gain_margin: 6 dB, phase_margin: 45 deg}")
    low, changed = load(LOW + high + f"loops: {{pump: {both}}}\n")
    assert [limit.text for limit in low.loops["pump"].require] == ["6 dB", "45 deg"]
    assert [limit.text for limit in changed.loops["pump"].require] == ["4 dB", "45 deg"]


def test_gains_are_scheduled_over_what_is_swept(load: Load) -> None:
    words = "pump: {controller: {gain: {table: k.csv, over: level}}, measures: [angle], moves: [pump]}"
    cases = load(
        f"  at: {{sweep: {{level: [1 m, 250 cm, 3 m]}}}}\nloops: {{{words}}}\n",
        {"specs/k.csv": "level [cm],k\n100,1\n200,2\n300,10\n"},
    )
    assert gains(cases) == [1.0, 6.0, 10.0]
    assert {path.name for path in cases[0].files} >= {"k.csv", "tank.yaml", "plant.py"}
    assert cases[1].loops["pump"].controller.text.endswith("; gain = 6 1/s at level = 2.5 m")


def test_gains_are_scheduled_over_a_swept_parameter(load: Load) -> None:
    words = "pump: {controller: {gain: {table: k.csv, over: area}}, measures: [angle], moves: [pump]}"
    text = f"  at: {{hold: {{level: 1 m}}, sweep: {{area: [1 m^2, 4 m^2]}}}}\nloops: {{{words}}}\n"
    assert gains(load(text, {"specs/k.csv": "area,k\n0,0\n10,20\n"})) == [2.0, 8.0]


def test_what_lies_outside_the_table_is_told_for_each_point(load: Load) -> None:
    words = "pump: {controller: {gain: {table: k.csv, over: level}}, measures: [angle], moves: [pump]}"
    with pytest.raises(SpecError) as caught:
        load(
            f"  at: {{sweep: {{level: [1 m, 2 m, 3 m]}}}}\nloops: {{{words}}}\n",
            {"specs/k.csv": "level,k\n1,1\n1.5,2\n"},
        )
    assert [problem.wrong for problem in caught.value.problems] == [
        f"'level' is {at} m at {name}, outside the table specs/k.csv" for at, name in ((2, "at-2m"), (3, "at-3m"))
    ]


def test_a_file_for_each_swept_point_and_none_for_those_that_are_skipped(load: Load) -> None:
    words = 'pump: {controller: {file: "c/{point}.json"}, measures: [angle], moves: [pump]}'
    text = f"  at: {{sweep: {{level: [1 m, 2 m, 3 m]}}, skip: [at-2m]}}\nloops: {{{words}}}\n"
    file = {**A_FILE, "inputs": ["angle"], "outputs": ["pump"], "time_unit": "h"}
    files = {f"specs/c/at-{k}m.json": json.dumps({**file, "D": [[k]]}) for k in (1, 3)}
    first, skipped, last = load(text, files)
    assert gains((first, last)) == [1.0, 3.0]
    assert skipped.skipped
    assert skipped.loops == {}
    for case, own in ((first, {"at-1m.json"}), (last, {"at-3m.json"})):
        assert {path.name for path in case.files if path.suffix == ".json"} == own
    np.testing.assert_array_equal(60.0 * first.loops["pump"].controller.A, A_FILE["A"])


def test_files_of_shared_loops_lie_beside_the_defaults(load: Load) -> None:
    words = "loops: {pump: {controller: {gain: {table: k.csv, over: level}}, measures: [angle], moves: [pump]}}\n"
    cases = load(LOW, {"defaults.yaml": words, "k.csv": "level,k\n0,0\n2,6\n"})
    assert gains(cases) == [3.0]
    assert {path.name for path in cases[0].files} >= {"k.csv", "defaults.yaml"}


def test_the_effective_spec_tells_loops_with_their_defaults(load: Load) -> None:
    (case,) = load(LOW + f"loops:\n  pump: {PUMP}\n")
    settings = {setting.word: setting for setting in case.settings}
    assert settings["loops.pump.controller.pid.kp"] == Setting(
        "loops.pump.controller.pid.kp", "120 1/min", "specs/tank.yaml:7:33"
    )
    assert settings["loops.pump.break"].text == "plant_input"
    assert settings["loops.pump.break"].origin == "default of the language"


def test_objects_and_what_they_import_are_among_the_files(load: Load) -> None:
    words = 'pump: {controller: {object: "ctl.py:dc"}, measures: [angle], moves: [pump]}'
    files = {
        "specs/ctl.py": "from table_of import K\n\n\ndef dc(at):\n    return 0, 0, 0, K * at['level']\n",
        "specs/table_of.py": "K = 7.0\n",
    }
    cases = load(f"  at: {{sweep: {{level: [1 m, 2 m]}}}}\nloops: {{{words}}}\n", files)
    assert gains(cases) == [7.0, 14.0]
    assert {path.name for path in cases[0].files} >= {"ctl.py", "table_of.py"}


def test_mistakes_in_loops_come_with_those_of_the_rest(load: Load) -> None:
    with pytest.raises(SpecError) as caught:
        load(LOW.replace("level", "levl") + f"loops: {{pump: {PUMP.replace('[pump]', '[pmp]')}}}\n")
    wrongs = [problem.wrong for problem in caught.value.problems]
    assert "the plant has no 'levl'" in wrongs
    assert "the plant has no 'pmp'" in wrongs


def test_an_empty_group_of_loops_takes_nothing_away(load: Load) -> None:
    with pytest.raises(SpecError) as caught:
        load(f"  low: {{hold: {{level: 1 m}}, loops: {{}}}}\nloops: {{pump: {PUMP}}}\n")
    assert [str(problem.wrong) for problem in caught.value.problems] == ["`loops` is an empty group"]


SAMPLE = """\
loops:
  damper: {controller: {gain: 0.1 s}, measures: [pitch_rate], moves: [aft_flap]}
  ride:
    controller: {pid: {kp: 0.8 rad/m, ki: 0.2 rad/m/s, kd: 0.5 rad*s/m, filter: 20 ms}}
    measures: [ride_height]
    moves: [fore_flap]
    with: [damper]
    sample: 10 ms
    delay: 30 ms
    leaves: [heading]
    break: plant_input
    require: {gain_margin: 6 dB, phase_margin: 45 deg, delay_margin: 80 ms, disk_margin: 0.4, sensitivity_peak: 6 dB,
              crossover: [1 rad/s, 4 rad/s], damping: {min: 0.4}, overshoot: 25 %, settling: 4 s, rule: six_db_45_deg}
    confirm: nonlinear
  forms: {controller: {A: [[-1, 0], [0, -2]], B: [1, 1], C: [[1, {table: k.csv, over: speed}]], D: 0},
          measures: [pitch_rate], moves: [damper.set_point.pitch_rate], with: [damper],
          require: {settling: {time: 4 s, within: 5 %}, rule: [six_db_45_deg]}}
  ratio: {controller: {num: [1, 2], den: [1, 2, {table: k.csv, over: speed, column: k}]}, measures: [pitch_rate],
          moves: [aft_flap]}
  filed: {controller: {file: "c/{point}.json"}, measures: [pitch_rate], moves: [aft_flap]}
  made: {controller: {object: "ctl.py:dc"}, measures: [pitch_rate], moves: [aft_flap]}
"""
FERRY = """\
from linverify import Plant

ferry = Plant(
    states={"speed": "m/s", "pitch_rate": "rad/s", "heading": "rad", "ride_height": "m"},
    inputs={"fore_flap": "rad", "aft_flap": "rad"},
    dynamics=lambda t, x, u, p: x,
)
"""
FERRY_HEAD = """\
linverify: 1
plant: plant.py:ferry
operating_points: {kn30: {hold: {speed: 30 kn, heading: 0, ride_height: 1 m}, find: [pitch_rate, fore_flap, aft_flap],
                          rates: {heading: free}}}
"""


@pytest.fixture
def sample(tmp_path: Path) -> Path:
    """A spec with loops of every form."""
    file = {**A_FILE, "inputs": ["pitch_rate"], "outputs": ["aft_flap"]}
    files = {
        "plant.py": FERRY,
        "ride.yaml": FERRY_HEAD + SAMPLE,
        "k.csv": "speed [kn],k\n20,1\n40,3\n",
        "c/kn30.json": json.dumps(file),
        "ctl.py": "def dc(at):\n    return 0, 0, 0, at['speed']\n",
    }
    for name, content in files.items():
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_text(content, encoding="utf-8")
    return tmp_path / "ride.yaml"


def test_loops_of_every_form_in_one_spec(sample: Path) -> None:
    (case,) = bind.load(sample, sample.parent)
    assert list(case.loops) == ["damper", "ride", "forms", "ratio", "filed", "made"]
    ride = case.loops["ride"]
    assert (ride.within, ride.sample, ride.delay, ride.leaves, ride.confirm) == (
        ("damper",),
        0.01,
        0.03,
        ("heading",),
        True,
    )
    assert case.loops["forms"].controller.C.tolist() == [[1.0, pytest.approx(2.0)]]
    assert case.loops["made"].controller.D.tolist() == [[pytest.approx(30 * 1852 / 3600)]]
    assert [limit.within for limit in case.loops["forms"].require if limit.word == "settling"] == [0.05]
    assert {path.name for path in case.files} == {"ride.yaml", "plant.py", "k.csv", "kn30.json", "ctl.py"}


def test_the_schema_takes_them_too_and_sees_mistakes(sample: Path) -> None:
    validator = Draft7Validator(schema.schema())
    good = yaml.safe_load(sample.read_text(encoding="utf-8"))
    assert [error.message for error in validator.iter_errors(good)] == []
    for loop, wrong in (
        ("ride", {"controller": {"pid": {"kq": 1}}}),
        ("ride", {"require": {"gain_margins": "6 dB"}}),
        ("ride", {"require": {"settling": {"within": "5 %"}}}),
        ("ratio", {"controller": {"num": [], "den": [1]}}),
        ("forms", {"controller": {"gain": {"table": "k.csv"}}}),
        ("forms", {"break": "plant"}),
    ):
        bad = {**good, "loops": {**good["loops"], loop: {**good["loops"][loop], **wrong}}}
        assert list(validator.iter_errors(bad)), wrong
