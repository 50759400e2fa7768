"""The guess at a cause: right where it is made, on faults of the demo plants, and silent where two things fit."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from delivering import ENTRIES_AT, POINT_AT, delivered

from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Case, CheckAsk, Options, Relative
from linverify.core.delivered import AgreeAsk, DeliveredModel, LocalAsk, ResponseAsk
from linverify.core.model import LocalModel
from linverify.core.verdict import Status
from linverify.numerics.sampled import sampled
from linverify.spec.bind import load

ROOT = Path(__file__).parents[2]
SPECS = {"ferry": "foil_ferry/ride", "converter": "buoy_converter/rail", "juice": "juice_pasteurizer/holding"}
AGREE = AgreeAsk(entries=1e-4, place=POINT_AT, entries_place=ENTRIES_AT)
DIGITS = (5,)  # what engineers print; exact files leave less to chance


@cache
def _cases(plant: str) -> tuple[Case, ...]:
    """The spec's points, each knowing the others, with nothing delivered yet."""
    cases = [replace(case, local=LocalAsk()) for case in load(ROOT / "specs" / f"{SPECS[plant]}.yaml", ROOT)]
    known = [Relative(case.point, case.trim, case.parameters) for case in cases]
    return tuple(replace(case, relatives=tuple(one for one in known if one.point != case.point)) for case in cases)


def _derived(case: Case, parameters: Mapping[str, float] | None = None, hold: Mapping[str, float] | None = None):
    changed = replace(
        case,
        local=LocalAsk(),
        parameters={**case.parameters, **(parameters or {})},
        trim=replace(case.trim, hold={**case.trim.hold, **(hold or {})}),
    )
    return Study(changed, Options()).reference()


@cache
def _right(plant: str, point: int = 0) -> LocalModel:
    return _derived(_cases(plant)[point])


def _cause(case: Case, given: DeliveredModel) -> str:
    """The cause that a failed check told; empty where it told none."""
    handed = replace(case, local=LocalAsk(given, None, AGREE))
    found = judge_study(Study(handed, Options()), CheckAsk("agrees", POINT_AT))
    assert found.status is Status.FAIL
    text = found.details.get("cause", {}).get("text", "")
    assert not text or found.notes[0].endswith(text)
    return text


def _told(plant: str, model: LocalModel, digits: int, **changes: Any) -> str:
    return _cause(_cases(plant)[0], delivered(model, digits=digits, **changes))


def _entry(model: LocalModel, matrix: str, row: int, column: int, factor: float) -> LocalModel:
    block = np.array(getattr(model, matrix))
    block[row, column] *= factor
    return replace(model, **{matrix: block})


@pytest.mark.parametrize("digits", [5, 17])
@pytest.mark.parametrize(
    "plant, name, factor, text",
    [
        ("ferry", "mass", 1.05, "mass = 43050 kg explains all of it; the plant has 41000 kg"),
        (
            "ferry",
            "pitch_inertia",
            0.7,
            "pitch_inertia = 805000 kg*m^2 explains all of it; the plant has 1.15e6 kg*m^2",
        ),
        ("ferry", "water_density", 0.97, "water_density = 994.25 kg/m^3 explains all of it; the plant has 1025 kg/m^3"),
        ("converter", "inductance", 1.5, "inductance = 0.000102 H explains all of it; the plant has 6.8e-5 H"),
        ("converter", "diode_drop", 2.0, "diode_drop = 0.84 V explains all of it; the plant has 0.42 V"),
        ("juice", "fouling", 0.8, "fouling = 0.8 explains all of it; the plant has 1"),
    ],
)
def test_a_stale_parameter_is_named_with_its_value(plant: str, name: str, factor: float, text: str, digits: int):
    case = _cases(plant)[0]
    stale = _derived(case, {name: factor * case.parameters[name]})
    assert _told(plant, stale, digits) == f"a stale parameter: {text}"


@pytest.mark.parametrize("digits", DIGITS)
def test_two_parameters_that_explain_equally_are_no_guess(digits: int):
    # battery and coil resistance are in series: nobody could tell which one is stale
    case = _cases("converter")[0]
    stale = _derived(case, {"coil_resistance": 1.5 * case.parameters["coil_resistance"]})
    assert _told("converter", stale, digits) == ""


