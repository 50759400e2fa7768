"""Drives in closed loop, bands on what loops move, loops inside the model, and loops that a point overrides."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from linverify.core.case import Amplitude, Case, CheckAsk
from linverify.core.errors import Place, SpecError
from linverify.spec import bind

PLANT = (Path(__file__).parent / "bad" / "plant.py").read_text(encoding="utf-8")
HEAD = """\
linverify: 1
plant: plant.py:tank
operating_points:
  low: {hold: {level: 1 m, temperature: 60 degC, angle: 0 rad}}
"""
LOOPS = """\
loops:
  level: {controller: {pid: {kp: 3 m^2/h, ki: 1 m^2/h/min}}, measures: [level], moves: [inflow]}
  warm: {controller: {gain: 3 kW/K}, measures: [excess], moves: [heat], with: [level]}
  outer: {controller: {gain: 0.1}, measures: [temperature], moves: [warm.set_point.excess], with: [warm]}
"""
SET = "{horizon: 30 min, every: 1 min, amplitude: {inflow: 1}"

Load = Callable[..., tuple[Case, ...]]


@pytest.fixture
def load(tmp_path: Path) -> Load:
    """Binds a spec of the heated tank with three loops, one inside the other, and a model in `m.json`."""
    (tmp_path / "plant.py").write_text(PLANT, encoding="utf-8")

    def loaded(
        text: str, model: dict[str, Any] | None = None, head: str = HEAD, loops: str = LOOPS
    ) -> tuple[Case, ...]:
        (tmp_path / "tank.yaml").write_text(head + loops + text, encoding="utf-8")
        (tmp_path / "m.json").write_text(json.dumps(model), encoding="utf-8")
        return bind.load(tmp_path / "tank.yaml", tmp_path)

    return loaded


def wrongs(load: Load, text: str, **more: Any) -> list[str]:
    with pytest.raises(SpecError) as caught:
        load(text, **more)
    return [problem.wrong for problem in caught.value.problems]


def test_drives_with_a_loop(load: Load) -> None:
    (case,) = load(f"drives: {SET}, loop: level}}\nerror_bands: {{level: {{peak: 1 cm}}, inflow: {{peak: 1 l/s}}}}\n")
    (drives,) = case.drives
    assert (drives.loop, drives.at) == ("level", "input")
    assert [(band.signal, band.drives) for band in case.bands] == [("level", None), ("inflow", None)]
    assert case.bands[1].limit == pytest.approx(3.6)
    told = {setting.word: setting.origin for setting in case.settings}
    assert told["drives.loop"] == "tank.yaml:9:71"
    assert told["drives.at"] == "default of the language"


def test_without_a_loop_nothing_is_told_of_where_drives_enter(load: Load) -> None:
    (case,) = load(f"drives: {SET}}}\nerror_bands: {{level: {{peak: 1 cm}}}}\n")
    assert case.drives[0].loop == ""
    assert "drives.at" not in [setting.word for setting in case.settings]


def test_drives_at_the_set_point_name_what_is_measured(load: Load) -> None:
    words = "amplitude: {excess: 1 K, pump: 1 rad/s}, rate: {excess: 2 K/min}, loop: warm, at: set_point"
    (case,) = load(f"envelope: {{excess: {{rate: 9 K/min}}}}\ndrives: {{horizon: 30 min, every: 1 min, {words}}}\n"
                   "error_bands: {inflow: {peak: 1}, heat: {peak: 1}}\n")  # fmt: skip
    (drives,) = case.drives
    assert drives.at == "set_point"
    assert dict(drives.amplitude) == {"excess": Amplitude(-1.0, 1.0), "pump": Amplitude(-1.0, 1.0)}
    assert dict(drives.rate) == {"excess": 2.0}
    assert drives.shown["excess"].unit == "K"


def test_the_envelopes_rate_is_none_of_a_set_point(load: Load) -> None:
    (case,) = load("envelope: {level: {rate: 1 m/min}, inflow: {rate: 2 l/s/min}}\n"
                   "drives: {horizon: 9 h, every: 1 h, amplitude: {level: 1, inflow: 1}, loop: level, at: set_point}\n"
                   "error_bands: {inflow: {peak: 1}}\n")  # fmt: skip
    assert dict(case.drives[0].rate) == {"inflow": pytest.approx(7.2)}
    assert "drives.rate.level" not in [setting.word for setting in case.settings]


def test_a_band_on_an_input_is_for_the_sets_in_which_a_loop_moves_it(load: Load) -> None:
    bands = "{level: {peak: 1 cm}, inflow: {peak: 1}, warm: {heat: {peak: 1 kW}}}"
    sets = f"{{open: {SET}}}, level: {SET}, loop: level}}, warm: {SET}, loop: warm}}}}"
    (case,) = load(f"drives: {sets}\nerror_bands: {bands}\n")
    assert [(band.signal, band.drives) for band in case.bands] == [
        ("level", None), ("inflow", "level"), ("inflow", "warm"), ("heat", "warm"),
    ]  # fmt: skip


def test_every_input_that_a_cascade_moves_needs_a_band(load: Load) -> None:
    text = f"drives: {SET}, loop: outer}}\nerror_bands: {{level: {{peak: 1 cm}}}}\n"
    assert wrongs(load, text) == ["no error band is for heat, inflow, which the loop 'outer' moves in these drives"]


@pytest.mark.parametrize("sample", ["1 min", "3 min", "20 s", "100 ms"])
def test_samples_that_fit_the_instants(load: Load, sample: str) -> None:
    loops = LOOPS.replace("moves: [inflow]}", f"moves: [inflow], sample: {sample}}}")
    (case,) = load(
        f"drives: {SET}, loop: warm}}\nerror_bands: {{inflow: {{peak: 1}}, heat: {{peak: 1}}}}\n", loops=loops
    )
    assert case.drives[0].loop == "warm"


def test_samples_of_inner_loops_must_fit_too(load: Load) -> None:
    loops = LOOPS.replace("moves: [inflow]}", "moves: [inflow], sample: 7 s}")
    text = f"drives: {SET}, loop: warm}}\nerror_bands: {{inflow: {{peak: 1}}, heat: {{peak: 1}}}}\n"
    assert wrongs(load, text, loops=loops) == ["'1 min' does not fit the sample time of the loop 'level', 0.116667 min"]


def test_loops_inside_the_model(load: Load) -> None:
    (case,) = load(
        f"local_models: {{with: [warm]}}\ndrives: {SET}}}\nerror_bands: {{heat: {{peak: 1}}, level: {{peak: 1}}}}\n"
    )
    assert case.local.closed == ("warm",)
    assert [(band.signal, band.drives) for band in case.bands] == [("heat", None), ("level", None)]
    assert {"local_models.with": "tank.yaml:9:22"}.items() <= {s.word: s.origin for s in case.settings}.items()


def test_checks_and_requirements(load: Load) -> None:
    (case,) = load('modes: [{stable: true}]\nrequirements: {R: {checks: ["low.margins.*", "low.modes"]}}\n')
    assert [check.name for check in case.checks] == [
        "trims", "differentiable", "modes", "margins.level", "margins.warm", "margins.outer",
    ]  # fmt: skip
    assert case.checks[-1] == CheckAsk("margins", Place("tank.yaml", 8, 3), loop="outer")
    assert case.requirements[0].checks == ("modes", "margins.level", "margins.warm", "margins.outer")
    assert list(case.loops) == ["level", "warm", "outer"]


def test_a_point_lays_its_words_over_the_specs_loop(load: Load) -> None:
    head = HEAD + "  high: {hold: {level: 2 m, temperature: 60 degC, angle: 0 rad}, loops: {%s}}\n"
    low, high = load("", head=head % "level: {controller: {pid: {kp: 9}}, delay: 2 s}")
    assert low.loops["level"].controller.D[0, 0] == pytest.approx(3.0)
    assert high.loops["level"].controller.D[0, 0] == pytest.approx(9.0)
    assert high.loops["level"].controller.C.size == 1  # ki of the spec
    assert high.loops["level"].delay == pytest.approx(2.0 / 60.0)
    assert list(high.loops) == ["level", "warm", "outer"]
    told = {setting.word: setting.origin for setting in high.settings}
    assert told["loops.level.controller.pid.kp"] == "tank.yaml:5:105"
    assert told["loops.level.controller.pid.ki"] == "tank.yaml:7:47"


def test_a_controller_of_another_form_takes_the_place_of_the_specs(load: Load) -> None:
    head = HEAD + "  high: {hold: {level: 2 m, temperature: 60 degC, angle: 0 rad}, loops: {%s}}\n"
    _, high = load("", head=head % "level: {controller: {gain: 7}}")
    assert high.loops["level"].controller.A.size == 0
    assert high.loops["level"].controller.D[0, 0] == pytest.approx(7.0)


def test_a_skipped_sweep_with_loops_is_no_mistake(load: Load) -> None:
    head = HEAD + "  up: {sweep: {level: [2 m, 3 m]}, hold: {temperature: 60 degC, angle: 0 rad}, skip: ['up-*']}\n"
    text = ("drives: {horizon: 30 min, every: 1 min, amplitude: {level: 1 cm}, loop: level, at: set_point}\n"
            "error_bands: {inflow: {peak: 1}}\n")  # fmt: skip
    cases = load(text, head=head)
    assert [bool(case.skipped) for case in cases] == [False, True, True]


def model(**changes: Any) -> dict[str, Any]:
    """A delivered model with the loop `level` closed: the controller's integral is its fourth state."""
    states = ["level", "temperature", "angle", "level.1"]
    made = {"states": states, "inputs": ["heat", "pump"], "outputs": ["level"], "A": [[-1.0] * 4] * 4}
    made |= {"B": [[1.0] * len(changes.get("inputs", made["inputs"]))] * 4, "C": [[1, 0, 0, 0]]}
    return made | changes


