"""modes of a local model with loops closed inside: the poles of the closed loop, sampled ones at the samples."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from modal_cases import PLACE, case, judged, least, line, plant
from scipy.linalg import expm

from linverify.core.delivered import LocalAsk
from linverify.core.loop import Controller, Limit, Loop, Moved
from linverify.core.verdict import Status

A, B, C = np.array([[0.0, 1.0], [0.0, -0.2]]), np.array([[0.0], [1.0]]), np.array([[1.0, 0.0]])


def gain(k: float, step: float | None = None) -> Controller:
    return Controller(np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)), np.array([[k]]), step)


def loop(controller: Controller, **words: Any) -> Loop:
    return Loop("level", controller, ("x0",), (Moved("u0"),), **words)


def found(one: Loop, *lines: Any) -> Any:
    return judged(plant(A, B, C), *lines, loops={"level": one}, local=LocalAsk(closed=("level",)))


def poles(verdict: Any) -> list[complex]:
    """Those that are not at z = 0, where a hold has its own."""
    return [complex(row["real"], row["imag"]) for row in verdict.details["modes"] if "real" in row]


def test_a_position_held_by_a_gain() -> None:
    """s^2 + 0.2 s + k."""
    good = found(loop(gain(4.0)), line(Limit("natural_frequency", 1.99, 2.01, PLACE)), line(stable=True))
    assert good.status is Status.PASS, good.reason
    assert poles(good) == [pytest.approx(complex(-0.1, math.sqrt(4.0 - 0.01)), rel=1e-9)]
    bad = found(loop(gain(4.0)), line(least("damping", 0.0505)))
    assert bad.status is Status.FAIL
    assert found(loop(gain(-4.0)), line(stable=True)).status is Status.FAIL


def test_errors_of_entries_come_through_the_closed_loop() -> None:
    verdict = found(loop(gain(4.0)), line(stable=True))
    (row,) = verdict.details["modes"]
    assert 1e-13 < row["error"] < 1e-9


def test_a_sampled_loop_is_judged_over_its_sample() -> None:
    step, k = 0.3, 2.0
    verdict = found(loop(gain(k, step)), line(stable=True))
    whole = np.zeros((3, 3))
    whole[:2, :2], whole[:2, 2:] = A, B
    flow = expm(whole * step)
    exact = np.log(np.linalg.eigvals(flow[:2, :2] - flow[:2, 2:] @ np.array([[k, 0.0]]))) / step
    assert poles(verdict) == [pytest.approx(complex(exact.real[0], abs(exact.imag[0])), rel=1e-8)]
    assert any("sampled loops are closed inside" in note for note in verdict.notes)
    # a gain that a continuous loop would bear: this one is too slow for it
    assert found(loop(gain(20.0)), line(stable=True)).status is Status.PASS
    assert found(loop(gain(20.0, step)), line(stable=True)).status is Status.FAIL


def test_modes_of_the_chain_for_a_dead_time_are_not_judged() -> None:
    late = loop(gain(0.5), delay=0.05)
    slow = found(late, line(least("damping", 0.05), high=5.0))
    assert slow.status is Status.PASS, slow.reason
    whole = found(late, line(least("damping", 0.05)))
    assert whole.status is Status.UNDECIDED
    assert "stands for the dead time" in whole.reason
    (pole,) = [pole for pole in poles(slow) if abs(pole) < 5.0]
    s = pole
    for _ in range(20):  # Newton on s^2 + 0.2 s + 0.5 exp(-0.05 s)
        s -= (s * s + 0.2 * s + 0.5 * np.exp(-0.05 * s)) / (2.0 * s + 0.2 - 0.025 * np.exp(-0.05 * s))
    assert pole == pytest.approx(s, rel=1e-6)


def test_without_with_the_loop_stays_open() -> None:
    one = plant(A, B, C)
    verdict = judged(one, line(stable=True), loops={"level": loop(gain(4.0))})
    assert verdict.status is Status.FAIL
    assert "lies at the origin" in verdict.reason
    assert case(one).local.closed == ()
