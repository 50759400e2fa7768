"""Worst drives of a linear model against closed forms and against brute force."""

from __future__ import annotations

from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from scipy.linalg import expm

from linverify.core.bound import BoundPlant
from linverify.core.case import Course
from linverify.core.delivered import Delays
from linverify.core.drive import Drive
from linverify.core.model import Array, LocalModel, OperatingPoint
from linverify.core.plant import Plant
from linverify.core.signals import Signals
from linverify.drives import seeds
from linverify.drives.declared import Limits
from linverify.numerics.simulate import Fidelity, Rig, run, run_alone
from linverify.numerics.worst import furthest, furthest_square, reach, reaches, weights

A = np.array([[0.0, 1.0, 0.0], [-4.0, -0.3, 1.0], [0.0, 0.2, -1.5]])
B = np.array([[0.0, 0.1], [1.0, 0.0], [0.0, 2.0]])
C = np.array([[1.0, 0.5, 0.0]])
D = np.array([[0.3, -0.2]])
EVERY, COUNT = 0.25, 12


def made(step: float | None) -> tuple[LocalModel, BoundPlant]:
    matrix = A if step is None else np.eye(3) + 0.05 * A
    inputs = B if step is None else 0.05 * B
    plant = Plant(
        states={"a": "", "b": "", "c": ""},
        inputs={"f": "", "g": ""},
        outputs={"y": ""},
        dynamics=lambda t, x, u, p: np.tensordot(matrix, x, 1) + np.tensordot(inputs, u, 1),
        measurement=lambda t, x, u, p: np.tensordot(C, x, 1) + np.tensordot(D, u, 1),
        step=step,
    )
    signals = (Signals.of(plant.states), Signals.of(plant.inputs), Signals.of(plant.outputs or {}))
    point = OperatingPoint(np.zeros(3), np.zeros(2), np.zeros(1), np.zeros(3), 0.0, *signals)
    return LocalModel(matrix, inputs, C, D, *signals, point, step), BoundPlant(plant)


@pytest.mark.parametrize("step", [None, 0.05])
@pytest.mark.parametrize("course", ["held", "straight"])
@pytest.mark.parametrize("signal", ["y", "b"])
def test_weights_are_what_the_model_does_at_the_end(step: float | None, course: Course, signal: str) -> None:
    """Against the linear side of the simulation, which steps forwards where the weights go backwards."""
    model, bound = made(step)
    rows, offsets = weights(model, signal, EVERY, COUNT, course)
    rng = np.random.default_rng(8)
    drive = Drive(EVERY, ("f", "g"), rng.normal(size=(COUNT, 2)), course, {"a": 0.3, "c": -0.7})
    rig = Rig(bound, model.at, model, (signal,), {}, np.ones(3))
    end = float(run_alone(rig, drive, Fidelity()).model[0, -1, -1, 0])
    assert np.sum(rows * drive.values) + offsets @ [0.3, 0.0, -0.7] == pytest.approx(end, rel=1e-9)


def test_the_largest_response_of_a_lag_is_its_step() -> None:
    signals = (Signals.of({"x": ""}), Signals.of({"f": ""}), Signals.of({"x": ""}))
    point = OperatingPoint(np.zeros(1), np.zeros(1), np.zeros(1), np.zeros(1), 0.0, *signals)
    lag = LocalModel(np.array([[-2.0]]), np.array([[3.0]]), np.eye(1), np.zeros((1, 1)), *signals, point)
    inputs, states = reaches(lag, ("x",), 0.5, 8, "held")
    assert inputs[0, 0] == pytest.approx(1.5 * (1 - np.exp(-8.0)), rel=1e-12)
    assert states[0, 0] == 1.0


def test_the_largest_response_of_an_undamped_oscillator() -> None:
    """x'' + x = f, |f| <= 1 held over an eighth of a turn, over whole turns: the L1 norm of its pulse response."""
    signals = (Signals.of({"x": "", "v": ""}), Signals.of({"f": ""}), Signals.of({}))
    point = OperatingPoint(np.zeros(2), np.zeros(1), np.zeros(0), np.zeros(2), 0.0, *signals)
    swing = LocalModel(
        np.array([[0.0, 1.0], [-1.0, 0.0]]),
        np.array([[0.0], [1.0]]),
        np.zeros((0, 2)),
        np.zeros((0, 1)),
        *signals,
        point,
    )
    inputs, _ = reaches(swing, ("x",), np.pi / 4, 24, "held")
    # over a whole turn |sin| integrates to 4; the switching instants of the best drive are instants of the grid
    assert inputs[0, 0] == pytest.approx(3 * 4.0, rel=1e-9)


def brute(rows: Array, low: Array, high: Array, change: Array, levels: int) -> float:
    """The best of all drives on a grid of levels."""
    choices = [np.linspace(low[j], high[j], levels) for j in range(rows.shape[1])]
    total = 0.0
    for j, values in enumerate(choices):
        best = -np.inf
        for course in product(values, repeat=len(rows)):
            if np.all(np.abs(np.diff(course, prepend=0.0)) <= change[j] + 1e-12):
                best = max(best, float(rows[:, j] @ np.array(course)))
        total += best
    return total


