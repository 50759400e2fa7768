"""The explicit pair: its order, what it does within a step, and how a batch shares steps without sharing errors."""

from __future__ import annotations

import math

import numpy as np
import pytest

from linverify.numerics.integrate import Batch, Demand, DormandPrince, advance

PAIR = DormandPrince()


def spiral(s: float, x: np.ndarray) -> np.ndarray:
    """A rotation whose speed grows with time and radius; closed form through the angle s + s^2/2."""
    turn = 1.0 + s
    return np.stack([-turn * x[1], turn * x[0]])


def exact_spiral(s: float) -> np.ndarray:
    angle = s + 0.5 * s * s
    return np.array([[math.cos(angle)], [math.sin(angle)]])


def ends(step: float, length: float = 1.0) -> np.ndarray:
    x, s = exact_spiral(0.0), 0.0
    for _ in range(round(length / step)):
        x = PAIR.attempt(spiral, s, x, spiral(s, x), step).end
        s += step
    return x


def order(errors: list[float]) -> float:
    return math.log2(errors[-2] / errors[-1])


def test_end_of_a_step_is_of_order_five() -> None:
    errors = [float(np.abs(ends(step) - exact_spiral(1.0)).max()) for step in (1 / 8, 1 / 16, 1 / 32)]
    assert order(errors) == pytest.approx(5.0, abs=0.25)


def test_values_within_a_step_are_of_order_four() -> None:
    errors = []
    for step in (0.2, 0.1, 0.05):
        attempt = PAIR.attempt(spiral, 0.0, exact_spiral(0.0), spiral(0.0, exact_spiral(0.0)), step)
        shares = np.array([0.25, 0.5, 0.75])
        exact = np.stack([exact_spiral(share * step) for share in shares], axis=1)
        errors.append(float(np.abs(attempt.between(shares) - exact).max()))
    assert order(errors) == pytest.approx(5.0, abs=0.3)  # one step: local error, an order higher
    assert attempt.between(np.array([1.0]))[:, 0] == pytest.approx(attempt.end, abs=1e-15)


def test_error_estimate_is_of_order_five_in_the_step() -> None:
    x = exact_spiral(0.0)
    errors = [
        float(np.abs(PAIR.attempt(spiral, 0.0, x, spiral(0.0, x), step).error).max()) for step in (0.2, 0.1, 0.05)
    ]
    assert order(errors) == pytest.approx(PAIR.order, abs=0.3)


def batch_of(x: np.ndarray, step: float = 1.0) -> Batch:
    def rest(columns: np.ndarray) -> None:
        batch.x = np.where(columns, 0.0, batch.x)

    batch = Batch(x, np.ones(x.shape[1], dtype=bool), step, rest, lambda s, y: np.zeros(y.shape[1], bool), _silent)
    return batch


def _silent(columns: np.ndarray, when: float, slow: bool) -> None:
    pass


def test_one_active_column_keeps_its_accuracy_among_quiescent_ones() -> None:
    def rates(s: float, x: np.ndarray) -> np.ndarray:
        return np.stack([x[1], -25.0 * np.sin(x[0])])

    demand = Demand(np.full((2, 1), 1e-7), 1.0, 1e-12, 1000)

    def active_error(width: int) -> float:
        x = np.zeros((2, width))
        x[0, 0] = 1.0
        fine = batch_of(x[:, :1].copy(), 0.002)
        advance(PAIR, rates, fine, 1.0, 4, Demand(np.full((2, 1), 1e-13), 0.002, 1e-12, 100_000))
        coarse = batch_of(x.copy())
        advance(PAIR, rates, coarse, 1.0, 4, demand)
        return float(np.abs(coarse.x[:, 0] - fine.x[:, 0]).max())

    alone, crowded = active_error(1), active_error(512)
    assert crowded == pytest.approx(alone, rel=1e-6)  # a mean-square norm would let it grow 20 times
    assert alone < 1e-5


