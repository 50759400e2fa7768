"""Overshoot and settling of a step of the set point, against closed forms and a plain simulation."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from looping import companion, figure, gain, judged, least, linear_plant, loop, most, pid
from scipy.linalg import expm

from linverify.core.loop import Limit, Moved
from linverify.core.verdict import Figure, Status

INTEGRATOR = linear_plant([[0.0]], [[1.0]], [[1.0]])
WANTED = (most("overshoot", 1.0), most("settling", 100.0, within=0.05))
OVER, SETTLES = "overshoot", "settling to 5 %"


def test_a_first_order_loop_settles_without_overshoot() -> None:
    k = 1.7
    verdict = judged(INTEGRATOR, loop(pid(k), *WANTED))
    assert verdict.status is Status.PASS, verdict.reason
    assert figure(verdict, OVER).worst == 0.0
    assert figure(verdict, SETTLES).worst == pytest.approx(-math.log(0.05) / k, rel=1e-5)


@pytest.mark.parametrize("damping", [0.2, 0.5, 0.8])
def test_the_overshoot_of_a_second_order_loop_is_the_closed_form(damping: float) -> None:
    """w^2 / (s (s + 2 z w)): overshoot exp(-pi z / sqrt(1 - z^2))."""
    w = 3.0
    plant = linear_plant(*companion([w**2], [1.0, 2.0 * damping * w, 0.0]))
    true = math.exp(-math.pi * damping / math.sqrt(1.0 - damping**2))
    verdict = judged(plant, loop(pid(1.0), most("overshoot", 1.01 * true)))
    assert verdict.status is Status.PASS, verdict.reason
    assert figure(verdict, OVER).worst == pytest.approx(true, rel=1e-6)
    assert judged(plant, loop(pid(1.0), most("overshoot", 0.99 * true))).status is Status.FAIL


def test_settling_one_per_cent_inside_passes_and_one_per_cent_outside_fails() -> None:
    true = -math.log(0.02) / 1.7
    assert judged(INTEGRATOR, loop(pid(1.7), most("settling", 1.01 * true))).status is Status.PASS
    assert judged(INTEGRATOR, loop(pid(1.7), most("settling", 0.99 * true))).status is Status.FAIL


def plain(A: Any, B: Any, C: Any, k: float, h: float, late: float, end: float, parts: int = 200) -> tuple[float, float]:
    """Overshoot and settling to 5 % of u = k (r - y), held for h, after `late`; plain simulation of the plant."""
    n, dt = len(A), h / parts
    whole = np.zeros((n + 1, n + 1))
    whole[:n] = np.hstack([A, B]) * dt
    step = expm(whole)
    x, sent, y = np.zeros(n), [], []
    shift = round(late / dt)
    for j in range(round(end / dt)):
        y.append(float((C @ x)[0]))
        if j % parts == 0:
            sent.append(k * (1.0 - y[-1]))
        at = (j - shift) // parts
        u = sent[at] if at >= 0 else 0.0
        x = (step @ np.append(x, u))[:n]
    y_all = np.array(y)
    final = k * float((C @ np.linalg.solve(-A, B))[0, 0])
    final = final / (1.0 + final)
    outside = np.flatnonzero(np.abs(y_all - final) > 0.05 * final)
    return y_all.max() / final - 1.0, (outside[-1] + 1) * dt


@pytest.mark.parametrize("late", [0.0, 0.1, 0.25])
def test_what_a_plant_does_between_samples_counts(late: float) -> None:
    A, B, C, _ = companion([9.0], [1.0, 0.6, 9.0])
    k, h = 0.15, 0.5
    verdict = judged(linear_plant(A, B, C), loop(gain(k, h), *WANTED, delay=late))
    assert verdict.status is Status.PASS, verdict.reason
    over, settles = plain(A, B, C, k, h, late, 40.0)
    found = figure(verdict, OVER)
    assert found.worst == pytest.approx(over, abs=max(2e-3 * over, found.error))
    late_by = figure(verdict, SETTLES)
    assert late_by.worst == pytest.approx(settles, abs=late_by.error + h / 200)


@pytest.mark.parametrize("h", [1e-3, 1e-4])
def test_fast_sampling_is_as_no_sampling(h: float) -> None:
    """w^2 / (s (s + 2 z w)) again, the hold being short: half a sample of dead time is all that it adds."""
    w, damping = 3.0, 0.5
    plant = linear_plant(*companion([w**2], [1.0, 2.0 * damping * w, 0.0]))
    sampled, late = judged(plant, loop(gain(1.0, h), *WANTED)), judged(plant, loop(pid(1.0), *WANTED, delay=h / 2.0))
    for what in (OVER, SETTLES):
        found, near = figure(sampled, what), figure(late, what)
        assert found.worst == pytest.approx(near.worst, abs=found.error + near.error + h)
        assert found.error < 0.03


def test_a_signal_that_goes_back_after_a_step_is_not_judged() -> None:
    """A rate: its set point can not be kept, the position's can."""
    both = linear_plant([[0.0, 1.0], [0.0, 0.0]], [[0.0], [1.0]], np.eye(2))
    for controller in (gain([[1.0, 1.5]]), gain([[1.0, 1.5]], 0.1)):
        verdict = judged(both, loop(controller, *WANTED, measures=("y1", "y2")))
        assert verdict.status is Status.PASS, verdict.reason
        assert figure(verdict, OVER, "y1").worst < 0.1
        assert any("y2 goes back to zero" in note for note in verdict.notes)