@pytest.mark.parametrize("digits", DIGITS)
@pytest.mark.parametrize(
    "plant, name, change, text",
    [
        ("ferry", "ride_height", 0.1, "ride_height held at 1 m explains all of it; here it is held at 0.9 m"),
        (
            "ferry",
            "speed",
            12.8 - 24 * 1852 / 3600,
            "speed held at 12.8 m/s explains all of it; here it is held at 12.3467 m/s",
        ),
        ("converter", "load", 0.7, "load held at 2.2 A explains all of it; here it is held at 1.5 A"),
        ("juice", "juice_flow", 0.05, "juice_flow held at 0.95 kg/s explains all of it; here it is held at 0.9 kg/s"),
    ],
)
def test_another_trim_is_named_with_what_was_held(plant: str, name: str, change: float, text: str, digits: int):
    case = _cases(plant)[0]
    assert _told(plant, _derived(case, hold={name: case.trim.hold[name] + change}), digits) == f"another trim: {text}"


@pytest.mark.parametrize("digits", DIGITS)
@pytest.mark.parametrize("plant", SPECS)
def test_the_model_of_another_point_is_recognised(plant: str, digits: int):
    for index, other in enumerate(_cases(plant)[1:], 1):
        text = f"this is the model of operating point {other.point}"
        assert _told(plant, _right(plant, index), digits) == text


@pytest.mark.parametrize("digits", DIGITS)
@pytest.mark.parametrize("plant", SPECS)
def test_signs_are_named_by_entry_row_and_signal(plant: str, digits: int):
    model = _right(plant)
    n, states, inputs = len(model.states), model.states.names, model.inputs.names
    for row, column in list(zip(*np.nonzero(model.A), strict=True))[:3]:
        text = f"the sign of A[{states[row]}, {states[column]}] is reversed"
        assert _told(plant, _entry(model, "A", row, column, -1.0), digits) == text
    many = next(i for i in range(n) if np.count_nonzero(np.r_[model.A[i], model.B[i]]) > 1)
    turned = np.where(np.arange(n) == many, -1.0, 1.0)[:, None]
    row_turned = replace(model, A=model.A * turned, B=model.B * turned)
    assert _told(plant, row_turned, digits) == f"the signs in the row of {states[many]} are reversed"
    seen = [j for j in range(len(inputs)) if np.count_nonzero(np.r_[model.B[:, j], model.D[:, j]]) > 1]
    for j in seen:
        turned = np.where(np.arange(len(inputs)) == j, -1.0, 1.0)
        assert _told(plant, replace(model, B=model.B * turned, D=model.D * turned), digits) == (
            f"the sign of {inputs[j]} is reversed"
        )


@pytest.mark.parametrize("digits", DIGITS)
@pytest.mark.parametrize("plant", SPECS)
def test_transposition_and_exchanged_names_are_named(plant: str, digits: int):
    model = _right(plant)
    assert _told(plant, replace(model, A=model.A.T), digits) == "A is transposed"
    for kind in ("states", "inputs", "outputs"):
        names = getattr(model, kind).names
        exchanged = (names[1], names[0], *names[2:])
        text = f"{kind} {names[0]} and {names[1]} are exchanged"
        assert _told(plant, model, digits, **{kind: exchanged}) == text


@pytest.mark.parametrize("digits", DIGITS)
def test_degrees_for_radians_are_named(digits: int):
    model, f = _right("ferry"), 180.0 / np.pi
    per_degree = np.array([1.0 / f, 1.0, 1.0])
    told = _told("ferry", replace(model, B=model.B * per_degree, D=model.D * per_degree), digits)
    assert told == "fore_flap is in deg, not in rad"
    up = np.array([1.0, 1.0, 1.0, f, 1.0])
    turned = replace(model, A=model.A * up[:, None] / up, B=model.B * up[:, None], C=model.C / up)
    assert _told("ferry", turned, digits) == "state pitch is in deg, not in rad"
    assert (
        _told("ferry", replace(model, A=model.A / up, C=model.C / up), digits)
        == "all slopes by pitch are for deg, not for rad"
    )
    one = _told("ferry", _entry(model, "A", 1, 3, 1.0 / f), digits)
    assert one == "A[heave_rate, pitch] takes pitch in deg, not in rad"