@pytest.mark.parametrize("change", [np.inf, 0.5, 1.0])
def test_no_drive_on_a_grid_is_worse(change: float) -> None:
    rng = np.random.default_rng(3)
    rows = rng.normal(size=(6, 2))
    low, high, changes = np.array([-1.0, 0.0]), np.array([1.0, 1.0]), np.array([change, np.inf])
    drive = furthest(rows, low, high, changes)
    assert np.all(drive >= low)
    assert np.all(drive <= high)
    assert np.all(np.abs(np.diff(drive, axis=0, prepend=0.0)) <= changes)
    assert np.sum(rows * drive) == pytest.approx(brute(rows, low, high, changes, 5), rel=1e-9)


def test_a_rate_limited_worst_drive_is_not_the_clipped_one() -> None:
    rows = np.array([[1.0], [1.0], [-3.0], [1.0]])
    low, high, change = np.array([-1.0]), np.array([1.0]), np.array([0.5])
    clipped = np.array([0.5, 1.0, 0.5, 1.0])  # the bang-bang drive 1, 1, -1, 1 followed as fast as the rate allows
    best = furthest(rows, low, high, change)
    assert np.sum(rows * best) > float(rows[:, 0] @ clipped) + 0.4


def test_the_mean_square_climb_ends_at_the_best_vertex() -> None:
    model, _ = made(None)
    rows, _ = weights(model, "a", EVERY, 8, "held")
    low, high, change = -np.ones(2), np.ones(2), np.full(2, np.inf)
    found = _square(rows, furthest_square(rows, low, high, change))
    best = max(_square(rows, np.array(signs).reshape(8, 2)) for signs in product((-1.0, 1.0), repeat=16))
    assert found >= 0.98 * best
    assert found <= best * (1 + 1e-12)


def _square(rows: Array, drive: Array) -> float:
    pulse = rows[::-1]
    signal = sum(np.convolve(pulse[:, j], drive[:, j])[: len(rows)] for j in range(2))
    return float(np.sum(np.square(signal)))


# dead times, places inside an interval, and the difference of two models


@pytest.mark.parametrize("share", [0.0, 0.25, 1.0])
@pytest.mark.parametrize("course", ["held", "straight"])
@pytest.mark.parametrize("step", [None, 0.0625])
def test_reach_is_what_the_model_does_with_dead_times(step: float | None, course: Course, share: float) -> None:
    model, bound = made(step)
    late = Delays({"f": 0.375, "g": 1.0}, {"y": 0.3125})
    found = reach(model, ("y", "b"), EVERY, COUNT, course, late, share)
    rng = np.random.default_rng(8)
    drive = Drive(EVERY, ("f", "g"), rng.normal(size=(COUNT, 2)), course, {"a": 0.3, "c": -0.7})
    rig = Rig(bound, model.at, model, ("y", "b"), {}, np.ones(3), delays=late)
    runs = run_alone(rig, drive, Fidelity(16))
    time = (COUNT - 1 + share) * EVERY
    for row in range(2):
        arrives = runs.arrives(row).ravel()
        at = np.flatnonzero(np.abs(arrives - time) < 1e-9)
        assert at.size
        # just after an instant for share 0, left of it otherwise
        seen = runs.model[row].reshape(-1)[at[-1 if share == 0.0 else 0]]
        expected = np.sum(found.rows[row] * drive.values) + found.offsets[row, -1] @ [0.3, 0.0, -0.7]
        assert expected == pytest.approx(seen, rel=1e-9)


def test_offsets_are_told_at_every_age() -> None:
    model, _ = made(None)
    found = reach(model, ("a",), EVERY, COUNT, "held")
    expected = [expm(A * EVERY * (age + 1))[0] for age in range(COUNT)]
    assert np.abs(found.offsets[0] - expected).max() < 1e-12


def test_the_worst_drive_of_a_difference_reaches_the_largest_sum_of_all_corners() -> None:
    model, bound = made(None)
    other = replace(model, B=model.B * [1.1, 0.8])
    limits = Limits(EVERY, 5, "held", ("f", "g"), -np.ones(2), np.array([1.0, 0.5]), np.full(2, np.inf))
    rig = Rig(bound, model.at, model, ("y",), {}, np.ones(3))
    drives = [limits.drive(np.array(corner).reshape(5, 2)) for corner in product(*([(-1.0, 1.0), (-1.0, 0.5)] * 5))]
    apart = np.abs(run(rig, drives, Fidelity()).model - run(replace(rig, model=other), drives, Fidelity()).model)
    found = seeds.worst_of_difference(limits, model, other, ("y",), ())
    seen = np.abs(run(rig, found, Fidelity()).model - run(replace(rig, model=other), found, Fidelity()).model)
    assert seen.max() >= apart.max() * (1.0 - 1e-12)


def test_the_worst_drive_with_offsets_peaks_where_they_still_count() -> None:
    """Two lags that differ by their poles: an initial unit is 0.05 exp(-1) off at most, after 1 / 1.05 time units."""
    signals = (Signals.of({"x": ""}), Signals.of({"f": ""}), Signals.of({"x": ""}))
    point = OperatingPoint(np.zeros(1), np.zeros(1), np.zeros(1), np.zeros(1), 0.0, *signals)
    slow = LocalModel(np.array([[-1.0]]), np.zeros((1, 1)), np.eye(1), np.zeros((1, 1)), *signals, point)
    fast = replace(slow, A=np.array([[-1.1]]))
    limits = Limits(
        0.05, 200, "held", ("f",), -np.ones(1), np.ones(1), np.full(1, np.inf), ("x",), -np.ones(1), np.ones(1)
    )
    drives = seeds.worst_of_difference(limits, slow, fast, ("x",), ())
    assert {drive.offsets["x"] for drive in drives if drive.offsets} == {1.0, -1.0}
