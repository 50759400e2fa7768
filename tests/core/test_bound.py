"""The border: batches found out by trying, and every wrong answer named with the call that got it."""

from __future__ import annotations

import itertools
import math
import sys
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from linverify import Plant
from linverify.core.bound import RECHECK, BoundPlant
from linverify.core.errors import PlantError

RANDOM = np.random.default_rng(5)
POINTS_X, POINTS_U = RANDOM.uniform(-2, 2, (2, 7)), RANDOM.uniform(-2, 2, (1, 7))
Function = Callable[..., Any]


def bound(dynamics: Function, **more: Any) -> BoundPlant:
    plant = Plant(states={"angle": "rad", "spin": "rad/s"}, inputs={"torque": "N*m"}, dynamics=dynamics, **more)
    return BoundPlant(plant)


def swing(t: float, x: Any, u: Any, p: Any) -> Any:
    return np.stack([x[1], u[0] - 2.0 * np.sin(x[0])])


MATRIX, COLUMN = np.array([[0.0, 1.0], [-2.0, -0.3]]), np.array([[0.0], [1.0]])
BATCHED: dict[str, Function] = {
    "stack": swing,
    "list": lambda t, x, u, p: [x[1], u[0] - np.sin(x[0])],
    "tuple": lambda t, x, u, p: (x[1], u[0] - x[0] * abs(x[0])),
    "matrix": lambda t, x, u, p: MATRIX @ x + COLUMN @ u,
    "where": lambda t, x, u, p: np.array([x[1], np.where(x[0] > 0, -x[0], -2 * x[0]) + u[0]]),
    "float32": lambda t, x, u, p: np.float32([x[1], u[0] - x[0]]),
}


@pytest.mark.parametrize("style", BATCHED)
def test_a_batch_is_recognised_and_equals_single_calls(style: str) -> None:
    plant = bound(BATCHED[style])
    plant.detect(0.0, POINTS_X, POINTS_U)
    assert (plant.batched, plant.why_single) == (True, "")
    together = plant.rates(0.0, POINTS_X, POINTS_U)
    alone = [plant.rates(0.0, POINTS_X[:, j], POINTS_U[:, j]) for j in range(7)]
    np.testing.assert_allclose(together, np.stack(alone, axis=-1), rtol=1e-12, atol=1e-13)


SINGLE: dict[str, tuple[Function, str]] = {
    "math": (lambda t, x, u, p: [x[1], u[0] - math.sin(x[0])], "raised TypeError"),
    "branch": (lambda t, x, u, p: [x[1], u[0] - (x[0] if x[0] > 0 else 2 * x[0])], "raised ValueError"),
    "constant": (lambda t, x, u, p: [x[1], 0.5], "the row of spin is a plain number; write it as 0 * x[0] + number"),
    "vector": (lambda t, x, u, p: MATRIX @ x + COLUMN[:, 0] * u[0], "raised ValueError"),
    "norm": (lambda t, x, u, p: np.stack([x[1], u[0] - np.max(x[0])]), "answers otherwise than"),
    "sum": (lambda t, x, u, p: np.stack([x[1] / np.sum(x * x), u[0]]), "answers otherwise than"),
    "wrong axis": (lambda t, x, u, p: np.stack([x[1], u[0] - x.mean()]), "answers otherwise than"),
}


@pytest.mark.parametrize("style", SINGLE)
def test_what_cannot_batch_is_told_why_and_still_answers(style: str) -> None:
    function, reason = SINGLE[style]
    plant = bound(function)
    plant.detect(0.0, POINTS_X, POINTS_U)
    assert not plant.batched
    assert reason in plant.why_single
    together = plant.rates(0.0, POINTS_X, POINTS_U)
    np.testing.assert_array_equal(together[:, 3], plant.rates(0.0, POINTS_X[:, 3], POINTS_U[:, 3]))


