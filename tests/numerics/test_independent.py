"""The second opinion against the first, on plants of unlike kind, and that it stands on its own feet."""

from __future__ import annotations

import ast
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from truth.engine_plants import KINDS, Kind, settled

from linverify.core.case import Interval
from linverify.core.drive import Drive
from linverify.core.outcome import Outcome
from linverify.core.plant import Plant
from linverify.numerics import independent, readout
from linverify.numerics.independent import run_independent
from linverify.numerics.simulate import Fidelity, Rig, Runs, run, run_alone

FIDELITY = Fidelity(4, 1e-3)


def rig_of(kind: Kind, **more: Any) -> Rig:
    names = more.pop("signals", kind.plant.states.names)
    return Rig(kind.plant, kind.point, kind.model, names, more.pop("envelope", {}), 1e-2 * kind.excursion, **more)


def furthest(first: Runs, second: Runs, kind: Kind) -> float:
    return float(np.max(np.abs(first.plant - second.plant) / kind.excursion[:, None, None, None]))


@pytest.mark.parametrize("course", ["held", "straight"])
@pytest.mark.parametrize("name", KINDS)
def test_both_agree_within_what_the_halved_grid_tells(name: str, course: str) -> None:
    kind = KINDS[name]()
    rig, drive = rig_of(kind), kind.drives(1, 12, course)[0]
    first, finer = run_alone(rig, drive, FIDELITY), run_alone(rig, drive, FIDELITY.finer())
    second = run_independent(rig, drive, FIDELITY)
    told = float(np.max(np.abs(first.plant - finer.plant[:, :, ::2]) / kind.excursion[:, None, None, None]))
    assert furthest(first, second, kind) <= 2 * told + 1e-8
    assert told < 2e-3
    assert np.abs(first.model - second.model).max() <= 1e-11 * np.abs(first.model).max()
    assert np.array_equal(first.times, second.times)


@pytest.mark.parametrize("course", ["held", "straight"])
@pytest.mark.parametrize("name", KINDS)
def test_twice_the_difference_to_the_halved_grid_covers_the_error(name: str, course: str) -> None:
    """Every trajectory of a batch, on four kinds of plant, against a reference 10000 times finer."""
    kind = KINDS[name]()
    rig, drives = rig_of(kind), kind.drives(16, 10, course)
    first, finer = run(rig, drives, FIDELITY), run(rig, drives, FIDELITY.finer())
    exact = run(rig, drives, Fidelity(64, 1e-7)).plant[:, :, ::16]
    size = kind.excursion[:, None, None, None]
    told = np.max(np.abs(first.plant - finer.plant[:, :, ::2]) / size, axis=(0, 1, 2))
    true = np.max(np.abs(first.plant - exact) / size, axis=(0, 1, 2))
    assert (2 * told >= true).all()
    assert (true > 0).all()


def test_exits_are_found_alike() -> None:
    kind = KINDS["pend"]()
    envelope = {"angle": Interval(0.45, 0.55), "speed": Interval(-0.25, 0.2)}
    rig = rig_of(kind, envelope=envelope, signals=("angle",))
    left = 0
    for drive in kind.drives(8, 20):
        first, second = run_alone(rig, drive, Fidelity(32, 1e-4)), run_independent(rig, drive, Fidelity(32, 1e-4))
        one, two = first.exits[0], second.exits[0]
        assert (one is None) == (two is None)
        if one is not None and two is not None:
            left += 1
            assert (one.signal, one.side, one.limit) == (two.signal, two.side, two.limit)
            assert one.time == pytest.approx(two.time, abs=1e-4)
            assert one.model_way == pytest.approx(two.model_way, abs=2e-3)
            assert first.ended[0] == one.time
            assert np.array_equal(first.counts(), second.counts())
    assert left >= 4


def test_failures_are_told_alike() -> None:
    kind = KINDS["tank"]()
    rig = rig_of(kind)
    dry = Drive(5.0, ("pump1", "pump2"), np.tile([-4.0, -4.0], (40, 1)))
    first, second = run_alone(rig, dry, FIDELITY), run_independent(rig, dry, FIDELITY)
    assert first.outcomes == (Outcome.NOT_FINITE,)
    assert not second.outcomes[0].done
    assert second.errors[0]
    assert first.ended[0] == pytest.approx(second.ended[0], rel=1e-3)


