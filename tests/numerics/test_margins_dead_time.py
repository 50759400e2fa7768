"""Loops with a dead time: stability by counting, margins on the exact response."""

from __future__ import annotations

import cmath
import math

import numpy as np
import pytest
from open_loops import product, ratio, static

from linverify.core.outcome import Outcome
from linverify.numerics.margins import margins


@pytest.mark.parametrize("gain, delay", [(1.0, 1.0), (2.0, 0.7), (0.1, 15.0), (30.0, 0.052)])
def test_integrator_with_dead_time(gain: float, delay: float) -> None:
    # closed form: k exp(-s tau) / s is stable for k tau < pi / 2; crossover at k, phase left pi / 2 - k tau
    found = margins(ratio([gain], [1, 0], delay))
    used = gain * delay
    assert found.stable
    assert found.gain_up.value == pytest.approx(0.5 * math.pi / used, rel=1e-9)
    assert found.phase.value == pytest.approx(0.5 * math.pi - used, rel=1e-9)
    assert found.delay.value == pytest.approx(0.5 * math.pi / gain - delay, rel=1e-9)
    more = margins(ratio([gain], [1, 0], delay + 1.001 * found.delay.value))
    assert not more.stable
    assert [abs(each.imag) for each in more.unstable] == pytest.approx([gain, gain], rel=2e-3)
    assert margins(ratio([gain], [1, 0], delay + 0.999 * found.delay.value)).stable


def test_stability_is_lost_and_won_again_as_dead_time_grows() -> None:
    # g / (s^2 + 2 zeta s + 1), g < 1, has two crossovers; each critical dead time follows from its phase
    zeta, g = 0.05, 0.3
    inner = math.sqrt(g**2 - 4 * zeta**2 * (1 - zeta**2))
    low, high = (math.sqrt(1 - 2 * zeta**2 + side * inner) for side in (-1, 1))
    critical = []
    for w, sign in ((low, -1), (high, 1)):
        left = (math.pi - math.atan2(2 * zeta * w, 1 - w * w)) % (2 * math.pi)
        critical += [((left + 2 * math.pi * k) / w, sign) for k in range(9)]
    number, before, told = 0, 0.0, []
    for time, sign in sorted(critical)[:9]:
        found = margins(ratio([g], [1, 2 * zeta, 1], 0.5 * (before + time)))
        assert found.outcome is Outcome.DONE
        assert found.stable is (number == 0)
        assert len(found.unstable) == 2 * number
        told.append(found.stable)
        if found.stable:
            assert found.delay.value == pytest.approx(0.5 * (time - before), rel=1e-9)
        number, before = number + sign, time
    assert told[:5] == [True, False, True, False, True]


def test_unstable_roots_solve_the_exact_equation() -> None:
    delay = 2.0
    found = margins(ratio([3], product([1, 1], [1, 1], [1, 1]), delay))
    assert len(found.unstable) == 2
    for s in found.unstable:
        assert abs(1 + 3 / (s + 1) ** 3 * cmath.exp(-s * delay)) < 1e-11
    for s in found.poles:
        s = complex(s)
        assert abs((s + 1) ** 3 + 3 * cmath.exp(-s * delay)) < 1e-9 * abs(s + 1) ** 3


@pytest.mark.parametrize("delay", [0.1, 0.5, 0.65])
def test_peaks_against_a_dense_grid(delay: float) -> None:
    found = margins(ratio([3], product([1, 1], [1, 1], [1, 1]), delay))
    w = np.linspace(0.9, 1.5, 400_001)  # wide enough for all three
    L = 3 / (1j * w + 1) ** 3 * np.exp(-1j * w * delay)
    assert found.sensitivity.value == pytest.approx(np.abs(1 / (1 + L)).max(), rel=1e-7)
    assert found.complementary.value == pytest.approx(np.abs(L / (1 + L)).max(), rel=1e-7)
    assert found.disk.value == pytest.approx(1 / np.abs(0.5 * (1 - L) / (1 + L)).max(), rel=1e-7)


def test_feedthrough_sets_limits_at_infinite_frequency() -> None:
    # |L| falls from 1 at zero to 1/2 and the dead time turns it through every phase: what is approached counts
    found = margins(ratio([-0.5, 0.25], [1, 1], 1.0))
    assert found.stable
    assert found.gain_up.value == pytest.approx(2.0, rel=1e-12)
    assert math.isinf(found.gain_up.frequency)
    assert found.sensitivity.value == pytest.approx(2.0, rel=1e-7)
    assert math.isinf(found.delay.value)


def test_gain_of_one_at_infinite_frequency_is_not_decided() -> None:
    for loop in (ratio([1, 0.5], [1, 1], 0.1), ratio([-2, 1], [1, 1], 0.1), static(1.0, 0.1)):
        found = margins(loop)
        assert found.outcome is Outcome.DELAY_NOT_DECIDED
        assert not found.stable


def test_static_gain_with_dead_time() -> None:
    found = margins(static(0.5, 3.0))
    assert found.stable
    assert found.gain_up.value == pytest.approx(2.0)
    assert found.complementary.value == pytest.approx(1.0, rel=1e-7)


def test_critical_dead_time_is_neither_stable_nor_unstable() -> None:
    assert margins(ratio([1], [1, 0], 0.5 * math.pi)).outcome is Outcome.ON_THE_EDGE


def test_wrong_sign_with_dead_time() -> None:
    found = margins(ratio([-1], [1, 0], 1.0))
    assert not found.stable
    assert found.opposite_stable
    assert not margins(ratio([-1], [1, 0], 2.0)).opposite_stable


def test_unstable_root_within_rounding_of_a_pole_of_the_loop_is_found() -> None:
    # a pole at 10 that a dead time of 5 leaves alone: exp(-50) of the loop's gain is left there
    found = margins(ratio([1], product([1, -10], [1, 1]), 5.0))
    assert not found.stable
    assert found.unstable == (pytest.approx(10.0),)


@pytest.mark.parametrize("delay", [3.0, 30.0, 100.0])
def test_as_many_roots_are_found_as_are_counted(delay: float) -> None:
    found = margins(ratio([5], product([1, 1], [1, 0.1, 1]), delay))
    assert len(found.unstable) >= 2
    assert found.why == ""
    assert sum(s.real > 0 for s in found.poles) == len(found.unstable)
    for s in found.unstable:
        assert abs((s + 1) * (s * s + 0.1 * s + 1) + 5 * cmath.exp(-s * delay)) < 1e-9
