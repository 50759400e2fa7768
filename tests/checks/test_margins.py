"""margins: each word of `require` passes 1 % inside and fails 1 % outside of the true value; stability comes first."""

from __future__ import annotations

import math

import numpy as np
import pytest
from looping import DB, DEG, companion, figure, gain, judged, least, linear_plant, loop, most, pid

from linverify.core.verdict import Status

THIRD = linear_plant(*companion([3.0], [1.0, 3.0, 3.0, 1.0]))  # 3 / (s + 1)^3, closed forms by hand
GAIN, PHASE_AT = 8.0 / 3.0, math.sqrt(3.0)
CROSSOVER = math.sqrt(3.0 ** (2.0 / 3.0) - 1.0)
PHASE = math.pi - 3.0 * math.atan(CROSSOVER)
MS, MS_AT = 2.2, math.sqrt(1.75)


def test_margins_of_a_third_order_lag_are_the_closed_forms() -> None:
    limits = (
        least("gain_margin", 2.0, DB), least("phase_margin", 0.5, DEG), least("delay_margin", 0.5),
        most("sensitivity_peak", 3.0, DB),
    )  # fmt: skip
    verdict = judged(THIRD, loop(pid(1.0), *limits))
    assert verdict.status is Status.PASS, verdict.reason
    up = figure(verdict, "gain margin (upwards)")
    assert up.worst == pytest.approx(20.0 * math.log10(GAIN), rel=1e-6)
    assert up.at_frequency == pytest.approx(PHASE_AT, rel=1e-6)
    assert figure(verdict, "gain margin (downwards)").worst == math.inf
    assert figure(verdict, "phase margin").worst == pytest.approx(math.degrees(PHASE), rel=1e-6)
    assert figure(verdict, "delay margin").worst == pytest.approx(PHASE / CROSSOVER, rel=1e-6)
    assert figure(verdict, "sensitivity peak").worst == pytest.approx(20.0 * math.log10(MS), rel=1e-6)
    assert figure(verdict, "sensitivity peak").at_frequency == pytest.approx(MS_AT, rel=1e-3)


TRUE = [("gain_margin", GAIN, "low"), ("phase_margin", PHASE, "low"), ("delay_margin", PHASE / CROSSOVER, "low"),
        ("sensitivity_peak", MS, "high")]  # fmt: skip


@pytest.mark.parametrize(("word", "true", "side"), TRUE)
def test_a_limit_one_per_cent_inside_passes_and_one_per_cent_outside_fails(word: str, true: float, side: str) -> None:
    make, inside = (least, 0.99) if side == "low" else (most, 1.01)
    assert judged(THIRD, loop(pid(1.0), make(word, true * inside))).status is Status.PASS
    broken = judged(THIRD, loop(pid(1.0), make(word, true / inside)))
    assert broken.status is Status.FAIL
    assert "asked for" in broken.reason


def test_an_unstable_loop_has_no_margins() -> None:
    verdict = judged(THIRD, loop(pid(3.0), least("gain_margin", 2.0)))
    assert verdict.status is Status.FAIL
    assert not verdict.figures
    s = np.roots([1.0, 3.0, 3.0, 10.0])
    worst = s[np.argmax(s.real)]
    assert f"{worst.real:.4g} +- {abs(worst.imag):.4g}j per s" in verdict.reason
    assert f"time to double {math.log(2.0) / worst.real:.4g} s" in verdict.reason


def test_the_wrong_sign_is_told() -> None:
    verdict = judged(THIRD, loop(pid(-1.5), least("gain_margin", 2.0)))
    assert verdict.status is Status.FAIL
    assert "closed the wrong way round: unstable; with the opposite sign it would be stable" in verdict.reason


def test_a_loop_that_moves_nothing_is_undecided() -> None:
    verdict = judged(THIRD, loop(gain(0.0), least("gain_margin", 2.0)))
    assert verdict.status is Status.UNDECIDED
    assert "moves nothing" in verdict.reason