CLOSED = "local_models: {source: m.json, with: [level]}\n"


def test_a_delivered_model_names_set_points_and_controller_states(load: Load) -> None:
    (case,) = load(CLOSED, model(inputs=["heat", "level.set_point.level", "pump"]))
    delivered = case.local.delivered
    assert delivered is not None
    assert delivered.states == ("level", "temperature", "angle", "level.1")
    assert delivered.inputs == ("heat", "level.set_point.level", "pump")
    assert case.local.closed == ("level",)


def test_inputs_that_loops_inside_move_may_be_left_out(load: Load) -> None:
    (case,) = load(CLOSED, model())
    assert case.local.delivered is not None
    assert wrongs(load, CLOSED, model=model(inputs=["heat"])) == ["`inputs` lacks pump"]


def test_units_of_set_points_are_those_of_their_signals(load: Load) -> None:
    (case,) = load(
        CLOSED, model(inputs=["heat", "pump", "level.set_point.level"], units={"level.set_point.level": "cm"})
    )
    assert case.local.delivered is not None
    assert case.local.delivered.B[0, 2] == pytest.approx(100.0)


def test_a_lag_of_what_is_moved_is_a_state(load: Load) -> None:
    lag = "actuators: {inflow: {lag: 3 s}}\n"
    states = ["level", "temperature", "angle", "inflow.lag", "level.1"]
    made = model(states=states, A=[[-1.0] * 5] * 5, B=[[1.0, 1.0]] * 5, C=[[1, 0, 0, 0, 0]])
    (case,) = load(CLOSED + lag, made)
    assert case.local.delivered is not None
    assert wrongs(load, CLOSED + lag, model=model()) == ["`states` lacks inflow.lag"]


