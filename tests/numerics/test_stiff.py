"""The Rosenbrock method: its order, its damping, and that a bad column harms nobody else."""

from __future__ import annotations

import math

import numpy as np
import pytest

from linverify.numerics.integrate import Batch, Demand, advance
from linverify.numerics.stiff import Rosenbrock


def method(n: int) -> Rosenbrock:
    return Rosenbrock(np.full(n, 1e-3), np.full((n, 1), np.inf))


def swing(s: float, x: np.ndarray) -> np.ndarray:
    """Non-autonomous and nonlinear, with x = (exp(sin s), cos s) as solution."""
    c = np.cos(s)
    return np.stack([x[0] * x[1], -np.sin(s) + 3.0 * (x[0] * np.exp(-np.sin(s)) - 1.0) + (x[1] - c)])


def exact_swing(s: float) -> np.ndarray:
    return np.array([[math.exp(math.sin(s))], [math.cos(s)]])


def order(errors: list[float]) -> float:
    return math.log2(errors[-2] / errors[-1])


def ends(step: float) -> np.ndarray:
    solver, x, s = method(2), exact_swing(0.0), 0.0
    for _ in range(round(1.0 / step)):
        x = solver.attempt(swing, s, x, swing(s, x), step).end
        s += step
    return x


def test_end_of_a_step_is_of_order_four_with_difference_jacobians() -> None:
    errors = [float(np.abs(ends(step) - exact_swing(1.0)).max()) for step in (1 / 8, 1 / 16, 1 / 32)]
    assert order(errors) == pytest.approx(4.0, abs=0.35)


def test_error_estimate_and_values_within_a_step_are_of_order_three() -> None:
    solver, x = method(2), exact_swing(0.5)
    estimates, inside = [], []
    for step in (0.2, 0.1, 0.05):
        attempt = solver.attempt(swing, 0.5, x, swing(0.5, x), step)
        estimates.append(float(np.abs(attempt.error).max()))
        shares = np.array([0.3, 0.6, 0.8])
        exact = np.stack([exact_swing(0.5 + share * step) for share in shares], axis=1)
        inside.append(float(np.abs(attempt.between(shares) - exact).max()))
    assert order(estimates) == pytest.approx(solver.order, abs=0.5)  # local errors: an order above the global one
    assert order(inside) == pytest.approx(4.0, abs=0.5)
    assert attempt.between(np.array([1.0]))[:, 0] == pytest.approx(attempt.end, abs=1e-15)


def test_a_pole_a_million_times_faster_than_the_step_is_damped_at_once() -> None:
    x = np.array([[1.0]])

    def rates(s: float, y: np.ndarray) -> np.ndarray:
        return -1e6 * (y - np.cos(s))

    attempt = method(1).attempt(rates, 0.0, x + 0.5, rates(0.0, x + 0.5), 1.0)
    assert float(attempt.end[0, 0]) == pytest.approx(math.cos(1.0), abs=1e-3)


def test_stiff_relaxation_follows_its_slow_course_in_few_steps() -> None:
    def rates(s: float, y: np.ndarray) -> np.ndarray:
        return np.stack([-1e4 * (y[0] - np.cos(s)) - np.sin(s), y[0] - y[1]])

    batch = Batch(
        np.array([[1.0], [0.0]]), np.ones(1, bool), 0.5, lambda c: None, lambda s, x: np.zeros(1, bool), _stuck
    )
    out = advance(method(2), rates, batch, 2.0, 8, Demand(np.full((2, 1), 1e-7), 0.5, 1e-12, 1000))
    s = 2.0 * np.arange(9) / 8
    assert np.abs(out[0, :, 0] - np.cos(s)).max() < 1e-5
    assert np.abs(out[1, :, 0] - 0.5 * (np.cos(s) + np.sin(s) - np.exp(-s))).max() < 1e-5
    assert batch.tried < 200  # an explicit pair needs 6000 for stability alone


def _stuck(columns: np.ndarray, when: float, slow: bool) -> None:
    raise AssertionError(f"stuck at {when}")


def test_a_column_without_numbers_leaves_its_neighbours_alone() -> None:
    def rates(s: float, y: np.ndarray) -> np.ndarray:
        return np.where(y > 5, np.nan, -100.0 * (y - 1.0))

    both = np.array([[2.0, 9.0]])
    attempt = method(1).attempt(rates, 0.0, both, rates(0.0, both), 0.1)
    alone = method(1).attempt(rates, 0.0, both[:, :1], rates(0.0, both[:, :1]), 0.1)
    assert np.isnan(attempt.end[0, 1])
    assert attempt.end[0, 0] == pytest.approx(alone.end[0, 0], rel=1e-14)


def test_slopes_are_kept_while_a_step_is_tried_again_and_no_longer() -> None:
    calls: list[int] = []

    def rates(s: float, y: np.ndarray) -> np.ndarray:
        calls.append(y.shape[1])
        return -50.0 * y**3

    rosenbrock, x = method(1), np.array([[2.0, 1.0]])
    first = rates(0.0, x)
    ends = [rosenbrock.attempt(rates, 0.0, x, first, step).end for step in (0.4, 0.1)]
    again = method(1).attempt(rates, 0.0, x, rates(0.0, x), 0.1).end
    assert ends[1].tobytes() == again.tobytes()
    assert len(calls) == 1 + 8 + 6 + 1 + 8
    other = 0.5 * x
    moved = rosenbrock.attempt(rates, 0.0, other, rates(0.0, other), 0.1).end
    assert moved.tobytes() == method(1).attempt(rates, 0.0, other, rates(0.0, other), 0.1).end.tobytes()


def test_differences_stay_inside_the_domain() -> None:
    seen: list[float] = []

    def rates(s: float, y: np.ndarray) -> np.ndarray:
        seen.append(float(y.max()))
        return np.zeros_like(y)

    x = np.array([[1.0]])
    Rosenbrock(np.array([1e-3]), np.array([[1.0]])).attempt(rates, 0.0, x, np.zeros((1, 1)), 0.1)
    assert max(seen) <= 1.0
