"""Loops of every build against closed forms: cascades, actuators, dead times, holds, several channels, hidden poles."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from looping import DEG, PLACE, companion, figure, gain, judged, least, linear_plant, loop, most, pid

from linverify.checks.margin_figures import between, status_of
from linverify.core.delivered import Delays
from linverify.core.loop import Actuator, Limit, Loop, Moved
from linverify.core.rules import RULES
from linverify.core.verdict import Sense, Status
from linverify.numerics.structured import Bounded

INTEGRATOR = linear_plant([[0.0]], [[1.0]], [[1.0]])
DOUBLE = linear_plant([[0.0, 1.0], [0.0, 0.0]], [[0.0], [1.0]], np.eye(2))
ALL = (least("gain_margin", 1.0), least("phase_margin", 0.01), least("delay_margin", 0.001))
UP, PHASE, DELAY = "gain margin (upwards)", "phase margin", "delay margin"


def test_an_actuator_lag_is_inside_the_loop() -> None:
    """L = k / (s (T s + 1))."""
    k, T = 2.0, 0.3
    verdict = judged(INTEGRATOR, loop(pid(k), *ALL), actuators={"u1": Actuator(lag=T, rate=0.1, low=-1.0, high=1.0)})
    at = math.sqrt((math.sqrt(1.0 + 4.0 * k**2 * T**2) - 1.0) / (2.0 * T**2))
    assert verdict.status is Status.PASS, verdict.reason
    assert figure(verdict, PHASE).worst == pytest.approx(math.pi / 2.0 - math.atan(at * T), rel=1e-6)
    assert figure(verdict, PHASE).at_frequency == pytest.approx(at, rel=1e-6)


def test_a_trim_that_the_actuator_cannot_reach_is_undecided() -> None:
    """Against its stop an actuator answers nothing, whatever the margins of the local model are."""
    wide, high = Actuator(low=-1.0, high=1.0), Actuator(low=0.5, high=1.0)
    assert judged(INTEGRATOR, loop(pid(2.0), *ALL), actuators={"u1": wide}).status is Status.PASS
    verdict = judged(INTEGRATOR, loop(pid(2.0), *ALL), actuators={"u1": high})
    assert verdict.status is Status.UNDECIDED
    assert "the trimmed value of u1, 0 N, lies outside the range of its actuator, 0.5 N to 1 N" in verdict.reason
    inside = judged(DOUBLE, *cascade(1.0, 3.0), actuators={"u1": high})
    assert inside.status is Status.UNDECIDED


@pytest.mark.parametrize("low", [0.0, -1e-12])
def test_a_trim_on_the_limit_of_an_actuator_is_undecided(low: float) -> None:
    """It can answer one way only there, as a valve that is shut."""
    verdict = judged(INTEGRATOR, loop(pid(2.0), *ALL), actuators={"u1": Actuator(low=low, high=1.0)})
    assert verdict.status is Status.UNDECIDED
    assert "u1 rests on a limit of its actuator" in verdict.reason
    beside = judged(INTEGRATOR, loop(pid(2.0), *ALL), actuators={"u1": Actuator(low=-0.01, high=1.0)})
    assert beside.status is Status.PASS


def test_dead_times_around_the_loop_add_up() -> None:
    """L = k exp(-s d) / s."""
    k, d = 1.5, 0.3
    delays = Delays({"u1": 0.1}, {"y1": 0.05})
    verdict = judged(INTEGRATOR, loop(pid(k), *ALL, delay=0.15), delays=delays)
    assert verdict.status is Status.PASS, verdict.reason
    assert figure(verdict, UP).worst == pytest.approx(math.pi / (2.0 * k * d), rel=1e-6)
    assert figure(verdict, PHASE).worst == pytest.approx(math.pi / 2.0 - k * d, rel=1e-6)
    assert figure(verdict, DELAY).worst == pytest.approx(math.pi / (2.0 * k) - d, rel=1e-6)


def cascade(k1: float, k2: float, **changes: Any) -> tuple[Loop, Loop]:
    outer = loop(pid(k1), *ALL, moves=(Moved("y2", "inner"),))
    inner = loop(pid(k2), name="inner", measures=("y2",), **changes)
    return outer, inner


def test_a_cascade_has_the_inner_loop_closed() -> None:
    """L = k1 k2 / (s (s + k2)) of a double integrator with the rate loop k2 inside."""
    k1, k2 = 1.0, 3.0
    verdict = judged(DOUBLE, *cascade(k1, k2))
    at = math.sqrt((math.sqrt(k2**4 + 4.0 * k1**2 * k2**2) - k2**2) / 2.0)
    assert verdict.status is Status.PASS, verdict.reason
    assert figure(verdict, PHASE).worst == pytest.approx(math.pi / 2.0 - math.atan(at / k2), rel=1e-6)
    assert verdict.details["margins"]["inside"] == ["inner"]
    assert verdict.details["margins"]["channels"][0]["channel"] == "inner.set_point.y2"


def test_the_actuator_lies_within_the_inner_loop() -> None:
    """L = k1 k2 / (s (T s^2 + s + k2)): gain margin 1 / (k1 T)."""
    k1, k2, T = 1.0, 3.0, 0.2
    verdict = judged(DOUBLE, *cascade(k1, k2), actuators={"u1": Actuator(lag=T)})
    assert figure(verdict, UP).worst == pytest.approx(1.0 / (k1 * T), rel=1e-6)
    assert figure(verdict, UP).at_frequency == pytest.approx(math.sqrt(k2 / T), rel=1e-6)


def test_a_loop_beside_is_closed_where_with_says_so() -> None:
    """The same inner loop added to what the outer one moves: L = k1 / (s (s + k2))."""
    k1, k2 = 2.0, 3.0
    beside = loop(pid(k2), name="damper", measures=("y2",))
    verdict = judged(DOUBLE, loop(pid(k1), *ALL, within=("damper",)), beside)
    at = math.sqrt((math.sqrt(k2**4 + 4.0 * k1**2) - k2**2) / 2.0)
    assert figure(verdict, PHASE).worst == pytest.approx(math.pi / 2.0 - math.atan(at / k2), rel=1e-6)
    alone = judged(DOUBLE, loop(pid(k1), *ALL), beside)
    assert alone.status is not Status.PASS


@pytest.mark.parametrize("where", ["loop", "input", "output"])
def test_a_dead_time_inside_the_inner_loop_is_undecided(where: str) -> None:
    delays = {"loop": Delays(), "input": Delays({"u1": 0.1}), "output": Delays({}, {"y2": 0.1})}[where]
    verdict = judged(DOUBLE, *cascade(1.0, 3.0, delay=0.1 if where == "loop" else 0.0), delays=delays)
    assert verdict.status is Status.UNDECIDED
    assert "lies inside loop inner, which is closed" in verdict.reason
    assert not verdict.figures


def test_a_dead_time_of_the_outer_loop_alone_is_exact() -> None:
    k1, k2, d = 1.0, 3.0, 0.2
    verdict = judged(DOUBLE, *cascade(k1, k2), delays=Delays({}, {"y1": d}))
    at = math.sqrt((math.sqrt(k2**4 + 4.0 * k1**2 * k2**2) - k2**2) / 2.0)
    assert figure(verdict, PHASE).worst == pytest.approx(math.pi / 2.0 - math.atan(at / k2) - at * d, rel=1e-6)


def test_different_dead_times_on_two_paths_are_undecided() -> None:
    two = loop(gain([[1.0, 1.0]]), *ALL, measures=("y1", "y2"))
    verdict = judged(DOUBLE, two, delays=Delays({}, {"y1": 0.2}))
    assert verdict.status is Status.UNDECIDED
    assert "different dead times" in verdict.reason
    same = judged(DOUBLE, two, delays=Delays({}, {"y1": 0.2, "y2": 0.2}))
    assert same.status is Status.PASS, same.reason


def test_a_hold_is_exact() -> None:
    """L = K / (z - 1) of an integrator behind a hold: margins by hand."""
    k, h = 2.0, 0.4
    K = k * h
    verdict = judged(INTEGRATOR, loop(gain(k, h), *ALL))
    assert verdict.status is Status.PASS, verdict.reason
    assert figure(verdict, UP).worst == pytest.approx(2.0 / K, rel=1e-6)
    assert figure(verdict, UP).at_frequency == pytest.approx(math.pi / h, rel=1e-6)
    assert figure(verdict, PHASE).worst == pytest.approx(math.pi / 2.0 - math.asin(K / 2.0), rel=1e-6)
    assert figure(verdict, PHASE).at_frequency == pytest.approx(2.0 / h * math.asin(K / 2.0), rel=1e-6)


@pytest.mark.parametrize("m", [0.1, 0.25, 0.5, 0.8, 1.0])
@pytest.mark.parametrize("where", ["loop", "input", "output"])
def test_a_fraction_of_a_sample_is_exact(m: float, where: str) -> None:
    """L = K ((1 - m) z + m) / (z (z - 1)): stable while K m < 1 and K (1 - 2 m) < 2, by the Jury conditions."""
    k, h = 1.0, 0.4
    K, late = k * h, m * h
    delays = {"loop": Delays(), "input": Delays({"u1": late}), "output": Delays({}, {"y1": late})}[where]
    verdict = judged(INTEGRATOR, loop(gain(k, h), *ALL, delay=late if where == "loop" else 0.0), delays=delays)
    limit = min(1.0 / m, 2.0 / (1.0 - 2.0 * m) if m < 0.5 else math.inf)
    assert figure(verdict, UP).worst == pytest.approx(limit / K, rel=1e-6)


def bisected(good: Callable[[float], bool], low: float, high: float) -> float:
    """Where `good` ends, between a good and a bad value."""
    while high - low > 1e-10 * high:
        middle = 0.5 * (low + high)
        low, high = (middle, high) if good(middle) else (low, middle)
    return low


def test_the_delay_margin_of_a_sampled_loop_is_where_its_poles_leave_the_circle() -> None:
    """z^3 - z^2 + K (1 - m) z + K m with a delay of 1 + m samples."""
    k, h = 2.0, 0.4
    verdict = judged(INTEGRATOR, loop(gain(k, h), *ALL))
    m = bisected(lambda m: bool(np.abs(np.roots([1.0, -1.0, k * h * (1.0 - m), k * h * m])).max() < 1.0), 0.0, 1.0)
    assert 0.05 < m < 0.95
    found, phase = figure(verdict, DELAY), figure(verdict, PHASE)
    assert found.worst == pytest.approx(h * (1.0 + m), rel=1e-6)
    assert abs(found.worst - phase.worst / phase.at_frequency) > 0.01 * h


def test_a_sampled_cascade_of_two_rates_is_lifted_to_the_slower() -> None:
    """Inner rate loop every h, dead beat on the rate; outer every 2 h: by hand in the slow samples.

    v+ = v + h k2 (r - v) with k2 h = 1: v = r after one step of h. Over 2 h: x+ = x + (h / 2)(v + r) + h r, v+ = r.
    """
    h = 0.1
    outer = loop(gain(1.0, 2.0 * h), *ALL, moves=(Moved("y2", "inner"),))
    inner = loop(gain(1.0 / h, h), name="inner", measures=("y2",))
    verdict = judged(DOUBLE, outer, inner)
    assert verdict.status is Status.PASS, verdict.reason
    A, B = np.array([[1.0, h / 2.0], [0.0, 0.0]]), np.array([[1.5 * h], [1.0]])

    def stable(k: float) -> bool:
        return bool(np.abs(np.linalg.eigvals(A - k * B @ np.array([[1.0, 0.0]]))).max() < 1.0)

    assert figure(verdict, UP).worst == pytest.approx(bisected(stable, 1.0, 100.0), rel=1e-6)


def test_rates_without_a_whole_relation_are_undecided() -> None:
    outer = loop(gain(1.0, 0.15), *ALL, moves=(Moved("y2", "inner"),))
    assert judged(DOUBLE, outer, loop(gain(1.0, 0.1), name="inner", measures=("y2",))).status is Status.UNDECIDED
    faster = loop(gain(1.0, 0.05), *ALL, moves=(Moved("y2", "inner"),))
    assert judged(DOUBLE, faster, loop(gain(1.0, 0.1), name="inner", measures=("y2",))).status is Status.UNDECIDED
    continuous = loop(pid(1.0), *ALL, moves=(Moved("y2", "inner"),))
    verdict = judged(DOUBLE, continuous, loop(gain(1.0, 0.1), name="inner", measures=("y2",)))
    assert verdict.status is Status.UNDECIDED
    assert "continuous loop around the sampled loop inner" in verdict.reason
    assert "give it a `sample` that fits, or leave inner out of its `with`" in verdict.reason


def test_a_difference_equation_is_closed_at_its_own_steps_and_at_multiples() -> None:
    """x+ = x + h u: L = k n h / (z - 1) with one sample every n steps."""
    h, k = 0.1, 2.0
    plant = linear_plant([[1.0]], [[h]], [[1.0]], step=h)
    for n in (1, 3):
        verdict = judged(plant, loop(gain(k, n * h), *ALL))
        assert verdict.status is Status.PASS, verdict.reason
        assert figure(verdict, UP).worst == pytest.approx(2.0 / (k * n * h), rel=1e-6)
    assert judged(plant, loop(gain(k, 0.15), *ALL)).status is Status.UNDECIDED
    verdict = judged(plant, loop(pid(k), *ALL))
    assert verdict.status is Status.UNDECIDED
    assert "continuous" in verdict.reason


def test_the_delay_margin_of_a_difference_equation_counts_whole_steps() -> None:
    """z^(d + 1) - z^d + K: stable for d = 0, 1, 2, ... as long as its roots are inside."""
    h, k = 0.1, 4.0
    plant = linear_plant([[1.0]], [[h]], [[1.0]], step=h)
    verdict = judged(plant, loop(gain(k, h), least("delay_margin", 0.1)))
    steps = 0
    while np.abs(np.roots([1.0, -1.0, *[0.0] * steps, k * h])).max() < 1.0:
        steps += 1
    assert figure(verdict, DELAY).worst == pytest.approx((steps - 1) * h)
    assert verdict.status is (Status.PASS if (steps - 1) * h >= 0.1 else Status.FAIL)


A10 = 10.0
ROTATING = linear_plant([[0.0, A10], [-A10, 0.0]], np.eye(2), [[1.0, A10], [-A10, 1.0]])
PAIR: dict[str, Any] = {"measures": ("y1", "y2"), "moves": (Moved("u1"), Moved("u2"))}


@pytest.mark.parametrize("broken", ["plant_input", "plant_output"])
def test_a_rotating_body_is_robust_loop_at_a_time_and_fragile_all_at_once(broken: str) -> None:
    """S. Skogestad, I. Postlethwaite, Multivariable Feedback Control, 3.7.1 (value from memory); forms derived."""
    limits = (*ALL, least("disk_margin", 0.09), most("sensitivity_peak", 11.0))
    verdict = judged(ROTATING, loop(gain(np.eye(2)), *limits, **PAIR, break_at=broken))
    assert verdict.status is Status.PASS, verdict.reason
    for name in verdict.details["margins"]["moves" if broken == "plant_input" else "measures"]:
        assert figure(verdict, UP, name).worst == math.inf
        assert figure(verdict, PHASE, name).worst == pytest.approx(math.pi / 2.0, rel=1e-6)
    alpha = 2.0 / (A10 + math.sqrt(1.0 + A10**2))
    assert figure(verdict, "disk margin").worst == pytest.approx(alpha, rel=1e-5)
    assert figure(verdict, "sensitivity peak").worst == pytest.approx(math.sqrt(1.0 + A10**2), rel=1e-5)
    disk = verdict.details["margins"]["all_channels"]["disk"]
    assert disk["input"]["value"] == pytest.approx(alpha, rel=1e-5)
    assert disk["output"]["value"] == pytest.approx(alpha, rel=1e-5)
    assert disk["both"]["value"] < alpha
    assert any("in every channel at once" in note for note in verdict.notes)


def test_of_several_channels_with_a_dead_time_only_what_holds_for_all_is_known() -> None:
    limits = (*ALL, Limit("damping", 0.1, 10.0), Limit("crossover", 0.1, 10.0))
    verdict = judged(ROTATING, loop(gain(np.eye(2)), *limits, **PAIR, delay=0.001))
    assert verdict.status is Status.UNDECIDED
    words = "gain margin, phase margin, delay margin and crossover could not be found: for one channel alone, the dead "
    assert f"{words}time of the others would lie inside a closed loop" in verdict.reason
    assert verdict.reason.count("for one channel alone") == 1
    assert "damping could not be found: the poles of several channels" in verdict.reason
    known = judged(ROTATING, loop(gain(np.eye(2)), most("sensitivity_peak", 20.0), **PAIR, delay=0.001))
    assert known.status is Status.PASS, known.reason
    late = judged(ROTATING, loop(gain(np.eye(2)), most("sensitivity_peak", 20.0), **PAIR, delay=0.5))
    assert late.status is Status.FAIL
    assert "unstable" in late.reason


@pytest.mark.parametrize(
    ("low", "high", "status"),
    [(math.inf, math.inf, Status.PASS), (0.7, math.inf, Status.PASS), (0.3, math.inf, Status.UNDECIDED),
     (0.6, 0.7, Status.PASS), (0.4, 0.6, Status.UNDECIDED), (0.3, 0.4, Status.FAIL)],
)  # fmt: skip
def test_bounds_of_a_disk_margin_may_be_infinite(low: float, high: float, status: Status) -> None:
    found = between(Bounded(low, high, 1.0), 0.5)
    assert status_of(found, 0.5, Sense.LOWER) is status


def test_two_sampled_channels_have_delay_margins_of_their_own() -> None:
    """Two integrators that do not see each other: as each alone."""
    h = 0.4
    plant = linear_plant(np.zeros((2, 2)), np.eye(2), np.eye(2))
    verdict = judged(plant, loop(gain(np.diag([2.5, 1.0]), h), least("delay_margin", 0.25), **PAIR))
    assert verdict.status is Status.PASS, verdict.reason
    assert figure(verdict, DELAY, "u1").worst == pytest.approx(h, rel=1e-6)
    # twice what is asked for is tried: the slower channel bears all of it
    bearing = [note for note in verdict.notes if "at least what is told" in note]
    assert [note for note in bearing if "of u2" in note] == bearing != []


HEADING = linear_plant([[-1.0, 0.0], [1.0, 0.0]], [[1.0], [0.0]], [[1.0, 0.0]])  # x2 integrates x1, nobody sees it


def test_a_pole_that_the_loop_does_not_move_fails_unless_it_is_left() -> None:
    verdict = judged(HEADING, loop(pid(1.0), *ALL))
    assert verdict.status is Status.FAIL
    assert "does not move the pole 0 of x2" in verdict.reason
    left = judged(HEADING, loop(pid(1.0), *ALL, leaves=("x2",)))
    assert left.status is Status.PASS, left.reason
    (pole,) = left.details["margins"]["unmoved_poles"]
    assert pole["excused"] is True
    assert pole["states"] == {"x2": 1.0}
    assert judged(HEADING, loop(pid(1.0), *ALL, leaves=("x1",))).status is Status.FAIL


def test_a_pole_of_the_size_of_rounding_is_told_as_zero() -> None:
    plant = linear_plant([[-1.0, 0.0], [1.0, 7.85e-17]], [[1.0], [0.0]], [[1.0, 0.0]])
    assert "does not move the pole 0 of x2" in judged(plant, loop(pid(1.0), *ALL)).reason


def test_a_rule_with_several_limits_says_once_where_they_come_from() -> None:
    rule = RULES["six_db_45_deg"]
    verdict = judged(INTEGRATOR, loop(pid(0.5), *rule.bound(PLACE)))
    told = "gain margin and phase margin by the rule six_db_45_deg (common practice, no published source): "
    assert [note for note in verdict.notes if rule.name in note] == [told + rule.caution]


def test_an_unstable_pole_that_no_input_reaches_fails() -> None:
    plant = linear_plant([[-1.0, 0.0], [0.0, 0.5]], [[1.0], [0.0]], [[1.0, 1.0]])
    verdict = judged(plant, loop(pid(1.0), *ALL))
    assert verdict.status is Status.FAIL
    assert "does not move the pole 0.5 of x2" in verdict.reason


def test_hidden_directions_are_found_in_any_coordinates() -> None:
    rng = np.random.default_rng(5)
    T = np.linalg.qr(rng.normal(size=(3, 3)))[0]
    A = T @ np.diag([-1.0, 0.5, -3.0]) @ T.T
    plant = linear_plant(A, T @ np.array([[1.0], [0.0], [1.0]]), np.array([[1.0, 1.0, 0.0]]) @ T.T)
    verdict = judged(plant, loop(pid(1.0), *ALL))
    values = sorted(pole["real"] for pole in verdict.details["margins"]["unmoved_poles"])
    assert values == pytest.approx([-3.0, 0.5], abs=1e-9)
    assert verdict.status is Status.FAIL
    assert "0.5" in verdict.reason


def test_a_controller_that_cancels_an_unstable_pole_fails() -> None:
    """(s - 1) / (s + 1) before 1 / (s - 1): L looks like 1 / (s + 1), the plant runs away."""
    plant = linear_plant([[1.0]], [[1.0]], [[1.0]])
    A, B, C, D = companion([1.0, -1.0], [1.0, 1.0])
    controller = type(pid(1.0))(A, B, C, D, text="num, den")
    verdict = judged(plant, loop(controller, *ALL))
    assert verdict.status is Status.FAIL
    assert "does not move the pole 1" in verdict.reason


def test_a_slow_integrator_beside_fast_poles_is_moved() -> None:
    """An integral part with a time constant of days beside poles of microseconds is part of the loop."""
    plant = linear_plant([[-1e6]], [[1e6]], [[1.0]])
    verdict = judged(plant, loop(pid(0.5, 1e-5), least("gain_margin", 2.0)))
    assert verdict.status is Status.PASS, verdict.reason
    assert not verdict.details["margins"]["unmoved_poles"]


def test_an_ill_posed_loop_is_undecided() -> None:
    plant = linear_plant([[-1.0]], [[1.0]], [[1.0]], [[-2.0]])
    assert judged(plant, loop(pid(0.5), *ALL)).status is Status.UNDECIDED


def test_a_crossover_in_its_range_passes_and_outside_fails() -> None:
    k = 2.0
    assert judged(INTEGRATOR, loop(pid(k), Limit("crossover", 1.98, 2.02))).status is Status.PASS
    assert judged(INTEGRATOR, loop(pid(k), Limit("crossover", 2.02, 4.0))).status is Status.FAIL
    assert judged(INTEGRATOR, loop(pid(k), Limit("crossover", 1.0, 1.98))).status is Status.FAIL
    lag = linear_plant([[-1.0]], [[1.0]], [[0.5]])
    silent = judged(lag, loop(pid(1.0), Limit("crossover", 1.0, 4.0)))
    assert silent.status is Status.FAIL
    assert "never crosses one" in silent.reason


def test_damping_is_that_of_the_poles_the_loop_moves() -> None:
    """s^2 + kd s + kp: damping kd / (2 sqrt(kp))."""
    kp, kd = 4.0, 1.2
    true = kd / (2.0 * math.sqrt(kp))
    two: dict[str, Any] = {"measures": ("y1", "y2")}
    assert judged(DOUBLE, loop(gain([[kp, kd]]), least("damping", 0.99 * true), **two)).status is Status.PASS
    broken = judged(DOUBLE, loop(gain([[kp, kd]]), least("damping", 1.01 * true), **two))
    assert broken.status is Status.FAIL
    assert figure(broken, "closed-loop damping ratio").worst == pytest.approx(true, rel=1e-6)
    assert figure(broken, "closed-loop damping ratio").at_frequency == pytest.approx(math.sqrt(kp), rel=1e-6)


def test_damping_of_a_sampled_loop_is_that_of_the_equivalent_continuous_poles() -> None:
    k, h = 2.0, 0.4
    verdict = judged(INTEGRATOR, loop(gain(k, h), least("damping", 0.1), delay=h))
    z = np.roots([1.0, -1.0, k * h])[0]
    s = np.log(z) / h
    assert figure(verdict, "closed-loop damping ratio").worst == pytest.approx(-s.real / abs(s), rel=1e-6)


def test_poles_on_each_other_leave_stability_and_damping_decided() -> None:
    """1 / (s (s + 2)) closes to (s + 1)^2, alone and in two channels at once; sampled to z^2."""
    one = linear_plant([[0.0, 1.0], [0.0, -2.0]], [[0.0], [1.0]], [[1.0, 0.0]])
    A, B, C = (np.kron(np.eye(2), each) for each in ([[0.0, 1.0], [0.0, -2.0]], [[0.0], [1.0]], [[1.0, 0.0]]))
    limits = (least("damping", 0.99), most("overshoot", 0.01))
    assert judged(one, loop(pid(1.0), *limits)).status is Status.PASS
    two = judged(linear_plant(A, B, C), loop(gain(np.eye(2)), *limits, **PAIR))
    assert two.status is Status.PASS, two.reason
    late = judged(one, loop(pid(1.0), least("phase_margin", 1.0), delay=0.05))
    at = math.sqrt(math.sqrt(5.0) - 2.0)
    assert late.status is Status.PASS, late.reason
    assert figure(late, PHASE).worst == pytest.approx(math.pi / 2.0 - math.atan(at / 2.0) - 0.05 * at, rel=1e-6)
    h = 0.5
    dead = judged(INTEGRATOR, loop(gain(1.0 / h, h), least("damping", 0.99), least("gain_margin", 1.9)))
    assert dead.status is Status.PASS, dead.reason


def test_damping_with_a_dead_time_is_that_of_the_roots_of_the_exact_equation() -> None:
    """s exp(s d) + k = 0."""
    k, d = 1.0, 0.8
    s = complex(-0.3, 1.2)
    for _ in range(50):
        s -= (s + k * np.exp(-s * d)) / (1.0 - k * d * np.exp(-s * d))
    true = -s.real / abs(s)
    near = judged(INTEGRATOR, loop(pid(k), least("damping", 0.99 * true), delay=d))
    assert figure(near, "closed-loop damping ratio").worst <= true * (1.0 + 1e-9)
    assert any("infinitely many" in note for note in near.notes)
    assert judged(INTEGRATOR, loop(pid(k), least("damping", 1.01 * true), delay=d)).status is Status.FAIL


def test_the_pole_is_told_in_degrees_and_signals_that_the_model_lacks_by_name() -> None:
    verdict = judged(INTEGRATOR, loop(pid(1.0), least("phase_margin", math.radians(91.0), DEG)))
    assert "at least 91 deg is asked for" in verdict.reason