def test_difference_equation_by_its_own_loop() -> None:
    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([0.9 * x[0] + 0.1 * np.sin(u[0]), 0.8 * x[1] + 0.2 * x[0] ** 2 + 0.01 * t * u[0]])

    def measurement(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([x[0] + 0.5 * u[0]])

    plant = Plant(
        states={"a": "1", "b": "1"}, inputs={"u": "1"}, outputs={"y": "1"}, dynamics=dynamics,
        measurement=measurement, step=0.1,
    )  # fmt: skip
    kind = settled(plant, np.zeros(2), np.zeros(1), 0.3, [0.5], [0.5, 0.2])
    rig = rig_of(kind, signals=("a", "y"), envelope={"b": Interval(-0.05, 0.05)})
    for course in ("held", "straight"):
        for drive in kind.drives(6, 10, course):
            first, second = run_alone(rig, drive, FIDELITY), run_independent(rig, drive, FIDELITY)
            assert np.array_equal(first.model, second.model, equal_nan=True)
            assert first.exits[0] is None or second.exits[0] is not None
            seen = first.counts() & second.counts()
            assert np.abs((first.plant - second.plant)[:, seen]).max(initial=0.0) < 1e-14


def test_drifting_course_and_plant_time() -> None:
    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([2.0 + u[0] * np.cos(t) + 0.0 * x[0]])

    plant = Plant(states={"x": "m"}, inputs={"u": "1"}, dynamics=dynamics)
    kind = settled(plant, np.array([1.0]), np.zeros(1), 0.5, [1.0], [1.0], [2.0])
    second = run_independent(rig_of(kind), Drive(0.5, ("u",), np.ones((4, 1))), FIDELITY)
    assert second.plant[0, :, :, 0] == pytest.approx(np.sin(second.times), abs=1e-7)
    assert second.model[0, :, :, 0] == pytest.approx(second.times, abs=1e-9)


def test_short_pulse_is_not_missed() -> None:
    kind = KINDS["pend"]()
    values = np.zeros((100, 1))
    values[60] = 1.0
    second = run_independent(rig_of(kind), Drive(0.01, ("torque",), values), FIDELITY)
    assert np.abs(second.plant[:, :60]).max() < 1e-10
    assert second.plant[1, 60, -1, 0] == pytest.approx(0.01, rel=0.01)
    assert second.ended[0] == pytest.approx(1.0)


def test_a_jump_into_where_the_plant_has_no_numbers_is_told() -> None:
    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([np.sqrt(1.0 + u[0]) - x[0]])

    plant = Plant(states={"x": "1"}, inputs={"u": "1"}, dynamics=dynamics)
    kind = settled(plant, np.array([1.0]), np.zeros(1), 0.5, [0.5], [0.5])
    drive = Drive(0.5, ("u",), np.array([[0.1], [-1.5], [0.1]]))
    first, second = run_alone(rig_of(kind), drive, FIDELITY), run_independent(rig_of(kind), drive, FIDELITY)
    for runs in (first, second):
        assert runs.outcomes == (Outcome.NOT_FINITE,)
        assert "returned nan for x" in runs.errors[0]
        assert runs.ended.tolist() == [0.5]


def test_budget() -> None:
    kind = KINDS["pend"]()
    second = run_independent(rig_of(kind, evaluations=20), kind.drives(1, 100)[0], FIDELITY)
    assert second.outcomes == (Outcome.TOO_MANY_STEPS,)
    assert math.isfinite(second.ended[0])


def test_no_integration_code_is_shared() -> None:
    """Only values (rig) and this check's own reading may be imported from the numerical layer."""
    for module in (independent, readout):
        tree = ast.parse(Path(module.__file__).read_text(encoding="utf-8"))
        near = {node.module for node in ast.walk(tree) if isinstance(node, ast.ImportFrom) and node.level == 1}
        assert near <= {"rig", "readout", "pieces"}  # where nodes lie is shared, how to get there is not
