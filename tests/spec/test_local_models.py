"""`local_models`, `delays` and `wraps` bound to a plant, and mistakes between spec, file and plant."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from model_mistakes import MODEL, PLANT, js

from linverify.core.case import Case, CheckAsk, Setting
from linverify.core.delivered import AgreeAsk, Delays, GainsAsk, Keep, ResponseAsk
from linverify.core.errors import Place, SpecError
from linverify.spec import bind
from linverify.spec.words import CHECKS

TURNING = PLANT.replace('"temperature": "degC"}', '"temperature": "deg"}').replace("degC/s", "deg/s")
STEPPING = PLANT.replace("measurement=measurement,", "measurement=measurement,\n    step=0.5,")
HEAD = """\
linverify: 1
plant: plant.py:tank
operating_points: {full: {hold: {level: 1 m, temperature: 20}}}
"""
DRIVES = """\
drives: {horizon: 10 s, every: 0.5 s, amplitude: {inflow: 0.1}}
error_bands: {level: {peak: 0.1}}
"""
SOURCE = "local_models: {source: m.json}\n"
ONE = {"states": ["level"], "A": [[-1]], "B": [[1, 0]], "C": [[1], [1]]}

Load = Callable[..., Case]


@pytest.fixture
def load(tmp_path: Path) -> Load:
    """Writes plant, spec and one model, and binds them."""

    def loaded(spec: str, model: str = js(), plant: str = PLANT) -> Case:
        (tmp_path / "plant.py").write_text(plant, encoding="utf-8")
        (tmp_path / "spec.yaml").write_text(HEAD + spec, encoding="utf-8")
        (tmp_path / "m.json").write_text(model, encoding="utf-8")
        (case,) = bind.load(tmp_path / "spec.yaml", tmp_path)
        return case

    return loaded


def test_without_words_models_are_derived(load: Load) -> None:
    case = load("")
    assert case.local.delivered is None
    assert case.local.keep is None
    assert (case.delays, case.wraps) == (Delays(), ())
    assert "agrees" not in [check.kind for check in case.checks]


def test_agree_with_all_its_words(load: Load) -> None:
    words = """\
local_models:
  source: m.json
  agree:
    point: 2 %
    entries: 3 %
    response: {within: 4 %, between: [0.1 Hz, 60 rad/s]}
    gains: {singular_values: 10 %, relative_gain: 0.5, determinant_sign: same}
