"""Which model a loop is closed around: derived, reduced, delivered, sampled, or one that has loops inside already."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from looping import PLACE, figure, gain, judged, least, linear_plant, loop, pid
from scipy.linalg import expm

from linverify.core.delivered import Delays, DeliveredModel, Keep, LocalAsk
from linverify.core.loop import Actuator, Moved
from linverify.core.plant import Plant
from linverify.core.verdict import Status

INTEGRATOR = linear_plant([[0.0]], [[1.0]], [[1.0]])
DOUBLE = linear_plant([[0.0, 1.0], [0.0, 0.0]], [[0.0], [1.0]], np.eye(2))
ALL = (least("gain_margin", 1.0), least("phase_margin", 0.01))
UP, PHASE = "gain margin (upwards)", "phase margin"


def delivered(A: Any, B: Any, C: Any, **changes: Any) -> LocalAsk:
    A, B, C = (np.array(each, dtype=float, ndmin=2) for each in (A, B, C))
    known: dict[str, Any] = {
        "states": tuple(f"x{k + 1}" for k in range(len(A))),
        "inputs": ("u1",),
        "outputs": tuple(f"y{k + 1}" for k in range(len(C))),
    }
    made = DeliveredModel("model.json", PLACE, A, B, C, np.zeros((len(C), B.shape[1])), **{**known, **changes})
    return LocalAsk(made)


def test_a_delivered_model_is_what_is_judged() -> None:
    """1 / (s + 0) in the plant, 2 exp() in the file: the crossover is the file's."""
    verdict = judged(INTEGRATOR, loop(pid(1.0), *ALL), local=delivered([[0.0]], [[2.0]], [[1.0]]))
    assert verdict.status is Status.PASS, verdict.reason
    assert figure(verdict, PHASE).at_frequency == pytest.approx(2.0, rel=1e-9)
    assert figure(verdict, PHASE).error < 1e-9


def test_anonymous_states_can_not_be_measured_but_outputs_can() -> None:
    local = delivered([[0.0, 1.0], [0.0, 0.0]], [[0.0], [1.0]], np.eye(2), states=None)
    two = loop(gain([[1.0, 1.0]]), *ALL, measures=("y1", "y2"))
    assert judged(DOUBLE, two, local=local).status is Status.PASS
    by_state = loop(gain([[1.0, 1.0]]), *ALL, measures=("x1", "x2"))
    verdict = judged(DOUBLE, by_state, local=local)
    assert verdict.status is Status.UNDECIDED
    assert "measures x1, which the local model does not have" in verdict.reason
    assert judged(DOUBLE, by_state).status is Status.PASS


def test_a_model_without_what_the_loop_moves_is_undecided() -> None:
    plant = linear_plant([[0.0]], [[1.0, 1.0]], [[1.0]])
    verdict = judged(plant, loop(pid(1.0), *ALL, moves=(Moved("u2"),)), local=delivered([[0.0]], [[1.0]], [[1.0]]))
    assert verdict.status is Status.UNDECIDED
    assert "moves u2, which the local model does not have" in verdict.reason


def test_a_sampled_delivery_is_closed_by_a_sampled_loop_of_a_whole_multiple() -> None:
    """x+ = x + h u: L = k n h / (z - 1)."""
    h, k = 0.1, 2.0
    local = delivered([[1.0]], [[h]], [[1.0]], step=h)
    for n in (1, 2):
        verdict = judged(INTEGRATOR, loop(gain(k, n * h), *ALL), local=local)
        assert verdict.status is Status.PASS, verdict.reason
        assert figure(verdict, UP).worst == pytest.approx(2.0 / (k * n * h), rel=1e-6)
    assert judged(INTEGRATOR, loop(gain(k, 0.15), *ALL), local=local).status is Status.UNDECIDED
    continuous = judged(INTEGRATOR, loop(pid(k), *ALL), local=local)
    assert continuous.status is Status.UNDECIDED
    assert "the local model is a difference equation every 0.1" in continuous.reason
    straight = replace(local, delivered=replace(local.delivered, course="straight"))  # type: ignore[type-var]
    assert judged(INTEGRATOR, loop(gain(k, h), *ALL), local=straight).status is Status.UNDECIDED
    lagged = judged(INTEGRATOR, loop(gain(k, h), *ALL), local=local, actuators={"u1": Actuator(lag=0.2)})
    assert lagged.status is Status.UNDECIDED
    assert "behind its lag u1 is not held" in lagged.reason