def test_a_continuous_loop_with_a_dead_time_is_stepped_with_its_dead_time() -> None:
    """x' = k (1 - x(t - d)): for d < t < 2 d a line, then parabolas; followed by plain small steps."""
    k, d, dt = 1.0, 0.6, 2e-5
    x, now = np.zeros(round(20.0 / dt)), round(d / dt)
    for j in range(1, len(x)):
        x[j] = x[j - 1] + dt * k * (0.0 if j <= now else 1.0 - x[j - 1 - now])
        if j <= now:
            x[j] = 0.0
    verdict = judged(INTEGRATOR, loop(pid(k), *WANTED, delay=d))
    assert verdict.status is Status.PASS, verdict.reason
    assert isinstance(figure(verdict, OVER), Figure)
    # the dead time lies before the plant: the error acts on it a dead time later
    late = np.zeros_like(x)
    u = np.zeros_like(x)
    for j in range(1, len(x)):
        u[j - 1] = 1.0 - late[j - 1]
        late[j] = late[j - 1] + dt * k * (u[j - 1 - now] if j - 1 >= now else 0.0)
    assert figure(verdict, OVER).worst == pytest.approx(late.max() - 1.0, abs=2e-4)
    outside = np.flatnonzero(np.abs(late - 1.0) > 0.05)
    assert figure(verdict, SETTLES).worst == pytest.approx((outside[-1] + 1) * dt, abs=2e-3)


def test_each_channel_is_stepped_by_itself() -> None:
    plant = linear_plant(np.zeros((2, 2)), np.eye(2), np.eye(2))
    two = loop(gain(np.diag([1.0, 2.0])), *WANTED, measures=("y1", "y2"), moves=(Moved("u1"), Moved("u2")))
    verdict = judged(plant, two)
    assert figure(verdict, SETTLES, "y1").worst == pytest.approx(-math.log(0.05), rel=1e-5)
    assert figure(verdict, SETTLES, "y2").worst == pytest.approx(-math.log(0.05) / 2.0, rel=1e-5)


def test_a_loop_without_a_final_value_is_undecided() -> None:
    """s / (s + 1)^2 goes back to zero after a step: neither overshoot nor settling mean anything."""
    plant = linear_plant(*companion([1.0, 0.0], [1.0, 2.0, 1.5]))
    verdict = judged(plant, loop(pid(1.0), Limit("overshoot", high=0.2), least("gain_margin", 1.0)))
    assert verdict.status is Status.UNDECIDED
    assert "overshoot could not be found" in verdict.reason
