"""follows in closed loop: right models pass with errors of rounding, wrong ones are caught, by the moved input too."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from cart import BANDS, case, controller, derived, drives, loop, pd, sampled_pd, set_point, verdict

from linverify.checks.replay import replayed_study
from linverify.checks.study import Study
from linverify.core.case import Amplitude, Band, Interval, Options, TrimAsk
from linverify.core.delivered import Delays, LocalAsk
from linverify.core.drive import Drive
from linverify.core.loop import Actuator, Controller, Loop, Moved
from linverify.core.outcome import Outcome
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict
from linverify.drives import pinned

LAG = {"f": Actuator(lag=0.05)}
LATE = Delays(outputs={"y": 0.05})
LOOPS = {
    "continuous": (loop(), drives(), {}),
    "continuous at the set point": (loop(), set_point(), {}),
    "sampled": (loop(sampled_pd(12.0, 5.0, 0.05)), drives(), {}),
    "sampled at the set point": (loop(sampled_pd(12.0, 5.0, 0.05)), set_point(), {}),
    "samples longer than the drive's": (loop(sampled_pd(8.0, 4.0, 0.2)), set_point(), {}),
    "straight drives": (loop(sampled_pd(12.0, 5.0, 0.05)), set_point(course="straight"), {}),
    "actuator with a lag": (loop(), drives(), {"actuators": LAG}),
    "sampled, with a lag": (loop(sampled_pd(12.0, 5.0, 0.05)), drives(), {"actuators": LAG}),
    "dead time": (loop(delay=0.05), set_point(every=0.05), {}),
    "sampled, with a dead time": (loop(sampled_pd(12.0, 5.0, 0.05), delay=0.02), set_point(), {}),
    "late measurement": (loop(), set_point(every=0.05), {"delays": LATE}),
    "sampled, late measurement": (loop(sampled_pd(12.0, 5.0, 0.05)), drives(), {"delays": LATE}),
    "late input": (loop(), drives(every=0.05), {"delays": Delays(inputs={"f": 0.05})}),
    "static gain of a state": (loop(controller(np.zeros((0, 0)), np.zeros((0, 2)), np.zeros((1, 0)), [[20.0, 4.0]]),
                                    measures=("q", "v")), drives(), {}),
}  # fmt: skip


def small(found: Verdict) -> None:
    assert found.status is Status.PASS, found.reason
    for figure in found.figures:
        assert figure.worst <= 1e-3 * figure.limit
        assert figure.error <= 0.01 * figure.limit


@pytest.mark.parametrize("name", LOOPS)
def test_a_linear_plant_is_followed_to_rounding(name: str) -> None:
    one, driven, changes = LOOPS[name]
    small(verdict(case(one, driven=driven, **changes)))


def test_without_its_loop_the_same_plant_cannot_be_followed_that_long() -> None:
    """exp(2 t) grows by 2e10 in twelve seconds: every drive leaves the envelope; with the loop all complete."""
    wide = {"q": Interval(-5, 5)}
    open_loop = verdict(case(driven=drives(loop="", intervals=120), bands=BANDS[:1], envelope=wide))
    assert open_loop.status is Status.UNDECIDED
    assert "too large for this envelope" in open_loop.reason
    closed = verdict(case(driven=drives(intervals=120), envelope=wide))
    assert closed.status is Status.PASS
    assert closed.details["completed"]["value"] == 100.0


def test_a_gain_error_hides_in_the_output_and_shows_in_the_moved_input() -> None:
    """The slow output follows its set point whatever the gain is; what moves it does not."""
    kp, ki, kd, T = 20.0, 12.0, 6.0, 0.02
    pid = controller([[-1 / T, 0.0], [0.0, 0.0]], [[1.0], [1.0]], [[-kd / T**2, ki]], [[kp + kd / T]])
    bands = (Band("y", "peak", 0.02), Band("f", "peak", 0.1))
    slow = set_point(intervals=30, course="straight", rate={"y": 0.05})
    right = case(loop(pid), driven=slow, bands=bands, envelope={})
    wrong = replace(derived(right), B=np.array([[0.0], [1.3]]))
    assert verdict(right).status is Status.PASS
    found = verdict(right, wrong)
    assert found.status is Status.FAIL
    by_signal = {figure.signal: figure for figure in found.figures}
    assert by_signal["y"].status is Status.PASS
    assert by_signal["y"].worst < 0.5 * by_signal["y"].limit
    assert by_signal["f"].status is Status.FAIL
    assert "f" in found.reason


def test_a_moved_input_without_a_band_leaves_it_undecided() -> None:
    found = verdict(case(bands=BANDS[:1]))
    assert found.status is Status.UNDECIDED
    assert "hides errors in what it controls and shows them in f, which needs an error band too" in found.reason


def test_a_saturating_actuator_is_seen() -> None:
    free = case(loop(pd(20.0, 4.0)), driven=set_point(), actuators=LAG)
    assert verdict(free).status is Status.PASS
    tight = {"f": Actuator(lag=0.05, low=-1.5, high=1.5)}
    found = verdict(case(loop(pd(20.0, 4.0)), driven=set_point(intervals=6), actuators=tight))
    assert found.status is Status.FAIL
    assert any(figure.signal == "f" and figure.status is Status.FAIL for figure in found.figures)


def test_a_rate_limit_is_seen_and_its_lag_is_told() -> None:
    found = verdict(case(driven=set_point(), actuators={"f": Actuator(rate=5.0)}))
    assert found.status is Status.FAIL
    assert any("rate limit of f acts behind a lag" in note for note in found.notes)
    wide = verdict(case(driven=set_point(), actuators={"f": Actuator(rate=1e6)}))
    small(wide)


def test_actuators_stand_in_series_in_open_loop_too() -> None:
    stable = {"parameters": {"a": -4.0}, "bands": BANDS[:1]}
    small(verdict(case(driven=drives(loop=""), actuators=LAG, **stable)))
    found = verdict(case(driven=drives(loop=""), actuators={"f": Actuator(low=-0.5, high=0.5)}, **stable))
    assert found.status is Status.FAIL
    one = verdict(case(driven=drives(loop=""), **stable))
    lagged = verdict(case(driven=drives(loop=""), actuators={"f": Actuator(lag=0.5)}, **stable))
    assert one.details["smallest_visible"] != lagged.details["smallest_visible"]


def test_a_trim_outside_the_range_of_its_actuator_is_undecided() -> None:
    found = verdict(case(actuators={"f": Actuator(low=0.5, high=2.0)}))
    assert found.status is Status.UNDECIDED
    assert "outside the range of its actuator" in found.reason


def cascade(sample: float | None = None) -> tuple[Loop, Loop]:
    """Position by speed: the outer loop asks the inner one for a speed."""
    nothing = (np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)))
    inner = loop(controller(*nothing, [[10.0]], sample), name="speed", measures=("v",))
    outer = loop(controller(*nothing, [[3.0]], sample), name="hold", measures=("y",), moves=(Moved("v", "speed"),))
    return outer, inner


@pytest.mark.parametrize("sample", [None, 0.02])
def test_a_cascade_is_followed(sample: float | None) -> None:
    small(verdict(case(*cascade(sample), driven=set_point())))
    small(verdict(case(*cascade(sample), driven=drives())))


def test_cascades_of_different_sample_times() -> None:
    outer, _ = cascade(0.1)
    _, inner = cascade(0.02)
    small(verdict(case(outer, inner, driven=set_point())))


def test_loops_inside_the_local_model_stay_closed() -> None:
    """No loop of the drives: they add to what `level` moves."""
    found = verdict(case(driven=drives(loop=""), local=LocalAsk(closed=("hold",)), bands=BANDS))
    small(found)


def test_a_nonlinear_plant_is_caught_in_closed_loop() -> None:
    bent = {"parameters": {"b": 400.0}}
    assert verdict(case(driven=set_point(), **bent)).status is Status.FAIL
    assert verdict(case(driven=set_point(), parameters={"b": 1.0})).status is Status.PASS


def difference(t: float, x: Any, u: Any, p: Any) -> Any:
    return np.stack([x[0] + 0.1 * (u[0] + p["c"] * u[0] ** 3)])


TANK = Plant(states={"level": "m"}, inputs={"f": "m/s"}, parameters={"c": 0.0}, dynamics=difference, step=0.1)


def tank(**changes: Any) -> Any:
    """A sampled integrator with a deadbeat controller."""
    gain = controller(np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)), [[10.0]], 0.1)
    known: dict[str, Any] = {
        "plant": TANK,
        "trim": TrimAsk(hold={"level": 0.0}, find=("f",), start={"f": 0.0}),
        "envelope": {"level": Interval(-5, 5), "f": Interval(-60, 60)},
        "nominal": {"level": 1.0, "f": 1.0},
        "driven": drives(at="set_point", amplitude={"level": Amplitude(-0.1, 0.1)}),
        "bands": (Band("level", "peak", 0.01), Band("f", "peak", 0.1)),
    }
    return case(loop(gain, measures=("level",)), **{**known, **changes})


def test_a_difference_equation_is_followed() -> None:
    small(verdict(tank()))
    assert verdict(tank(parameters={"c": 0.5})).status is Status.FAIL


def test_what_cannot_be_closed_in_time_is_told() -> None:
    gain = controller(np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)), [[1.0]])
    found = verdict(replace(tank(), loops={"hold": loop(gain, measures=("level",))}))
    assert found.status is Status.UNDECIDED
    assert "loop hold is continuous, the plant steps every 0.1 s: give it a `sample`" in found.reason
    odd = verdict(case(loop(sampled_pd(12.0, 5.0, 0.07))))
    assert odd.status is Status.UNDECIDED
    assert "neither is a multiple of the other" in odd.reason


DIRECT = Plant(
    states={"x": "m"},
    inputs={"f": "N"},
    outputs={"y": "m"},
    parameters={"d": 0.5, "bend": 0.0},
    dynamics=lambda t, x, u, p: np.stack([-x[0] + u[0]]),
    measurement=lambda t, x, u, p: np.stack([x[0] + p["d"] * u[0] + p["bend"] * u[0] ** 3]),
)


def direct(gain: float, **changes: Any) -> Any:
    nothing = (np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)))
    known: dict[str, Any] = {
        "plant": DIRECT,
        "trim": TrimAsk(hold={"f": 0.0}, find=("x",), start={"x": 0.0}),
        "envelope": {},
        "nominal": {"x": 1.0, "f": 1.0, "y": 1.0},
        "driven": set_point(),
    }
    return case(loop(controller(*nothing, [[gain]])), **{**known, **changes})


def test_an_algebraic_loop_is_solved() -> None:
    small(verdict(direct(3.0)))
    assert verdict(direct(3.0, parameters={"bend": 30.0})).status is Status.FAIL


def test_an_ill_posed_algebraic_loop_is_undecided() -> None:
    found = verdict(direct(-2.0))
    assert found.status is Status.UNDECIDED
    assert "the loop through hold is algebraic and ill-posed" in found.reason


def test_an_algebraic_loop_that_loses_its_solution_is_told_as_such() -> None:
    """f = r - x - bend f^2 has no real solution below r - x = -1 / (4 bend)."""
    bent = Plant(
        states={"x": "m"},
        inputs={"f": "N"},
        outputs={"y": "m"},
        parameters={"bend": 10.0},
        dynamics=lambda t, x, u, p: np.stack([-x[0] + u[0]]),
        measurement=lambda t, x, u, p: np.stack([x[0] + p["bend"] * u[0] ** 2]),
    )
    wide = (Band("y", "peak", 50.0), Band("f", "peak", 50.0))
    found = verdict(
        direct(1.0, plant=bent, parameters={"bend": 10.0}, bands=wide, driven=set_point(count=3, intervals=2))
    )
    assert found.status is Status.UNDECIDED
    assert f"{Outcome.NO_SOLUTION.value}: the algebraic loop through hold has no solution" in found.reason


@pytest.mark.parametrize("control", [pd(20.0, 4.0), sampled_pd(12.0, 5.0, 0.05)], ids=["continuous", "sampled"])
def test_a_failing_drive_is_replayed_with_the_same_figures(control: Controller, tmp_path: Path) -> None:
    one = case(loop(control), driven=set_point(), parameters={"b": 400.0})
    found = verdict(one, options=Options(reports=tmp_path))
    again = verdict(one, options=Options(reports=tmp_path))
    assert found == again
    assert found.status is Status.FAIL
    worst = found.evidence[0]
    drive, about = pinned.read(tmp_path / "evidence" / f"{worst.drive}.json")
    assert about["item"] == "specs/cart.yaml::rest::follows"
    assert drive.inputs == ("y",)
    assert set(about["plant"]) == {"y", "f"}
    replay = replayed_study(Study(one, Options(seed=7)), one.checks[0], drive)
    assert replay.status is Status.FAIL
    quoted = {(each.what, each.signal): each for each in found.figures if each.drive == worst.drive}
    assert quoted
    for figure in replay.figures:
        if (figure.what, figure.signal) in quoted:
            assert figure == quoted[figure.what, figure.signal]


def test_a_pinned_drive_is_run_first_in_closed_loop(tmp_path: Path) -> None:
    driven = set_point()
    pin = Drive(0.1, ("y",), np.full((driven.intervals, 1), 0.1))
    path = pinned.write(tmp_path, pin, {})
    found = verdict(case(loop(), driven=replace(driven, pinned=(path,))))
    assert found.status is Status.PASS
    assert found.details["drives"]["pinned"] == 1
    foreign = pinned.write(tmp_path, Drive(0.1, ("f",), np.full((driven.intervals, 1), 0.1)), {})
    misfit = verdict(case(loop(), driven=replace(driven, pinned=(foreign,))))
    assert misfit.status is Status.UNDECIDED