def test_a_sampled_delivery_and_the_plant_behind_a_hold_are_one_loop() -> None:
    A, B, C, h = np.array([[0.0, 1.0], [-2.0, -0.7]]), np.array([[0.0], [1.0]]), np.array([[2.0, 0.3]]), 0.2
    whole = expm(np.block([[A, B], [np.zeros((1, 3))]]) * h)
    plant = linear_plant(A, B, C)
    one = loop(gain(0.3, h), *ALL, delay=2 * h)
    derived = judged(plant, one)
    given = judged(plant, one, local=delivered(whole[:2, :2], whole[:2, 2:], C, step=h))
    for what in (UP, PHASE):
        assert figure(given, what).worst == pytest.approx(figure(derived, what).worst, rel=1e-6)


def test_a_reduced_model_is_closed_as_it_is_verified() -> None:
    """A fast lag that is frozen out adds nothing: the integrator is left."""
    plant = linear_plant([[0.0, 1.0], [0.0, -20.0]], [[1.0], [0.0]], [[1.0, 0.0]])
    keep = Keep(("x1",), ("u1",), ("y1",), "freeze", PLACE)
    verdict = judged(plant, loop(pid(1.0), *ALL), local=LocalAsk(keep=keep))
    assert verdict.status is Status.PASS, verdict.reason
    assert [pole["real"] for pole in verdict.details["margins"]["closed_loop_poles"]] == pytest.approx([-1.0])


def cascade() -> tuple[Any, Any]:
    return loop(pid(1.0), *ALL, moves=(Moved("y2", "inner"),)), loop(pid(3.0), *ALL, name="inner", measures=("y2",))


def test_loops_in_the_model_are_inside_every_other_loop_and_not_inside_themselves() -> None:
    outer, inner = cascade()
    alone = judged(DOUBLE, outer, inner)
    with_it = judged(DOUBLE, outer, inner, local=LocalAsk(closed=("inner",)))
    assert figure(with_it, PHASE).worst == pytest.approx(figure(alone, PHASE).worst, rel=1e-9)
    beside = loop(pid(1.0), *ALL)
    assert judged(DOUBLE, beside, inner).status is not Status.PASS
    assert judged(DOUBLE, beside, inner, local=LocalAsk(closed=("inner",))).status is Status.PASS
    own = judged(DOUBLE, replace(inner, leaves=("x1",)), outer, local=LocalAsk(closed=("inner",)))
    assert figure(own, PHASE).worst == pytest.approx(math.pi / 2.0, rel=1e-6)
    assert own.details["margins"]["inside"] == []


def test_a_loop_inside_a_closed_one_is_judged_on_the_bare_model_too() -> None:
    outer, inner = cascade()
    own = judged(DOUBLE, replace(inner, leaves=("x1",)), outer, local=LocalAsk(closed=("ride",)))
    assert own.status is Status.PASS, own.reason
    assert figure(own, PHASE).worst == pytest.approx(math.pi / 2.0, rel=1e-6)


def test_a_delivered_model_with_a_loop_inside_is_the_plant_of_the_others() -> None:
    """The rate loop k2 in the file: x2' = -k2 x2 + u, with the lag of the actuator of u inside too."""
    inner = loop(pid(3.0), *ALL, name="inner", measures=("y2",))
    local = replace(delivered([[0.0, 1.0], [0.0, -3.0]], [[0.0], [1.0]], np.eye(2)), closed=("inner",))
    actuators = {"u1": Actuator(lag=0.1)}
    verdict = judged(DOUBLE, loop(pid(1.0), *ALL), inner, local=local, actuators=actuators)
    assert verdict.status is Status.PASS, verdict.reason
    at = math.sqrt((math.sqrt(3.0**4 + 4.0) - 3.0**2) / 2.0)
    assert figure(verdict, PHASE).worst == pytest.approx(math.pi / 2.0 - math.atan(at / 3.0), rel=1e-6)
    own = judged(DOUBLE, replace(inner, leaves=("x1",)), local=local, actuators=actuators)
    assert own.status is Status.PASS, own.reason
    at = math.sqrt((math.sqrt(1.0 + 4.0 * (3.0 * 0.1) ** 2) - 1.0) / (2.0 * 0.1**2))
    assert figure(own, PHASE).worst == pytest.approx(math.pi / 2.0 - math.atan(at * 0.1), rel=1e-6)
    cascaded = judged(DOUBLE, loop(pid(1.0), *ALL, moves=(Moved("y2", "inner"),)), inner, local=local)
    assert cascaded.status is Status.UNDECIDED


def test_a_dead_time_inside_a_delivered_closed_model_is_undecided() -> None:
    outer, inner = cascade()
    verdict = judged(DOUBLE, outer, replace(inner, delay=0.1), local=LocalAsk(closed=("inner",)))
    assert verdict.status is Status.UNDECIDED
    late = judged(DOUBLE, outer, inner, local=LocalAsk(closed=("inner",)), delays=Delays({"u1": 0.1}))
    assert late.status is Status.UNDECIDED


