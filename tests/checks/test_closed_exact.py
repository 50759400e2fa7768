"""Closed plants and local models against what shares no code with them: closed forms, and a march in small steps."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from cart import case, controller, drives, loop, pd, sampled_pd, set_point
from scipy.linalg import expm

from linverify.checks.comparison import Comparison, comparison
from linverify.checks.study import Study
from linverify.core.case import Case, Options
from linverify.core.delivered import Delays
from linverify.core.drive import Drive
from linverify.core.loop import Actuator
from linverify.numerics.independent import run_independent
from linverify.numerics.pace import pace
from linverify.numerics.simulate import Fidelity, run_alone

FINE = 4000  # steps a unit of time of the march
SHARP = Fidelity(8, 1e-6)  # two nodes or more in each piece between instants


def compared(one: Case) -> Comparison:
    return comparison(Study(one, Options()).closed(""), "")


def test_the_poles_of_a_double_integrator_with_a_pd_controller() -> None:
    """q'' = f, f = -(9 q + 6 v): both poles at -3; the set point comes in by 9."""
    nothing = (np.zeros((0, 0)), np.zeros((0, 2)), np.zeros((1, 0)))
    hold = loop(controller(*nothing, [[9.0, 6.0]]), measures=("q", "v"))
    model = Study(case(hold, parameters={"a": 0.0}, trim=_held()), Options()).closed("").model()
    assert np.poly(model.A) == pytest.approx([1.0, 6.0, 9.0], rel=1e-7)
    assert model.inputs.names == ("f",)
    assert model.outputs.names == ("y", "f")
    assert model.C[1] == pytest.approx([-9.0, -6.0], rel=1e-7)


def _held() -> Any:
    from linverify.core.case import TrimAsk

    return TrimAsk(hold={"q": 0.0, "v": 0.0}, find=("f",), start={"f": 0.0})


def test_a_sampled_double_integrator_is_deadbeat() -> None:
    """f = -(q / T^2 + 1.5 v / T) brings q'' = f to rest in two samples from anywhere: a textbook closed form."""
    T = 0.2
    nothing = (np.zeros((0, 0)), np.zeros((0, 2)), np.zeros((1, 0)))
    hold = loop(controller(*nothing, [[1 / T**2, 1.5 / T]], T), measures=("q", "v"))
    one = case(hold, parameters={"a": 0.0}, trim=_held(), driven=drives(every=T, offsets={"q": 0.5, "v": 0.3}))
    study = compared(one)
    start = Drive(T, ("f",), np.zeros((5, 1)), offsets={"q": 0.5, "v": -0.3})
    runs = run_alone(study.rig, start, SHARP)
    y = runs.signals.index("y")
    assert np.abs(runs.model[y, 2:, :, 0]).max() < 1e-7
    assert np.abs(runs.plant[y, 2:, :, 0]).max() < 1e-7
    assert np.abs(runs.plant[y, 1, 0, 0]) > 0.1


def test_the_pole_of_a_lag_in_the_loop() -> None:
    """(s^2 - 4)(0.05 s + 1)(0.02 s + 1) + 20 (0.02 s + 1) + 4 s."""
    one = case(loop(pd(20.0, 4.0)), actuators={"f": Actuator(lag=0.05)})
    poles, _ = pace(Study(one, Options()).closed("").model())
    plant = np.polymul([1.0, 0.0, -4.0], np.polymul([0.05, 1.0], [0.02, 1.0]))
    expected = np.roots(np.polyadd(plant, [4.4, 20.0]))
    assert np.sort_complex(poles) == pytest.approx(np.sort_complex(expected), rel=1e-6)


LATE = [
    (0.05, 0.0, 0.0, 0.1), (0.05, 0.05, 0.0, 0.1), (0.05, 0.02, 0.0, 0.1), (0.05, 0.07, 0.0, 0.1),
    (0.1, 0.0, 0.03, 0.05), (0.05, 0.0, 0.05, 0.1), (0.05, 0.02, 0.12, 0.1), (0.2, 0.05, 0.0, 0.1),
]  # fmt: skip


@pytest.mark.parametrize("sample, late, old, every", LATE)
def test_dead_times_of_a_sampled_loop_are_exact(sample: float, late: float, old: float, every: float) -> None:
    """A step of the set point, against a march that keeps every past value: whole samples and what is left of one."""
    kp, kd = (8.0, 4.0) if sample >= 0.1 else (12.0, 5.0)
    delays = Delays(outputs={"y": old} if old else {})
    one = case(
        loop(sampled_pd(kp, kd, sample), delay=late), driven=set_point(every=every), delays=delays, envelope={}
    )  # fmt: skip
    study, count = compared(one), round(1.0 / every)
    step = Drive(every, ("y",), np.ones((count, 1)))
    runs, second = run_alone(study.rig, step, SHARP), run_independent(study.rig, step, SHARP)
    truth = _marched(kp, kd, sample, late, old)
    at = np.rint(runs.times * FINE).astype(int)
    q = truth[at, 0]
    y = runs.signals.index("y")
    assert np.abs(runs.model[y, :, :, 0] - q).max() < 1e-9
    assert np.abs(runs.plant[y, :, :, 0] - q).max() < 1e-7
    assert np.abs(second.plant - runs.plant).max() < 1e-6
    assert np.abs(second.model - runs.model).max() < 1e-9
    inside = at[:, 1]
    assert runs.model[runs.signals.index("f"), :, 1, 0] == pytest.approx(truth[inside, 1], abs=1e-8)


def _marched(kp: float, kd: float, sample: float, late: float, old: float) -> np.ndarray:
    """q and f of q'' = 4 q + f at 1 / FINE, exact between; f = kp e + kd (e - e before) / sample, held and late."""
    h = 1.0 / FINE
    across = expm(np.array([[0.0, 1.0, 0.0], [4.0, 0.0, 1.0], [0.0, 0.0, 0.0]]) * h)
    x, f, before, waiting = np.zeros(2), 0.0, 0.0, []
    q, out = np.zeros(FINE + 1), np.zeros((FINE + 1, 2))
    for i in range(FINE + 1):
        q[i] = x[0]
        if i % round(sample / h) == 0:
            seen = i - round(old / h)
            error = 1.0 - (q[seen] if seen >= 0 else 0.0)
            waiting.append((i + round(late / h), kp * error + kd * (error - before) / sample))
            before = error
        while waiting and waiting[0][0] <= i:
            f = waiting.pop(0)[1]
        out[i] = x[0], f
        x = (across @ np.array([*x, f]))[:2]
    return out


@pytest.mark.parametrize("sample", [0.05, 0.2])
def test_both_integrators_agree_on_a_sampled_loop_around_a_plant_that_bends(sample: float) -> None:
    kp, kd = (8.0, 4.0) if sample >= 0.1 else (12.0, 5.0)
    one = case(
        loop(sampled_pd(kp, kd, sample)), driven=set_point(), parameters={"b": 40.0},
        actuators={"f": Actuator(lag=0.03, low=-3.0, high=3.0)},
    )  # fmt: skip
    study = compared(one)
    values = 0.3 * np.sign(np.sin(np.arange(12.0)))[:, np.newaxis]
    drive = Drive(0.1, ("y",), values)
    first, second = run_alone(study.rig, drive, SHARP), run_independent(study.rig, drive, SHARP)
    assert first.completed[0]
    assert np.nanmax(np.abs(first.plant - second.plant)) < 1e-5
    assert np.nanmax(np.abs(first.error)) > 0.01


def test_the_worst_drive_of_a_hybrid_model_is_weighed_exactly() -> None:
    """What each row of a drive adds to a signal at the end, against runs of the local model with one row alone."""
    from linverify.numerics.worst import weights

    for sample in (0.05, 0.1, 0.2, 0.4):
        one = case(loop(sampled_pd(6.0, 3.0, sample)), driven=set_point(), envelope={})
        study = compared(one)
        rows, _ = weights(study.rig.model, "f", 0.1, 8, "held")
        column = study.rig.model.inputs.index("y")
        for k in (0, 3, 7):
            alone = np.zeros((8, 1))
            alone[k] = 1.0
            runs = run_alone(study.rig, Drive(0.1, ("y",), alone), SHARP)
            assert rows[k, column] == pytest.approx(runs.model[runs.signals.index("f"), -1, -1, 0], abs=1e-9)