@pytest.mark.parametrize("digits", DIGITS)
@pytest.mark.parametrize("plant", SPECS)
def test_time_and_sampling_slips_are_named(plant: str, digits: int):
    model = _right(plant)
    assert _told(plant, replace(model, A=60 * model.A, B=60 * model.B), digits) == "rates are per min, not per s"
    step = float(f"{0.3 / np.abs(np.linalg.eigvals(model.A)).max():.2g}")
    held = sampled(model, step, "held")
    assert _told(plant, held, digits, step=None) == (
        f"the matrices are those of a discrete model with a sample time of {step:.4g} s"
    )
    assert _told(plant, model, digits, step=step) == (
        f"the matrices are those of the continuous model, not sampled with a sample time of {step:.6g} s"
    )
    assert _told(plant, held, digits, step=1.25 * step) == f"sampled with {step:.4g} s, not with {1.25 * step:.6g} s"
    euler = replace(model, A=np.eye(len(model.A)) + step * model.A, B=step * model.B, step=step)
    assert _told(plant, euler, digits) == f"sampled by one Euler step of {step:.6g} s"


@pytest.mark.parametrize("digits", DIGITS)
@pytest.mark.parametrize("plant", SPECS)
def test_a_single_wrong_entry_is_told_as_the_fact_it_is(plant: str, digits: int):
    model = _right(plant)
    for row, column in list(zip(*np.nonzero(model.A), strict=True))[:2]:
        text = f"only A[{model.states.names[row]}, {model.states.names[column]}] differs from the plant"
        for factor in (1.02, 2.0):
            assert _told(plant, _entry(model, "A", row, column, factor), digits) == text


@pytest.mark.parametrize("digits", DIGITS)
@pytest.mark.parametrize("plant", SPECS)
def test_two_wrong_entries_have_no_cause_that_could_be_named(plant: str, digits: int):
    model, generator = _right(plant), np.random.default_rng(11)
    entries = np.argwhere(model.A)
    for _ in range(2):
        wrong = model
        for row, column in entries[generator.choice(len(entries), 2, replace=False)]:
            wrong = _entry(wrong, "A", row, column, generator.uniform(1.05, 1.6))
        assert _told(plant, wrong, digits) == ""


def test_anonymous_states_are_explained_by_what_outputs_do():
    case, model = _cases("ferry")[0], _right("ferry")
    agree = replace(AGREE, entries=None, response=None)
    stale = _derived(case, {"mass": 44_000.0})
    T = np.random.default_rng(2).normal(size=model.A.shape)
    given = delivered(
        stale, states=None, A=np.linalg.solve(T, stale.A @ T), B=np.linalg.solve(T, stale.B), C=stale.C @ T
    )

    asked = replace(agree, response=ResponseAsk(0.001, 0.1, 10.0, 0.01, POINT_AT))
    handed = replace(case, local=LocalAsk(given, None, asked))
    found = judge_study(Study(handed, Options()), CheckAsk("agrees", POINT_AT))
    assert found.status is Status.FAIL
    assert (
        found.details["cause"]["text"]
        == "a stale parameter: mass = 44000 kg explains all of it; the plant has 41000 kg"
    )


def test_a_sampled_stiff_model_is_not_taken_for_one_in_milliseconds():
    model = _right("converter")
    step = 0.1 / np.abs(np.linalg.eigvals(model.A)).max()
    text = _told("converter", sampled(model, step, "held"), 4, step=None)
    assert text == "" or text.startswith("the matrices are those of a discrete model with a sample time of ")


@pytest.mark.parametrize("state", ["pitch", "ride_height", "heave_rate"])
def test_a_column_that_is_missing_is_no_unit_slip(state: str) -> None:
    """Zeros are near to what a unit a thousand times larger would leave; that explains nothing."""
    right = _right("ferry")
    A, C = np.array(right.A), np.array(right.C)
    at = right.states.index(state)
    A[:, at], C[:, at] = 0.0, 0.0
    assert _told("ferry", replace(right, A=A, C=C), 17) == ""
