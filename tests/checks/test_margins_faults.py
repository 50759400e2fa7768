"""Faults planted in loops that keep their limits: each is stopped, with the figure that a closed form gives."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from looping import companion, figure, gain, judged, least, linear_plant, loop, pid

from linverify.core.loop import Controller, Limit, Loop, Moved
from linverify.core.verdict import Status, Verdict

THIRD = linear_plant(*companion([3.0], [1.0, 3.0, 3.0, 1.0]))
INTEGRATOR = linear_plant([[0.0]], [[1.0]], [[1.0]])
DOUBLE = linear_plant([[0.0, 1.0], [0.0, 0.0]], [[0.0], [1.0]], np.eye(2))
UP, PHASE, DELAY, DAMPING = "gain margin (upwards)", "phase margin", "delay margin", "closed-loop damping ratio"


def broken(verdict: Verdict, what: str) -> float:
    assert verdict.status is Status.FAIL, verdict.reason
    one = figure(verdict, what)
    assert one.status is Status.FAIL
    assert what in verdict.reason
    return one.worst


def test_gain_doubled() -> None:
    """3 / (s + 1)^3: gain margin 8/3 as it should be, 4/3 with the gain doubled."""
    limit = least("gain_margin", 2.0)
    assert judged(THIRD, loop(pid(1.0), limit)).status is Status.PASS
    assert broken(judged(THIRD, loop(pid(2.0), limit)), UP) == pytest.approx(4.0 / 3.0, rel=1e-6)


def test_gain_halved_where_the_loop_needs_it() -> None:
    """2 / (s - 1): the gain may fall to a half; with the gain halved it is on the edge, at 0.6 of it 5/6 is left."""
    plant, limit = linear_plant([[1.0]], [[1.0]], [[1.0]]), least("gain_margin", 1.9)
    assert judged(plant, loop(pid(2.0), limit)).status is Status.PASS
    found = broken(judged(plant, loop(pid(1.2), limit)), "gain margin (downwards)")
    assert found == pytest.approx(1.2, rel=1e-6)
    assert judged(plant, loop(pid(1.0), limit)).status is not Status.PASS
    assert judged(plant, loop(pid(0.9), limit)).status is Status.FAIL


def test_delay_added() -> None:
    """k / s: phase margin 90 deg less k d."""
    k, d, limit = 1.0, 0.9, least("phase_margin", math.radians(45.0))
    assert judged(INTEGRATOR, loop(pid(k), limit)).status is Status.PASS
    assert broken(judged(INTEGRATOR, loop(pid(k), limit, delay=d)), PHASE) == pytest.approx(
        math.pi / 2 - k * d, rel=1e-6
    )
    unstable = judged(INTEGRATOR, loop(pid(k), limit, delay=1.7))
    assert unstable.status is Status.FAIL
    assert "unstable" in unstable.reason
    assert not unstable.figures


def test_damping_removed() -> None:
    """s^2 + kd s + kp."""
    kp, kd, limit = 4.0, 2.4, least("damping", 0.4)
    two: dict[str, Any] = {"measures": ("y1", "y2")}
    assert judged(DOUBLE, loop(gain([[kp, kd]]), limit, **two)).status is Status.PASS
    found = broken(judged(DOUBLE, loop(gain([[kp, 0.1 * kd]]), limit, **two)), DAMPING)
    assert found == pytest.approx(0.1 * kd / (2.0 * math.sqrt(kp)), rel=1e-6)
    assert judged(DOUBLE, loop(gain([[kp, 0.0]]), limit, **two)).status is not Status.PASS
    assert judged(DOUBLE, loop(gain([[kp, -0.1]]), limit, **two)).status is Status.FAIL


def test_sign_flipped() -> None:
    for plant in (THIRD, INTEGRATOR):
        verdict = judged(plant, loop(pid(-1.0), least("gain_margin", 1.5)))
        assert verdict.status is Status.FAIL
        if plant is INTEGRATOR:
            assert "pole 1 per s, time to double 0.6931 s" in verdict.reason
        assert "with the opposite sign it would be stable" in verdict.reason


def test_an_unstable_loop_is_no_matter_of_its_sign_where_both_are_unstable() -> None:
    verdict = judged(THIRD, loop(pid(9.0), least("gain_margin", 1.5)))
    assert verdict.status is Status.FAIL
    assert "opposite sign" not in verdict.reason


def test_sample_time_doubled() -> None:
    """k h / (z - 1): gain margin 2 / (k h), phase margin 90 deg less asin(k h / 2)."""
    k, h, limits = 4.0, 0.15, (least("gain_margin", 2.0), least("phase_margin", math.radians(60.0)))
    assert judged(INTEGRATOR, loop(gain(k, h), *limits)).status is Status.PASS
    verdict = judged(INTEGRATOR, loop(gain(k, 2.0 * h), *limits))
    assert broken(verdict, UP) == pytest.approx(2.0 / (2.0 * k * h), rel=1e-6)
    assert broken(verdict, PHASE) == pytest.approx(math.pi / 2.0 - math.asin(k * h), rel=1e-6)


def test_a_hold_that_was_forgotten_is_seen() -> None:
    """The same gain without a hold has twice the gain margin of nothing: the phase margins differ by asin(k h / 2)."""
    k, h, limit = 4.0, 0.15, least("phase_margin", math.radians(80.0))
    assert judged(INTEGRATOR, loop(pid(k), limit)).status is Status.PASS
    found = broken(judged(INTEGRATOR, loop(gain(k, h), limit)), PHASE)
    assert found == pytest.approx(math.pi / 2.0 - math.asin(k * h / 2.0), rel=1e-6)


def crossed(k: float, **changes: Any) -> Loop:
    return loop(gain(k * np.eye(2)), least("disk_margin", 0.5), measures=("y1", "y2"), moves=(Moved("u1"), Moved("u2")),
                **changes)  # fmt: skip


def test_coupling_is_seen_by_the_disk_margin_of_all_channels() -> None:
    """A rotating body of rate a: 2 / (a + sqrt(1 + a^2)); at a = 0.5 it passes, at a = 5 it does not."""
    for a, status in ((0.5, Status.PASS), (5.0, Status.FAIL)):
        plant = linear_plant([[0.0, a], [-a, 0.0]], np.eye(2), [[1.0, a], [-a, 1.0]])
        verdict = judged(plant, crossed(1.0))
        assert verdict.status is status, verdict.reason
        assert figure(verdict, "disk margin").worst == pytest.approx(2.0 / (a + math.sqrt(1.0 + a * a)), rel=1e-5)


def test_measurements_swapped() -> None:
    """Two integrators with their measurements exchanged: s^2 = 1."""
    plant = linear_plant(np.zeros((2, 2)), np.eye(2), np.eye(2))
    assert judged(plant, crossed(1.0)).status is Status.PASS
    swapped = Loop("ride", gain([[0.0, 1.0], [1.0, 0.0]]), ("y1", "y2"), (Moved("u1"), Moved("u2")))
    verdict = judged(plant, swapped)
    assert verdict.status is Status.FAIL
    assert "pole 1 per s" in verdict.reason


def test_an_integral_part_too_strong() -> None:
    """kp + ki / s before 1 / s: phase margin atan(w kp / ki) at its crossover."""
    kp, limit = 1.0, least("phase_margin", math.radians(50.0))

    def true(ki: float) -> float:
        at = math.sqrt(0.5 * (kp**2 + math.sqrt(kp**4 + 4.0 * ki**2)))
        return math.atan(at * kp / ki)

    assert judged(INTEGRATOR, loop(pid(kp, 0.2), limit)).status is Status.PASS
    assert broken(judged(INTEGRATOR, loop(pid(kp, 1.5), limit)), PHASE) == pytest.approx(true(1.5), rel=1e-6)


def test_a_controller_in_z_read_as_one_in_s_is_seen() -> None:
    """(2 z - 1.6) / (z - 0.8) taken for a continuous controller has an unstable pole at 0.8."""
    A, B, C, D = companion([2.0, -1.6], [1.0, -0.9])
    right = Controller(A, B, C, D, 0.1, "num, den in z")
    assert judged(INTEGRATOR, loop(right, least("gain_margin", 2.0))).status is Status.PASS
    wrong = Controller(A, B, C, D, None, "num, den in z")
    assert judged(INTEGRATOR, loop(wrong, least("gain_margin", 2.0))).status is not Status.PASS


@pytest.mark.parametrize("limit", [
    Limit("overshoot", high=0.1), Limit("settling", high=3.0), Limit("crossover", 0.5, 2.0), least("disk_margin", 0.5),
])  # fmt: skip
def test_no_limit_is_kept_by_an_unstable_loop(limit: Limit) -> None:
    verdict = judged(INTEGRATOR, loop(pid(-1.0), limit))
    assert verdict.status is Status.FAIL
    assert not verdict.figures