CALL = " when called with t = 0 s, angle = 0.5 rad, spin = -1 rad/s, torque = 2 N*m"
WRONG: dict[str, tuple[Function, str]] = {
    "nan": (lambda t, x, u, p: [x[1], np.nan], "dynamics returned nan for spin" + CALL),
    "inf": (lambda t, x, u, p: [np.inf, x[1]], "dynamics returned inf for angle" + CALL),
    "short": (
        lambda t, x, u, p: [x[1]],
        f"dynamics returned an array of shape (1,){CALL}; expected (2,), one row each for angle, spin",
    ),
    "column": (
        lambda t, x, u, p: np.ones((2, 1)),
        f"dynamics returned an array of shape (2, 1){CALL}; expected (2,), one row each for angle, spin",
    ),
    "integers": (
        lambda t, x, u, p: np.array([1, 2]),
        f"dynamics returned integers{CALL}; expected real floating-point numbers",
    ),
    "complex": (
        lambda t, x, u, p: x + 0j,
        f"dynamics returned complex numbers{CALL}; expected real floating-point numbers",
    ),
    "none": (lambda t, x, u, p: None, f"dynamics returned Python objects{CALL}; expected real floating-point numbers"),
    "ragged": (lambda t, x, u, p: [x, 1.0], f"dynamics returned rows of unlike shape{CALL}"),
}


@pytest.mark.parametrize("style", WRONG)
def test_a_wrong_answer_is_named_with_its_call(style: str) -> None:
    function, text = WRONG[style]
    with pytest.raises(PlantError) as caught:
        bound(function).rates(0.0, np.array([0.5, -1.0]), np.array([2.0]))
    assert str(caught.value).startswith(text)


def test_an_exception_is_named_with_its_call_and_line() -> None:
    def broken(t: float, x: Any, u: Any, p: Any) -> Any:
        raise KeyError("drag")

    with pytest.raises(PlantError) as caught:
        bound(broken).rates(0.0, np.array([0.5, -1.0]), np.array([2.0]))
    text = str(caught.value)
    assert text.startswith("dynamics raised KeyError: 'drag' (test_bound.py, line ")
    assert text.endswith(CALL)


def test_a_plant_that_exits_does_not_end_the_run() -> None:
    def leaves(t: float, x: Any, u: Any, p: Any) -> Any:
        sys.exit(0)

    with pytest.raises(PlantError, match=r"raised SystemExit: 0 \(test_bound.py, line "):
        bound(leaves).rates(0.0, np.array([0.5, -1.0]), np.array([2.0]))


def test_writing_into_the_arguments_is_caught_and_harms_nobody() -> None:
    def careless(t: float, x: Any, u: Any, p: Any) -> Any:
        x[0] = 0.0
        return x

    x = np.array([0.5, -1.0])
    with pytest.raises(PlantError, match="must not write into x or u"):
        bound(careless).rates(0.0, x, np.array([2.0]))
    np.testing.assert_array_equal(x, [0.5, -1.0])


def test_parameters_are_read_only_for_the_plant() -> None:
    def careless(t: float, x: Any, u: Any, p: Any) -> Any:
        p["gain"] = 2.0
        return x

    with pytest.raises(PlantError, match="does not support item assignment"):
        bound(careless, parameters={"gain": 1.0}).rates(0.0, np.zeros(2), np.zeros(1))


def test_memory_and_randomness_are_found() -> None:
    counter = itertools.count()
    for hidden in (lambda: next(counter), np.random.default_rng(0).normal):
        plant = bound(lambda t, x, u, p, hidden=hidden: [x[1], x[0] + 1e-3 * hidden()])
        with pytest.raises(PlantError, match="dynamics is not deterministic: called twice with t = 0 s, angle = "):
            plant.detect(0.0, POINTS_X, POINTS_U)


