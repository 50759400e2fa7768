"""Overshoot and settling against closed forms, with modes that like to hide."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.linalg import expm
from scipy.optimize import brentq
from scipy.signal import tf2ss

from linverify.core.model import Array
from linverify.numerics.step_figures import step_figures
from linverify.numerics.transfer import Transfer


def ratio(num: object, den: object, step: float | None = None) -> Transfer:
    A, B, C, D = tf2ss(np.asarray(num, dtype=float), np.asarray(den, dtype=float))
    return Transfer(A, B, C, D, 0.0, step)


@pytest.mark.parametrize("damping", [0.6, 0.2, 1e-2, 1e-4, 1e-6])
def test_second_order(damping: float) -> None:
    # closed form: the first swing passes by exp(-pi zeta / sqrt(1 - zeta^2)) at pi / (w sqrt(1 - zeta^2))
    found = step_figures(ratio([1], [1, 2 * damping, 1]))
    turn = math.sqrt(1 - damping**2)
    assert found.overshoot.value == pytest.approx(math.exp(-math.pi * damping / turn), rel=1e-9)
    assert found.peak_time == pytest.approx(math.pi / turn, rel=1e-6)
    # within half a swing before the envelope exp(-zeta t) / turn enters the band
    envelope = math.log(50 / turn) / damping
    assert envelope - math.pi / turn <= found.settling.value <= envelope
    assert _outside(damping, found.settling.value - 1e-4) == pytest.approx(0.02, abs=1e-4)


def _outside(damping: float, t: float) -> float:
    turn = math.sqrt(1 - damping**2)
    return abs(math.exp(-damping * t) * (math.cos(turn * t) + damping / turn * math.sin(turn * t)))


@pytest.mark.parametrize("order", [1, 2, 3, 4, 5])
def test_equal_poles(order: int) -> None:
    # closed form: 1 - exp(-t) (1 + t + ... + t^(n-1) / (n-1)!)
    def left(t: float) -> float:
        return math.exp(-t) * sum(t**k / math.factorial(k) for k in range(order)) - 0.02

    found = step_figures(ratio([1], np.poly([-1.0] * order)))
    assert found.settling.value == pytest.approx(brentq(left, 0.1, 40.0), rel=1e-6)
    assert abs(found.settling.value - brentq(left, 0.1, 40.0)) <= found.settling.error
    assert found.overshoot.value == 0.0
    assert math.isnan(found.peak_time)


def test_exact_chain_of_equal_poles() -> None:
    loop = Transfer(
        np.array([[-1.0, 1.0], [0.0, -1.0]]), np.array([[0.0], [1.0]]), np.array([[1.0, 0.0]]), np.zeros((1, 1))
    )
    root = brentq(lambda t: (1 + t) * math.exp(-t) - 0.02, 1, 20)
    assert step_figures(loop).settling.value == pytest.approx(root, rel=1e-7)


def test_slow_tail_behind_a_fast_mode() -> None:
    # 95 % at once, 5 % with a time constant of 1000: settled when the tail is, log(0.05 / 0.02) later
    tail = Transfer(np.diag([-1.0, -1e-3]), np.array([[1.0], [1e-3]]), np.array([[0.95, 0.05]]), np.zeros((1, 1)))
    found = step_figures(tail)
    assert found.settling.value == pytest.approx(1000 * math.log(2.5), rel=1e-6)
    assert step_figures(tail, 0.06).settling.value < 10


def test_fast_ringing_on_a_slow_rise() -> None:
    # a resonance at 1000 rad, damping 1e-4, whose swings leave the band a hundred thousand turns later
    A = np.array([[-1.0, 0, 0], [0, -0.1, 1000.0], [0, -1000.0, -0.1]])
    loop = Transfer(A, np.array([[1.0], [0.0], [100.0]]), np.array([[1.0, 1.0, 0.0]]), np.zeros((1, 1)))
    found = step_figures(loop)
    final = 1.0 + 100.0 * 1000.0 / (0.01 + 1e6)
    assert found.final == pytest.approx(final, rel=1e-12)
    envelope = math.log(100.0 * 1000.0 / 1e6 / final / 0.02) / 0.1
    assert envelope - 0.01 <= found.settling.value <= envelope + 0.01


def test_feedthrough_jumps_at_once() -> None:
    # (2 s + 1) / (s + 1): starts at 2 and falls to 1
    found = step_figures(ratio([2, 1], [1, 1]))
    assert found.overshoot.value == pytest.approx(1.0)
    assert found.peak_time == 0.0
    assert found.settling.value == pytest.approx(math.log(50), rel=1e-9)


def test_undershoot_is_outside_but_no_overshoot() -> None:
    found = step_figures(ratio([-1, 1], [1, 2, 1]))
    assert found.overshoot.value == 0.0
    assert found.settling.value == pytest.approx(brentq(lambda t: (1 + 2 * t) * math.exp(-t) - 0.02, 2, 20), rel=1e-6)


def test_final_value_of_zero_has_no_figures() -> None:
    found = step_figures(ratio([1, 0], [1, 1, 1]))
    assert found.final == 0.0
    assert math.isnan(found.overshoot.value)
    assert math.isnan(found.settling.value)


def test_settling_at_a_swing_that_just_leaves_the_band_says_how_unsure_it_is() -> None:
    damping = 0.4
    swing = math.exp(-2 * math.pi * damping / math.sqrt(1 - damping**2))
    found = step_figures(ratio([1], [1, 2 * damping, 1]), swing * (1 + 1e-9))
    assert found.settling.error > 1.0


def test_unstable_is_refused() -> None:
    with pytest.raises(ValueError, match="not stable"):
        step_figures(ratio([1], [1, -1]))
    with pytest.raises(ValueError, match="not stable"):
        step_figures(ratio([1], [1, -1.1], 0.1))


def test_sampled_figures() -> None:
    # y[k] = 1 - 0.9^k: inside 2 % from the first k with 0.9^k <= 0.02
    found = step_figures(ratio([0.1], [1, -0.9], 0.1))
    assert found.settling.value == pytest.approx(0.1 * math.ceil(math.log(0.02) / math.log(0.9)))
    assert found.overshoot.value == 0.0
    dead = step_figures(ratio([1.0], [1, 0, 0], 0.1))
    assert (dead.settling.value, dead.overshoot.value) == (pytest.approx(0.2), 0.0)


@pytest.mark.parametrize("seed", range(12))
def test_against_a_dense_march(seed: int) -> None:
    rng = np.random.default_rng(seed)
    n = int(rng.integers(2, 7))
    A: Array = rng.normal(size=(n, n))
    A -= (np.linalg.eigvals(A).real.max() + 10 ** rng.uniform(-1.5, 0)) * np.eye(n)
    loop = Transfer(A, rng.normal(size=(n, 1)), rng.normal(size=(1, n)), rng.normal(size=(1, 1)))
    found = step_figures(loop, 0.05)
    slowest, fastest = -np.linalg.eigvals(A).real.max(), np.abs(np.linalg.eigvals(A)).max()
    pace = 0.005 / fastest
    x, P = np.linalg.solve(A, loop.B[:, 0]), expm(A * pace)
    count = int(25 / slowest / pace)
    values = np.empty(count)
    for k in range(count):
        values[k] = loop.C[0] @ x / found.final
        x = P @ x
    assert found.overshoot.value == pytest.approx(max(0.0, values.max()), rel=1e-4, abs=1e-6)
    outside = np.flatnonzero(np.abs(values) > 0.05)
    assert found.settling.value == pytest.approx(outside[-1] * pace, abs=2 * pace + found.settling.error)