def test_step_that_meets_nan_is_rejected_not_accepted() -> None:
    def rates(s: float, x: np.ndarray) -> np.ndarray:
        with np.errstate(invalid="ignore"):
            return np.where(x > 0, -np.sqrt(x), np.nan)

    batch = batch_of(np.array([[1.0]]), step=1.9)
    out = advance(PAIR, rates, batch, 1.9, 4, Demand(np.array([[1e-9]]), 1.9, 1e-9, 1000))
    expected = (1.0 - 0.5 * 1.9 * np.arange(5) / 4) ** 2
    assert out[0, :, 0] == pytest.approx(expected, abs=1e-7)


def test_a_column_that_cannot_go_on_stops_alone() -> None:
    told: list[tuple[list[bool], float, bool]] = []

    def rates(s: float, x: np.ndarray) -> np.ndarray:
        with np.errstate(invalid="ignore"):
            return np.where(x > 0, -np.sqrt(x), np.where(x == 0, 0.0, np.nan))

    batch = batch_of(np.array([[1.0, 9.0]]))
    batch.stuck = lambda columns, when, slow: told.append((columns.tolist(), when, slow))
    out = advance(PAIR, rates, batch, 4.0, 8, Demand(np.array([[1e-8]]), 4.0, 1e-11, 1000))
    assert [columns for columns, _, _ in told] == [[True, False]]
    assert told[0][1] == pytest.approx(2.0, abs=1e-4)  # sqrt(x) runs out where x = (1 - t/2)^2 does
    assert batch.stopped[0] == told[0][1]
    assert np.isnan(out[0, 5:, 0]).all()
    assert out[0, :, 1] == pytest.approx((3.0 - 0.25 * np.arange(9)) ** 2, abs=1e-6)


def test_too_many_steps_stop_only_the_columns_that_need_them() -> None:
    told: list[tuple[list[bool], bool]] = []
    fast = np.array([[1.0, 3000.0]])

    def rates(s: float, x: np.ndarray) -> np.ndarray:
        return np.cos(fast * s) * np.ones_like(x)

    batch = batch_of(np.zeros((1, 2)))
    batch.stuck = lambda columns, when, slow: told.append((columns.tolist(), slow))
    out = advance(PAIR, rates, batch, 1.0, 4, Demand(np.array([[1e-9]]), 1.0, 1e-12, 200))
    assert told == [([False, True], True)]
    assert out[0, :, 0] == pytest.approx(np.sin(np.arange(5) / 4), abs=1e-7)


def test_nodes_are_met_whatever_the_steps_are() -> None:
    for tolerance in (1e-3, 1e-6, 1e-9):
        batch = batch_of(exact_spiral(0.0))
        demand = Demand(np.full((2, 1), tolerance), 1.0, 1e-12, 1000)
        out = advance(PAIR, spiral, batch, 1.0, 7, demand)
        expected = np.concatenate([exact_spiral(j / 7) for j in range(8)], axis=1)
        assert np.abs(out[:, :, 0] - expected).max() < 100 * tolerance


def test_columns_that_the_caller_wants_no_further_are_kept_up_to_there() -> None:
    batch = batch_of(np.array([[0.0, 0.0]]), step=0.1)
    speeds = np.array([[1.0, 4.0]])
    batch.leaving = lambda s, x: x[0] > 1.0
    out = advance(
        PAIR, lambda s, x: speeds * np.ones_like(x), batch, 0.9, 9, Demand(np.array([[1e-6]]), 0.1, 1e-12, 100)
    )
    assert out[0, :, 0] == pytest.approx(0.1 * np.arange(10))
    stopped = round(batch.stopped[1] / 0.1)
    assert batch.last[0, 1] == pytest.approx(0.4 * stopped)
    assert np.isnan(out[0, stopped + 1 :, 1]).all()
    assert np.isfinite(out[0, : stopped + 1, 1]).all()