def test_entries_that_are_known_badly_widen_the_error() -> None:
    """A plant that answers with five digits: the phase margin is known to about as many, and a limit inside is open."""

    def rough(t: float, x: Any, u: Any, p: Any) -> Any:
        exact = -x[0] + 2.0 * u[0]
        return np.stack([np.round(exact, 5)])

    plant = Plant(
        states={"x1": "m"}, inputs={"u1": "N"}, outputs={"y1": "m"}, parameters={}, dynamics=rough,
        measurement=lambda t, x, u, p: np.stack([1.0 * x[0]]),
    )  # fmt: skip
    true = math.pi - math.atan(math.sqrt(3.0))
    verdict = judged(plant, loop(pid(1.0), least("phase_margin", 0.5)))
    assert verdict.status is Status.PASS, verdict.reason
    found = figure(verdict, PHASE)
    assert found.error > 1e-6
    assert abs(found.worst - true) <= found.error
    assert judged(plant, loop(pid(1.0), least("phase_margin", found.worst))).status is Status.UNDECIDED


@pytest.mark.parametrize("broken", ["ring", "self"])
def test_loops_that_close_each_other_are_undecided(broken: str) -> None:
    one = loop(pid(1.0), *ALL, within=("other",) if broken == "ring" else ("ride",))
    other = loop(pid(1.0), name="other", within=("ride",))
    verdict = judged(INTEGRATOR, one, other)
    assert verdict.status is Status.UNDECIDED
    assert "closed inside itself" in verdict.reason


# poles at -18 and -0.0005, printed to four digits; as far as these go, the slow one may lie right of the axis
PRINTED = [[-9.001, 9.0], [9.0, -9.0]]


@pytest.mark.parametrize("digits", [17, 4])
def test_printed_digits_leave_open_whether_a_loop_is_stable(digits: int) -> None:
    expected = Status.PASS if digits == 17 else Status.UNDECIDED
    local = delivered(PRINTED, [[1e-4], [0.0]], [[1.0, 0.0]], digits=digits)
    weak = judged(linear_plant(PRINTED, [[1e-4], [0.0]], [[1.0, 0.0]]), loop(gain([[1.0]])), local=local)
    assert weak.status is expected, weak.reason
    # and whether a mode is that the loop does not move
    A, B, C = np.block([[np.zeros((1, 3))], [np.zeros((2, 1)), np.array(PRINTED)]]), [[1.0], [0.0], [0.0]], np.eye(1, 3)
    beside = judged(linear_plant(A, B, C), loop(gain([[1.0]])), local=delivered(A, B, C, digits=digits))
    assert beside.status is expected, beside.reason
    if expected is Status.UNDECIDED:
        assert "leave open whether a pole that the loop does not move is stable" in beside.reason


def test_printed_digits_widen_the_error_of_a_margin() -> None:
    # 2 / (s + 1) of unit gain: phase pi - atan(sqrt(3)) at sqrt(3), known no better than 2 printed as 2.000
    local = delivered([[-1.0]], [[2.0]], [[1.0]], digits=4)
    plant = linear_plant([[-1.0]], [[2.0]], [[1.0]])
    true = math.pi - math.atan(math.sqrt(3.0))
    found = figure(judged(plant, loop(pid(1.0), least("phase_margin", 0.5)), local=local), PHASE)
    assert found.worst == pytest.approx(true, rel=1e-9)
    assert found.error > 1e-4
    assert judged(plant, loop(pid(1.0), least("phase_margin", true)), local=local).status is Status.UNDECIDED


def test_a_lag_that_the_controller_cancels_leaves_the_integrator_exact() -> None:
    # 1 / (s (s + 1/2)) behind (s + 1/2) / (0.1 s + 1): 10 / (s (s + 10)) may fall to any gain above zero
    lead = replace(gain([[10.0]]), A=np.array([[-10.0]]), B=np.array([[1.0]]), C=np.array([[-95.0]]))
    plant = linear_plant([[0.0, 1.0], [0.0, -0.5]], [[0.0], [1.0]], [[1.0, 0.0]])
    verdict = judged(plant, loop(lead, least("gain_margin", 2.0)))
    assert verdict.status is Status.PASS, verdict.reason
    assert math.isinf(figure(verdict, "gain margin (downwards)").worst)


def test_one_state_of_an_oscillation_covers_it() -> None:
    # an unstable oscillation beside the loop, in which two states take part alike
    A, B, C = [[-1.0, 0.0, 0.0], [0.0, 0.1, 1.0], [0.0, -1.0, 0.1]], [[1.0], [0.0], [0.0]], np.eye(1, 3)
    plant = linear_plant(A, B, C)
    assert judged(plant, loop(gain([[1.5]]), leaves=("x2",))).status is Status.PASS
    assert judged(plant, loop(gain([[1.5]]), leaves=("x1",))).status is Status.FAIL