def test_names_that_no_closed_loop_has(load: Load) -> None:
    told = wrongs(load, CLOSED, model=model(inputs=["heat", "pump", "level.set_point.levl"]))
    assert told == ["the plant has no 'level.set_point.levl'"]
    open_model = wrongs(load, "local_models: {source: m.json}\n", model=model(inputs=["heat", "pump", "inflow"]))
    assert open_model == ["the plant has no 'level.1'"]


def test_bands_on_what_loops_in_a_delivered_model_move(load: Load) -> None:
    """They can be judged where the model has what is moved as an output."""
    text = CLOSED + "drives: {horizon: 30 min, every: 1 min, amplitude: {heat: 1}}\nerror_bands: {inflow: {peak: 1}}\n"
    assert wrongs(load, text, model=model()) == ["an error band for 'inflow', which the local model does not have"]
    (case,) = load(text, model(outputs=["level", "inflow"], C=[[1, 0, 0, 0], [-3, 0, 0, 1]]))
    assert [band.signal for band in case.bands] == ["inflow"]
    other = text.replace("inflow: {peak", "pump: {peak")
    assert wrongs(load, other, model=model()) == ["'pump' is an input, and both models are driven with the same inputs"]


def test_drives_at_the_set_point_of_a_loop_inside(load: Load) -> None:
    drives = "drives: {horizon: 30 min, every: 1 min, amplitude: {level: 1 cm}, loop: level, at: set_point}\n"
    text = CLOSED + drives + "error_bands: {level: {peak: 1 cm}}\n"
    (case,) = load(text, model(inputs=["heat", "level.set_point.level", "pump"]))
    assert (case.drives[0].loop, case.drives[0].at) == ("level", "set_point")
    told = wrongs(load, text, model=model())
    assert told == ["the drives move the set point of 'level', which is no input of the local model"]
    derived = wrongs(load, text.replace("source: m.json, ", ""))  # there a band on what is moved can always be had
    assert derived == ["no error band is for inflow, which the loop 'level' moves in these drives"]


