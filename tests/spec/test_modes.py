"""`modes` and `actuators` bound to a plant: every field of the values, in the plant's units."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path

import pytest

from linverify.core.case import Case, CheckAsk
from linverify.core.errors import Place, SpecError
from linverify.core.loop import Actuator, Limit
from linverify.core.mode import Chosen, ModeAsk
from linverify.core.rules import RULES
from linverify.core.shown import Shown
from linverify.spec import bind
from linverify.spec.scalars import Wrong, location

PLANT = (Path(__file__).parent / "bad" / "plant.py").read_text(encoding="utf-8")
HEAD = """\
linverify: 1
plant: plant.py:tank
operating_points:
  low: {hold: {level: 1 m, temperature: 60 degC, angle: 0 rad}}
"""

Load = Callable[[str], tuple[Case, ...]]


@pytest.fixture
def load(tmp_path: Path) -> Load:
    """Binds a spec of the heated tank, whose time unit is the minute."""
    (tmp_path / "plant.py").write_text(PLANT, encoding="utf-8")

    def loaded(text: str) -> tuple[Case, ...]:
        (tmp_path / "tank.yaml").write_text(text, encoding="utf-8")
        return bind.load(tmp_path / "tank.yaml", tmp_path)

    return loaded


@pytest.fixture
def line(load: Load) -> Callable[[str], ModeAsk]:
    """The one line of `modes`."""

    def bound(text: str) -> ModeAsk:
        (case,) = load(f"{HEAD}modes: [{text}]\n")
        (ask,) = case.modes
        return ask

    return bound


def sides(limit: Limit) -> tuple[str, float, float]:
    return limit.word, limit.low, limit.high


def about(*values: object) -> object:
    return tuple(pytest.approx(value, rel=1e-12) if isinstance(value, float) else value for value in values)


def test_a_line_without_more_is_about_all_modes(line: Callable[[str], ModeAsk]) -> None:
    ask = line("{stable: true}")
    assert ask == ModeAsk(Place("tank.yaml", 5, 9), stable=True)
    assert ask.chosen.everything


def test_what_stable_excuses(line: Callable[[str], ModeAsk]) -> None:
    ask = line("{stable: true, except: {at_zero: [angle, level], time_to_double: {min: 30 s}}}")
    assert (ask.stable, ask.at_zero, ask.time_to_double) == (True, ("angle", "level"), 0.5)


def test_a_window_of_frequencies(line: Callable[[str], ModeAsk]) -> None:
    assert line("{between: [0.5 rad/s, 6 rad/s], stable: true}").chosen == Chosen(30.0, 360.0)
    assert line("{between: [2, 3], stable: true}").chosen == Chosen(2.0, 3.0)
    turns = line("{between: [0 Hz, 1 Hz], stable: true, may_be_empty: true}")
    assert (turns.chosen.low, turns.chosen.high) == about(0.0, 120.0 * math.pi)
    assert turns.may_be_empty


def test_modes_chosen_by_share_and_place(line: Callable[[str], ModeAsk]) -> None:
    ask = line("{name: heave, near: -0.8 + 2.1j, within: 5 %, participates: {level: 30 %, angle: 0.1}}")
    assert ask.name == "heave"
    assert ask.chosen == Chosen(0.0, math.inf, (("level", 0.3), ("angle", 0.1)), -0.8 + 2.1j, 0.05)


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("-0.8 + 2.1j", -0.8 + 2.1j), ("-0.8 - 2.1i", -0.8 + 2.1j), ("-3", -3 + 0j), ("j2", 2j),
        ("-0.8 + 2.1j 1/s", -48 + 126j), ("(-1 + 2j) rad/s", -60 + 120j), ("-2 rad/s", -120 + 0j),
    ],
)  # fmt: skip
def test_places_are_in_the_plants_time_and_on_the_upper_half(
    line: Callable[[str], ModeAsk], text: str, value: complex
) -> None:
    near = line(f"{{near: {text}, within: 5 %}}").chosen.near
    assert near is not None
    assert near == pytest.approx(value, rel=1e-12)


@pytest.mark.parametrize(
    ("text", "value", "unit"),
    [
        ("-0.8 + 2.1j", -0.8 + 2.1j, ""), ("-0.8+2.1i", -0.8 + 2.1j, ""), ("-0.8 +- 2.1j", -0.8 + 2.1j, ""),
        ("-0.8 ± 2.1j", -0.8 + 2.1j, ""), ("-1 + j2e-3", -1 + 0.002j, ""), ("j", 1j, ""), ("-j", -1j, ""),
        ("12j", 12j, ""), (".5 - .5 j", 0.5 - 0.5j, ""), ("1e-3", 0.001 + 0j, ""), ("-4 1/s", -4 + 0j, "1/s"),
        ("(1 + 2j) rad/s", 1 + 2j, "rad/s"), ("2j Hz", 2j, "Hz"),
    ],
)  # fmt: skip
def test_complex_numbers_as_they_are_written(text: str, value: complex, unit: str) -> None:
    assert location(text) == (value, unit)


@pytest.mark.parametrize("text", ["", "nan", "1 + 2", "1 + nanj", "1,5 + 2j", "(1 + 2j", "1 + 2jj", "1 2j", "inf"])
def test_what_is_no_complex_number(text: str) -> None:
    assert isinstance(location(text), Wrong)


def test_limits_in_the_plants_units(line: Callable[[str], ModeAsk]) -> None:
    ask = line(
        "{damping: {min: 0.35}, natural_frequency: [1 rad/s, 2 rad/s], decay_rate: {min: 0.1 1/s}, "
        "time_constant: {max: 3 s}, time_to_half: {max: 30 s}, time_to_double: {min: 1 h}, period: [6 s, 2 min]}"
    )
    assert [sides(limit) for limit in ask.limits] == [
        about("damping", 0.35, math.inf), about("natural_frequency", 60.0, 120.0), about("decay_rate", 6.0, math.inf),
        about("time_constant", -math.inf, 0.05), about("time_to_half", -math.inf, 0.5),
        about("time_to_double", 60.0, math.inf), about("period", 0.1, 2.0),
    ]  # fmt: skip
    assert ask.limits[0].place == Place("tank.yaml", 5, 19)
    assert ask.limits[0].text == "{min: 0.35}"
    assert ask.limits[-1].text == "[6 s, 2 min]"


def test_figures_are_told_in_the_unit_of_their_limit(line: Callable[[str], ModeAsk]) -> None:
    ask = line("{natural_frequency: {max: 2 Hz}, period: {min: 6 s}, decay_rate: {min: 1 rad/s}}")
    told = {limit.word: limit.shown.told_size(limit.high if math.isinf(limit.low) else limit.low)
            for limit in ask.limits if limit.shown}  # fmt: skip
    assert told == {"natural_frequency": "2 Hz", "period": "6 s", "decay_rate": "1 rad/s"}


def test_measures(line: Callable[[str], ModeAsk]) -> None:
    ask = line("{controllable_from: {inflow: 0.05, heat: 2 %}, observable_from: {excess: 5 %, angle: 0.1}}")
    assert [(name, limit.low) for name, limit in ask.controllable] == [("inflow", 0.05), ("heat", 0.02)]
    assert [(name, limit.low) for name, limit in ask.observable] == [("excess", 0.05), ("angle", 0.1)]


def test_zeros(line: Callable[[str], ModeAsk]) -> None:
    ask = line("{minimum_phase: true, inputs: [heat], outputs: [excess, angle], zeros: {real: {max: -1 1/s}, "
               "damping: {min: 0.1}, natural_frequency: {min: 1 Hz}}}")  # fmt: skip
    assert (ask.minimum_phase, ask.inputs, ask.outputs) == (True, ("heat",), ("excess", "angle"))
    assert [sides(limit) for limit in ask.zeros] == [
        about("real", -math.inf, -60.0), about("damping", 0.1, math.inf),
        about("natural_frequency", 120.0 * math.pi, math.inf),
    ]  # fmt: skip


def test_static_gains(line: Callable[[str], ModeAsk]) -> None:
    ask = line(
        "{static_gain: [{from: heat, to: temperature, is: 9 degF/kW +- 5 %}, {from: heat, to: level, is: -3 +- 0.5}, "
        "{from: inflow, to: angle, min: 1 deg s/l}, {from: pump, to: angle, min: 1 s, max: 3 s}]}"
    )
    assert [(source, target, *sides(limit)[1:]) for source, target, limit in ask.static_gain] == [
        about("heat", "temperature", 4.75, 5.25), about("heat", "level", -3.5, -2.5),
        about("inflow", "angle", math.pi / 180.0 / 3.6, math.inf), about("pump", "angle", 1.0, 3.0),
    ]  # fmt: skip
    assert ask.static_gain[0][2].shown == Shown("degF/kW", pytest.approx(1.8))
    assert ask.static_gain[0][2].text == "9 degF/kW +- 5 %"


def test_one_static_gain_needs_no_list(line: Callable[[str], ModeAsk]) -> None:
    ask = line("{static_gain: {from: heat, to: share, is: 0.8 +- 5 %}}")
    assert [sides(limit)[1:] for *_, limit in ask.static_gain] == [about(0.76, 0.84)]


def test_a_rule_brings_its_limits_source_and_caution(line: Callable[[str], ModeAsk]) -> None:
    ask = line("{near: -1 + 2j, within: 5 %, rule: phugoid_level_3, damping: {min: 0.1}}")
    own, ruled = ask.limits
    assert sides(own) == ("damping", 0.1, math.inf)
    assert sides(ruled) == about("time_to_double", 55.0 / 60.0, math.inf)
    assert (ruled.rule, ruled.source) == ("phugoid_level_3", RULES["phugoid_level_3"].source)
    assert ruled.caution
    assert ruled.place == Place("tank.yaml", 5, 44)


def test_the_lines_of_a_point_replace_those_of_the_spec(load: Load) -> None:
    point = "  high: {hold: {level: 2 m, temperature: 60 degC, angle: 0 rad}, modes: [{stable: true}]}\n"
    low, high = load(HEAD + point + "modes:\n  - {damping: {min: 0.1}}\n  - {minimum_phase: true}\n")
    assert [ask.stable for ask in low.modes] == [False, False]
    assert [ask.stable for ask in high.modes] == [True]
    assert low.checks[-1] == CheckAsk("modes", Place("tank.yaml", 6, 1))
    assert high.checks[-1] == CheckAsk("modes", Place("tank.yaml", 5, 66))
    assert [check.name for check in high.checks] == ["trims", "differentiable", "modes"]


def test_each_line_is_a_setting_with_its_place(load: Load) -> None:
    (case,) = load(HEAD + "modes:\n  - {damping: {min: 0.1}}\n  - {stable: true}\n")
    told = {setting.word: (setting.text, setting.origin) for setting in case.settings if setting.word[:5] == "modes"}
    assert told == {
        "modes.1": ("{damping: {min: 0.1}}", "tank.yaml:6:5"),
        "modes.2": ("{stable: true}", "tank.yaml:7:5"),
    }


def test_requirements_find_the_check(load: Load) -> None:
    (case,) = load(HEAD + 'modes: [{stable: true}]\nrequirements: {R-1: {checks: ["*.modes"]}}\n')
    assert [(found.name, found.checks) for found in case.requirements] == [("R-1", ("modes",))]


def test_limits_name_what_a_reduced_model_has(load: Load) -> None:
    keep = "local_models: {keep: {states: [level], inputs: [inflow], outputs: [share]}, others: freeze}\n"
    asked = ("{participates: {angle: 10 %}, stable: true}", "{controllable_from: {heat: 0.1}}",
             "{minimum_phase: true, outputs: [excess]}")  # fmt: skip
    with pytest.raises(SpecError) as caught:
        load(f"{HEAD}{keep}modes: [{', '.join(asked)}]\n")
    assert [problem.wrong for problem in caught.value.problems] == [
        "`modes`: 'angle' is nothing that the local model has", "`modes`: 'heat' is nothing that the local model has",
        "`modes`: 'excess' is nothing that the local model has",
    ]  # fmt: skip
    (case,) = load(
        f"{HEAD}{keep}modes: [{{participates: {{level: 10 %}}, stable: true, except: {{at_zero: [angle]}}}}]\n"
    )
    assert case.modes[0].at_zero == ("angle",)


def test_actuators(load: Load) -> None:
    (case,) = load(HEAD + "actuators:\n  inflow: {lag: 40 ms, rate: 1 l/s/min, range: [0, 2 l/s]}\n  heat: {lag: 0}\n")
    inflow, heat = case.actuators["inflow"], case.actuators["heat"]
    assert (inflow.lag, inflow.rate, inflow.low, inflow.high) == about(0.04 / 60.0, 3.6, 0.0, 7.2)
    assert heat == Actuator(place=Place("tank.yaml", 7, 3))
    told = {setting.word: setting.origin for setting in case.settings if setting.word.startswith("actuators")}
    assert told["actuators.inflow.rate"] == "tank.yaml:6:30"


def test_a_range_may_be_wider_than_the_envelope(load: Load) -> None:
    (case,) = load(HEAD + "envelope: {heat: [0 kW, 4 kW]}\nactuators: {heat: {range: [3 kW, 9 kW]}}\n")
    assert (case.actuators["heat"].low, case.actuators["heat"].high) == (3.0, 9.0)
