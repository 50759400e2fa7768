"""Brute force against closed forms and printed figures, before it is held against anything else."""

from __future__ import annotations

import math

import numpy as np
import pytest
import scipy.signal
from margins.loops import all_of, drawn
from margins.oracle import encirclements, truth
from margins.response import Loop

PI = np.array([12.7, 1.0]) * 1.136 / 12.7


def of(num: list[float], den: list[float], delay: float = 0.0) -> Loop:
    A, B, C, D = scipy.signal.tf2ss(num, den)
    return Loop(A, B[:, 0], C[0], float(D[0, 0]), delay=delay)


def product(*factors: list[float]) -> list[float]:
    out = np.ones(1)
    for factor in factors:
        out = np.polymul(out, factor)
    return [float(each) for each in out]


# S. Skogestad, I. Postlethwaite, Multivariable Feedback Control, ch. 2: from memory; figures to more digits are derived
INVERSE = of([3 * c for c in product([-2.0, 1.0], list(PI))], product([1.0, 0.0], [10.0, 1.0], [5.0, 1.0]))
UNSTABLE = of([5.0 / 1.5 * c for c in (1.5, 1.0)], product([1.0, 0.0], [1.0, -1.0], product([0.02, 1.0], [0.02, 1.0])))
CUBE = of([3.0], [1.0, 3.0, 3.0, 1.0])  # K. J. Astrom, R. M. Murray, Feedback Systems: from memory


def test_published_loops() -> None:
    slow = truth(INVERSE)
    assert slow.stable
    assert slow.gain_up == pytest.approx(1.6355, abs=5e-5)
    assert math.degrees(slow.phase) == pytest.approx(19.442, abs=5e-4)
    assert (slow.sensitivity, slow.complementary) == pytest.approx((3.9116, 3.3423), abs=5e-5)
    assert slow.delay == pytest.approx(1.4356, abs=5e-5)
    held = truth(UNSTABLE)
    assert held.stable
    assert (held.gain_up, held.gain_down) == pytest.approx((18.6796, 0.205657), rel=3e-6)
    assert (held.sensitivity, held.complementary, held.delay) == pytest.approx((1.19421, 1.37726, 0.212125), rel=5e-6)


def test_closed_forms() -> None:
    found = truth(CUBE)
    assert found.gain_up == pytest.approx(8.0 / 3.0, rel=1e-14)
    assert found.sensitivity == pytest.approx(2.2, rel=1e-12)
    assert found.where["sensitivity"] == pytest.approx(math.sqrt(1.75), rel=1e-6)
    assert found.crossovers == pytest.approx([math.sqrt(3.0 ** (2.0 / 3.0) - 1.0)], rel=1e-14)
    late = truth(of([1.0], [1.0, 0.0], delay=1.5))
    assert (late.gain_up, late.phase, late.delay) == pytest.approx(
        (math.pi / 3.0, math.pi / 2 - 1.5, math.pi / 2 - 1.5), rel=1e-12
    )


@pytest.mark.parametrize(("delay", "unstable"), [(1.5, 0), (1.6, 2), (8.0, 4), (16.0, 6)])
def test_an_integrator_with_a_dead_time_loses_a_pair_each_turn(delay: float, unstable: int) -> None:
    """At pi/2 and every full turn of the phase at |L| = 1 more."""
    assert truth(of([1.0], [1.0, 0.0], delay=delay)).unstable == unstable


def test_feedthrough_counts_at_infinite_frequency() -> None:
    """0.5 (s + 4) / (s + 1) with a dead time: |L| falls to 1/2, whose turns come as near as they like to -1/2."""
    found = truth(of([0.5, 0.1], [1.0, 1.0], delay=0.01))
    assert found.gain_up == pytest.approx(2.0, rel=1e-12)
    assert found.sensitivity == pytest.approx(2.0, rel=1e-9)
    assert found.complementary == pytest.approx(1.0, rel=1e-9)
    assert 1.0 / found.disk == pytest.approx(1.5, rel=1e-9)
    assert truth(of([-2.0, 1.0], [1.0, 3.0])).delay == 0.0  # |D| above 1: none is left


def test_a_narrow_resonance_is_not_missed() -> None:
    """A mode damped to 1e-9 whose peak alone crosses 1."""
    light = of([2e-9 * 3.0, 0.0], [1.0, 2e-9, 1.0])  # L = 3 at resonance, on the real axis
    found = truth(light)
    assert found.crossovers == pytest.approx([1.0, 1.0], abs=1e-8)
    assert found.crossovers.size == 2
    assert found.complementary == pytest.approx(0.75, rel=1e-7)


def test_a_sampled_integrator() -> None:
    """k z / (z - 1)^... : with L = k/(z - 1) the gain margin is 2/k at half the sampling frequency, in closed form."""
    one = Loop(np.ones((1, 1)), np.ones(1), np.array([0.5]), 0.0, step=1e-5)
    found = truth(one)
    assert found.stable
    assert found.gain_up == pytest.approx(4.0, rel=1e-14)
    assert found.crossovers == pytest.approx([2.0 * math.asin(0.25) / 1e-5], rel=1e-13)
    assert not truth(Loop(np.ones((1, 1)), np.ones(1), np.array([2.1]), 0.0, step=1e-5)).stable


def test_two_ways_to_stability_agree() -> None:
    """Refined eigenvalues against a count of encirclements, on loops without a dead time."""
    some = [each.loop for each in all_of(range(120)) if each.loop.step is None and not each.loop.delay]
    bounded = [loop for loop in some if abs(loop.D) < 1.0]
    assert len(bounded) > 40
    assert [truth(loop).unstable for loop in bounded] == [encirclements(loop) for loop in bounded]


def test_the_draw_has_what_it_promises() -> None:
    every = all_of(range(150))
    tags = {tag for each in every for tag in each.tags}
    assert tags == {
        "light", "unstable poles", "integrator", "integrators", "feedthrough", "feedthrough near 1", "sampled",
        "sampled fast", "dead time", "mixed", "badly scaled",
    }  # fmt: skip
    assert {each.loop.n for each in every} == set(range(1, 13))
    again = drawn(7).loop
    assert np.array_equal(again.A, every[7].loop.A)
    assert again.delay == every[7].loop.delay