"""
    case = load(words)
    assert case.local.agree == AgreeAsk(
        point=0.02,
        entries=0.03,
        response=ResponseAsk(0.04, pytest.approx(0.2 * math.pi), 60.0, 0.01, Place("spec.yaml", 9, 5)),
        gains=GainsAsk(Place("spec.yaml", 10, 12), 0.1, 0.5, "same"),
        place=Place("spec.yaml", 6, 3),
        entries_place=Place("spec.yaml", 8, 14),
        point_place=Place("spec.yaml", 7, 12),
    )
    assert case.checks[2] == CheckAsk("agrees", Place("spec.yaml", 6, 3))
    assert Setting("local_models.agree.response.floor", "1 %", "default of the language") in case.settings


def test_only_what_is_asked_for_is_told(load: Load) -> None:
    words = {setting.word: setting.text for setting in load(SOURCE).settings if setting.word.startswith("local")}
    assert words == {"local_models.source": "m.json", "local_models.agree.point": "1 %", "local_models.file": "m.json"}
    assert [setting.word for setting in load("").settings if setting.word.startswith("local")] == [
        "local_models.source"
    ]


@pytest.mark.parametrize("source", ["", "source: m.json, "])
def test_keep(load: Load, source: str) -> None:
    model = js(**ONE)
    case = load(f"local_models: {{{source}keep: {{states: [level]}}, others: settle}}\n", model)
    assert case.local.keep == Keep(
        ("level",),
        ("inflow", "heat"),
        ("level", "excess"),
        "settle",
        case.local.keep.place if case.local.keep else Place(""),
    )
    assert (case.local.delivered is None) == (not source)


def test_anonymous_states(load: Load) -> None:
    for states in (None, ["", ""]):
        model = load(SOURCE, js(states=states, x0={"level": 1.5})).local.delivered
        assert model is not None
        assert model.states is None
        assert dict(model.x0) == {"level": 1.5}
    larger = load(SOURCE, js(states=None, A=np.eye(3).tolist(), B=np.ones((3, 2)).tolist(), C=np.ones((2, 3)).tolist()))
    assert larger.local.delivered is not None
    assert larger.local.delivered.A.shape == (3, 3)


def test_digits_of_what_was_printed(load: Load) -> None:
    def digits(A: Any) -> int:
        model = load(SOURCE, js(A=A)).local.delivered
        assert model is not None
        return model.digits

    assert digits([[-1.0, 0.5], [0.0, 0.25]]) == 17
    assert digits([[-1.2346, 0.5], [0.0, 0.25]]) == 5
    assert digits([[-1.0 / 3.0, 0.5], [0.0, 0.25]]) == 16


def test_rounding_is_that_of_the_print_in_the_units_of_the_plant(load: Load) -> None:
    def rounding(entries: str, **words: Any) -> dict[str, Any]:
        text = js(**words).replace(str(MODEL["A"]), entries)
        assert entries in text
        model = load(SOURCE, text).local.delivered
        assert model is not None
        return {name: values.tolist() for name, values in model.rounding.items()}

    assert rounding(str(MODEL["A"])) == {}
    np.testing.assert_allclose(rounding("[[-12.346, 0.5], [0, 0.25]]")["A"], [[0.5e-3, 0.5e-5], [0.0, 0.5e-5]])
    assert rounding("[[-12.346, 0.500], [0.000, 0.250]]") == {"A": [[0.5e-3] * 2] * 2}
    converted = rounding("[[-12.346, 0.5], [0, 0.25]]", units={"level": "cm"}, time_unit="min")["A"]
    np.testing.assert_allclose(converted, [[0.5e-3 / 60, 0.5e-7 / 60], [0.0, 0.5e-5 / 60]])


def test_delays_and_wraps(load: Load) -> None:
    case = load("delays: {inputs: {heat: 1 min}, outputs: {excess: 250 ms}}\nwraps: [temperature]\n", plant=TURNING)
    assert dict(case.delays.inputs) == {"heat": 60.0}
    assert dict(case.delays.outputs) == {"excess": 0.25}
    assert case.wraps == ("temperature",)
    assert dict(load("delays: {inputs: {heat: 1.5 s}}\n", plant=STEPPING).delays.inputs) == {"heat": 1.5}


def test_a_discrete_plant_takes_its_own_sample_time(load: Load) -> None:
    model = load(SOURCE, js(dt=500, time_unit="ms"), STEPPING).local.delivered
    assert model is not None
    assert model.step == 0.5
    np.testing.assert_array_equal(model.A, np.array(MODEL["A"]))


KEEP = "local_models: {source: m.json, keep: {states: [level], inputs: [inflow], outputs: [excess]}, others: freeze}\n"
MISTAKES: dict[str, tuple[str, str, str, str]] = {
    "keep_alone": ("local_models: {keep: {states: [level]}}\n", js(), PLANT,
        "spec.yaml:4:16: `keep` without `others`; `others: freeze` (held at trim) or `others: settle` (follows "
        "quasi-steadily) is expected"),
    "others_alone": ("local_models: {others: freeze}\n", js(), PLANT,
        "spec.yaml:4:16: `others` without `keep`; it says what becomes of states that are not kept"),
    "others_word": ("local_models: {keep: {states: [level]}, others: drop}\n", js(), PLANT,
        "spec.yaml:4:49: `local_models: others`: 'drop' is no choice; freeze or settle is expected"),
    "keep_name": ("local_models: {keep: {states: [levl]}, others: freeze}\n", js(), PLANT,
        "spec.yaml:4:32: the plant has no 'levl'; a state is expected: level, temperature; did you mean 'level'?"),
    "keep_nothing": ("local_models: {keep: {states: []}, others: freeze}\n", js(), PLANT,
        "spec.yaml:4:16: `keep` lists no state; at least one is expected"),
    "agree_derived": ("local_models: {agree: {entries: 1 %}}\n", js(), PLANT,
        "spec.yaml:4:16: `agree` without a delivered model; a delivered model is expected behind `source`: a derived "
        "one agrees with itself"),
    "agree_between": ("local_models: {source: m.json, agree: {response: {within: 1 %}}}\n", js(), PLANT,
        "spec.yaml:4:40: `between` is missing in `local_models: agree: response`; [low, high] is expected"),
    "agree_unit": ("local_models: {source: m.json, agree: {response: {within: 1 %, between: [1 m, 2 Hz]}}}\n", js(),
        PLANT, "spec.yaml:4:74: '1 m' is a length; `local_models: agree: response: between` takes an angular rate, in "
        "the plant's unit rad/s"),
    "agree_range": ("local_models: {source: m.json, agree: {response: {within: 1 %, between: [1 Hz, 2 rad/s]}}}\n",
        js(), PLANT, "spec.yaml:4:80: `local_models: agree: response: between`: 1 Hz to 2 rad/s is no range of "
        "frequencies; 0 < low < high is expected"),
    "agree_sampling": ("local_models: {source: m.json, agree: {response: {within: 1 %, between: [1, 7]}}}\n",
        js(dt=0.5), STEPPING, "spec.yaml:4:77: `local_models: agree: response: between`: 7 is beyond half the sampling "
        "frequency of the plant; at most 6.28319 rad/s is expected"),
    "agree_share": ("local_models: {source: m.json, agree: {entries: 1 m}}\n", js(), PLANT,
        "spec.yaml:4:49: `local_models: agree: entries`: '1 m' has a unit; per cent or a fraction is expected, as in "
        "'5 %' or 0.05"),
    "agree_sign": ("local_models: {source: m.json, agree: {gains: {determinant_sign: plus}}}\n", js(), PLANT,
        "spec.yaml:4:66: `local_models: agree: gains: determinant_sign`: 'plus' is no choice; same is expected"),
    "not_kept": (KEEP, js(inputs=["inflow"], outputs=["excess"], B=[[1], [0]], C=[[1, 1]], D=[[0]]), PLANT,
        "m.json:6:23: 'temperature' is not kept; `keep` in spec.yaml:4:32 leaves it out"),
    "kept_missing": (KEEP,
        js(**{**ONE, "inputs": ["inflow"], "B": [[1]], "D": [[0]], "outputs": ["level"], "C": [[1]]}),
        PLANT, "m.json:8:14: `outputs` lacks excess; `keep` in spec.yaml:4:32 keeps it"),
    "kept_input_missing": (KEEP, js(**{**ONE, "inputs": ["heat"], "B": [[1]], "D": [[0], [0]]}), PLANT,
        "m.json:7:13: `inputs` lacks inflow; `keep` in spec.yaml:4:32 keeps it\n"
        "m.json:7:14: 'heat' is not kept; `keep` in spec.yaml:4:32 leaves it out"),
    "band_of_absent_output": (SOURCE + DRIVES.replace("{level: {", "{excess: {"),
        js(outputs=["level"], C=[[1, 0]], D=[[0, 0]]), PLANT,
        "spec.yaml:6:30: an error band for 'excess', which the local model does not have; "
        "m.json has level, temperature"),
    "band_of_anonymous_state": (SOURCE + DRIVES.replace("{level: {", "{temperature: {"), js(states=None), PLANT,
        "spec.yaml:6:35: an error band for 'temperature', which the local model does not have; "
        "m.json has level, excess"),
    "drive_of_left_out_input": ("local_models: {keep: {inputs: [heat]}, others: freeze}\n" + DRIVES, js(), PLANT,
        "spec.yaml:5:1: the drives move 'inflow', which is no input of the local model; `keep` has heat"),
    "until_of_anonymous_state": (SOURCE + DRIVES.replace("inflow: 0.1", "inflow: {until: {temperature: 1}}"),
        js(states=None), PLANT, "spec.yaml:5:1: an amplitude until 'temperature' moves, which the local model does not "
        "have; m.json has level, excess"),
    "offset_of_left_out_state": (SOURCE + DRIVES.replace("amplitude", "offsets: {temperature: 1}, amplitude"),
        js(states=None), PLANT, "spec.yaml:5:1: an offset of 'temperature', which is no named state of the local "
        "model; "
        "m.json has none"),
    "sample_time_against_drives": (SOURCE + DRIVES, js(dt=0.2), PLANT,
        "spec.yaml:5:1: `every`: 0.5 s is no whole number of sample times; m.json has a sample time of 0.2 s"),
    "sample_time_of_the_plant": (SOURCE, js(dt=0.2), STEPPING,
        "m.json:9:9: `dt`: a sample time of 0.2 s; the plant's step of 0.5 s is expected"),
    "continuous_for_a_discrete_plant": (SOURCE, js(), STEPPING,
        "m.json:1:1: the model is continuous, the plant a difference equation with steps of 0.5 s; `dt` of 0.5 s is "
        "expected"),
    "delay_name": ("delays: {inputs: {haet: 1 s}}\n", js(), PLANT,
        "spec.yaml:4:19: the plant has no 'haet'; an input is expected: inflow, heat; did you mean 'heat'?"),
    "delay_unit": ("delays: {outputs: {excess: 1 m}}\n", js(), PLANT,
        "spec.yaml:4:28: '1 m' is a length; `delays: outputs: excess` takes a time, in the plant's unit s"),
    "delay_sign": ("delays: {outputs: {excess: -1 s}}\n", js(), PLANT,
        "spec.yaml:4:28: `delays: outputs: excess`: '-1 s' is below zero"),
    "delay_steps": ("delays: {inputs: {heat: 0.7 s}}\n", js(), STEPPING,
        "spec.yaml:4:25: `delays: inputs: heat`: '0.7 s' is no whole number of the plant's steps of 0.5 s; a multiple "
        "of the plant's step is expected"),
    "wraps_unit": ("wraps: [level]\n", js(), PLANT,
        "spec.yaml:4:9: `wraps`: 'level' is no angle: the plant has it in m; a state or output in rad, deg or rev is "
        "expected"),
    "wraps_name": ("wraps: [inflow]\n", js(), PLANT,
        "spec.yaml:4:9: 'inflow' is an input of the plant; a state or output is expected: level, temperature, excess"),
    "check_word": ("requirements: {R: {checks: [full.agrees]}}\n", js(), PLANT,
        "spec.yaml:4:29: `checks`: 'full.agrees' fits no check; POINT.CHECK is expected, as in full.differentiable; "
        "did you mean 'full.trims'?"),
}  # fmt: skip


@pytest.mark.parametrize("name", MISTAKES)
def test_the_whole_text_is_told(load: Load, name: str) -> None:
    spec, model, plant, told = MISTAKES[name]
    with pytest.raises(SpecError) as caught:
        load(spec, model, plant)
    assert str(caught.value) == told


def test_requirements_may_ask_for_agrees(load: Load) -> None:
    case = load(SOURCE + "requirements: {R: {checks: [full.agrees]}}\n")
    assert case.requirements[0].checks == ("agrees",)
    assert CHECKS["agrees"]