def test_what_is_kept_is_of_the_plant_and_loops_keep_their_own(load: Load) -> None:
    kept = "{states: [level], inputs: [heat], outputs: [level]}"
    keep = f"local_models: {{source: m.json, with: [level], keep: {kept}, others: settle}}\n"
    made = model(states=["level.1", "level"], inputs=["heat", "level.set_point.level"], A=[[-1.0] * 2] * 2,
                 B=[[1.0, 1.0]] * 2, C=[[0, 1]])  # fmt: skip
    (case,) = load(keep, made)
    assert case.local.keep is not None
    assert case.local.keep.states == ("level",)
    assert case.local.delivered is not None
    assert case.local.delivered.states == ("level.1", "level")
    told = wrongs(load, keep, model=made | {"states": ["temperature", "level"]})
    assert told == ["`states` lacks level.1", "'temperature' is not kept"]


def test_holds_of_sampled_loops_may_be_states(load: Load) -> None:
    loops = LOOPS.replace("moves: [inflow]}", "moves: [inflow], sample: 6 s}")
    states = ["level", "temperature", "angle", "level.1", "level.held.1"]
    one = model(dt=0.1)
    (case,) = load(CLOSED, one, loops=loops)
    wide = one | {"states": states, "A": [[-1.0] * 5] * 5, "B": [[1.0, 1.0]] * 5, "C": [[1, 0, 0, 0, 0]]}
    (other,) = load(CLOSED, wide, loops=loops)
    assert case.local.delivered is not None
    assert other.local.delivered is not None
    assert other.local.delivered.states == tuple(states)
    assert wrongs(load, CLOSED, model=wide) == ["the plant has no 'level.held.1'"]


def test_a_misspelt_loop_of_a_point_is_told_with_the_right_name(load: Load) -> None:
    head = HEAD + "  high: {hold: {level: 2 m, temperature: 60 degC, angle: 0 rad}, loops: {%s}}\n"
    with pytest.raises(SpecError) as caught:
        load("", head=head % "levl: {controller: {pid: {kp: 9}}, dely: 2 s}")
    told = [(problem.wrong, problem.hint) for problem in caught.value.problems]
    assert ("no loop of the spec is called 'levl', and a new one needs measures, moves", "level") in told
    assert any(hint == "delay" for _, hint in told)
    assert len(told) == 2
    _, high = load("", head=head % "levels: {controller: {gain: 2}, measures: [level], moves: [pump]}")
    assert list(high.loops) == ["levels", "level", "warm", "outer"]