def test_failing_columns_come_back_as_nan_and_the_first_error_is_kept() -> None:
    plant = bound(lambda t, x, u, p: np.stack([x[1], np.sqrt(x[0])]))
    x = np.array([[1.0, -4.0, 9.0], [0.0, 0.0, 0.0]])
    for _ in range(2):  # column by column at first, in one batch after detection
        answer = plant.rates_or_nan(0.0, x, np.zeros(1))
        np.testing.assert_array_equal(answer, [[0.0, np.nan, 0.0], [1.0, np.nan, 3.0]])
        assert "returned nan for spin when called with t = 0 s, angle = -4 rad" in str(plant.last_error)
        plant.detect(0.0, np.abs(POINTS_X), POINTS_U)
        plant.last_error = None
    assert plant.batched


def test_a_column_that_raises_does_not_take_its_companions_along() -> None:
    def picky(t: float, x: Any, u: Any, p: Any) -> Any:
        if np.any(x[0] > 1.5):
            raise ValueError("off the table")
        return np.stack([x[1], -x[0]])

    plant = bound(picky)
    plant.detect(0.0, np.clip(POINTS_X, -1, 1), POINTS_U)
    assert plant.batched
    answer = plant.rates_or_nan(0.0, np.array([[1.0, 1.7], [0.0, 0.0]]), np.zeros(1))
    np.testing.assert_array_equal(answer, [[0.0, np.nan], [-1.0, np.nan]])
    with pytest.raises(PlantError, match="off the table"):
        plant.rates(0.0, np.array([[1.0, 1.7], [0.0, 0.0]]), np.zeros(1))


def test_a_batch_that_goes_wrong_later_is_noticed() -> None:
    def treacherous(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([x[1], np.where(t > 0, np.max(x[0]), x[0])])

    plant = bound(treacherous)
    plant.detect(0.0, POINTS_X, POINTS_U)
    assert plant.batched
    with pytest.raises(PlantError, match="differently alone and among 7 columns"):
        for _ in range(7 * RECHECK):
            plant.rates(1.0, POINTS_X, POINTS_U)


def test_rounding_near_an_equilibrium_is_no_disagreement() -> None:
    def cancelling(t: float, x: Any, u: Any, p: Any) -> Any:
        noise = 1e-17 if x.ndim == 1 else 0.0  # as a vectorised sine differs from a scalar one in its last bit
        return np.stack([x[1], x[0] + noise])

    plant = bound(cancelling)
    plant.detect(0.0, POINTS_X, POINTS_U)
    for _ in range(2 * RECHECK):
        plant.rates(0.0, np.zeros((2, 3)), np.zeros(1))
    assert plant.batched


def test_measurement_and_picked_states() -> None:
    picked = bound(swing, outputs={"spin": "rad/s"})
    np.testing.assert_array_equal(picked.measure(0.0, np.array([1.0, 2.0]), np.zeros(1)), [2.0])
    measured = bound(swing, outputs={"height": "m"}, measurement=lambda t, x, u, p: [1 - np.cos(x[0])])
    np.testing.assert_array_equal(measured.measure(0.0, np.zeros((2, 4)), np.zeros(1)), np.zeros((1, 4)))
    with pytest.raises(PlantError, match=r"measurement returned an array of shape \(2,\)"):
        bound(swing, outputs={"height": "m"}, measurement=lambda t, x, u, p: x).measure(0.0, np.zeros(2), np.zeros(1))


def test_shapes_that_do_not_fit_are_misuse() -> None:
    with pytest.raises(ValueError, match=r"x \(3,\) and u \(1,\) do not fit a plant of 2 states and 1 inputs"):
        bound(swing).rates(0.0, np.zeros(3), np.zeros(1))


def test_evaluations_count_columns() -> None:
    plant = bound(swing)
    plant.rates(0.0, np.zeros(2), np.zeros(1))
    plant.rates(0.0, np.zeros((2, 5)), np.zeros(1))
    assert plant.evaluations == 6
