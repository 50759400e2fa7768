"""Plant and local model side by side: exact where a closed form is known, and stopped where they must stop."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import pytest

from linverify.core.bound import BoundPlant
from linverify.core.case import Interval
from linverify.core.drive import Drive
from linverify.core.model import LocalModel, OperatingPoint
from linverify.core.outcome import Outcome
from linverify.core.plant import Plant
from linverify.numerics import simulate
from linverify.numerics.simulate import Fidelity, Rig, Runs, run, run_alone

FINE = Fidelity(4, 1e-4)


def rig_of(
    plant: Plant,
    A: object,
    B: object,
    *,
    x: object = None,
    u: object = None,
    C: object = None,
    D: object = None,
    drift: object = None,
    time: float = 0.0,
    envelope: Mapping[str, Interval] | None = None,
    signals: tuple[str, ...] | None = None,
    weights: object = None,
    batched: bool = True,
    **limits: int,
) -> Rig:
    bound = BoundPlant(plant)
    n, m, k = bound.n, bound.m, bound.k
    point_x = np.zeros(n) if x is None else np.asarray(x, dtype=float)
    point_u = np.zeros(m) if u is None else np.asarray(u, dtype=float)
    if batched:
        generator = np.random.default_rng(2)
        shift = 0.1 * generator.uniform(-1, 1, (n + m, 5))
        bound.detect(time, point_x[:, None] + shift[:n], point_u[:, None] + shift[n:])
        assert bound.batched, bound.why_single
    y = bound.measure(time, point_x, point_u)
    rates = np.zeros(n) if drift is None else np.asarray(drift, dtype=float)
    point = OperatingPoint(point_x, point_u, y, rates, time, bound.states, bound.inputs, bound.outputs)
    Cm = np.eye(n)[:k] if C is None else np.asarray(C, dtype=float)
    Dm = np.zeros((k, m)) if D is None else np.asarray(D, dtype=float)
    model = LocalModel(
        np.asarray(A, dtype=float), np.asarray(B, dtype=float), Cm, Dm, bound.states, bound.inputs, bound.outputs,
        point, plant.step,
    )  # fmt: skip
    size = np.full(n, 1e-3) if weights is None else np.asarray(weights, dtype=float)
    return Rig(bound, point, model, signals or plant.state_signals.names, envelope or {}, size, **limits)


def plain(function: Callable[[float, Any, Any], list[Any]], states: str = "x", **more: Any) -> Plant:
    names = states.split()

    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack(function(t, x, u))

    return Plant(states=dict.fromkeys(names, "1"), inputs={"u": "1"}, dynamics=dynamics, **more)


def lag(**more: Any) -> Plant:
    return plain(lambda t, x, u: [-2.0 * x[0] + u[0]], **more)


def drive(values: object, every: float = 0.5, course: str = "held", **offsets: float) -> Drive:
    return Drive(every, ("u",), np.asarray(values, dtype=float).reshape(-1, 1), course, offsets)  # type: ignore[arg-type]


# a plant that is linear must equal its model


@pytest.mark.parametrize("course", ["held", "straight"])
def test_linear_plant_equals_its_model_at_every_node(course: str) -> None:
    plant = plain(lambda t, x, u: [x[1], -9.0 * x[0] - 0.6 * x[1] + u[0]], "x v")
    rig = rig_of(plant, [[0, 1], [-9, -0.6]], [[0], [1]])
    values = np.random.default_rng(0).uniform(-1, 1, (5, 12, 1))
    drives = [drive(row, 0.2, course, x=0.1 * index) for index, row in enumerate(values)]
    runs = run(rig, drives, FINE)
    assert runs.plant.shape == runs.model.shape == (2, 12, 5, 5)
    assert runs.times.shape == (12, 5)
    assert np.abs(runs.error).max() < 1e-6
    assert runs.completed.all()
    assert runs.outcomes == (Outcome.DONE,) * 5


def test_first_order_answers_match_closed_forms() -> None:
    rig = rig_of(lag(), [[-2]], [[1]])
    step = run_alone(rig, drive([1.0, 1.0, 0.0]), FINE)
    t = step.times
    rising = 0.5 * (1 - np.exp(-2 * t[:2]))
    assert step.model[0, :2, :, 0] == pytest.approx(rising, abs=1e-15)
    assert step.plant[0, :2, :, 0] == pytest.approx(rising, abs=1e-7)
    top = 0.5 * (1 - math.exp(-2.0))
    assert step.model[0, 2, :, 0] == pytest.approx(top * np.exp(-2 * (t[2] - 1.0)), abs=1e-15)
    ramp = run_alone(rig, drive([0.5, 1.0], course="straight"), FINE)  # u = t
    exact = 0.5 * ramp.times - 0.25 * (1 - np.exp(-2 * ramp.times))
    assert ramp.model[0, :, :, 0] == pytest.approx(exact, abs=1e-15)
    assert ramp.plant[0, :, :, 0] == pytest.approx(exact, abs=1e-7)


def test_both_sides_of_a_jump_are_kept() -> None:
    plant = plain(
        lambda t, x, u: [-2.0 * x[0] + u[0]],
        outputs={"y": "1"},
        measurement=lambda t, x, u, p: np.stack([x[0] + 3.0 * u[0]]),
    )
    rig = rig_of(plant, [[-2]], [[1]], D=[[3]], signals=("y", "x"))
    runs = run_alone(rig, drive([1.0, -1.0]), FINE)
    assert runs.times[0, -1] == runs.times[1, 0]
    assert runs.plant[0, 1, 0, 0] - runs.plant[0, 0, -1, 0] == pytest.approx(-6.0, abs=1e-9)
    assert runs.model[0, 1, 0, 0] - runs.model[0, 0, -1, 0] == pytest.approx(-6.0, abs=1e-12)
    assert runs.plant[1, 1, 0, 0] == runs.plant[1, 0, -1, 0]
    straight = run_alone(rig, drive([1.0, -1.0], course="straight"), FINE)
    assert straight.plant[0, 0, 0, 0] == 0.0
    assert straight.plant[0, 1, 0, 0] == pytest.approx(straight.plant[0, 0, -1, 0], abs=1e-12)


def test_short_pulse_in_a_long_horizon_is_not_missed() -> None:
    """A pulse of 10 ms in 100 s, which an integrator that is free to choose its steps walks over."""
    values = np.zeros((10_000, 1))
    values[4321] = 1.0
    rig = rig_of(lag(), [[-2]], [[1]], weights=[1e-4])
    runs = run_alone(rig, drive(values, 0.01), Fidelity(4, 1e-2))
    after = 0.5 * (1 - math.exp(-0.02))
    assert runs.plant[0, 4321, -1, 0] == pytest.approx(after, rel=1e-6)
    assert runs.model[0, 4321, -1, 0] == pytest.approx(after, rel=1e-12)
    assert np.abs(runs.plant[0, :4321]).max() == 0.0


def test_offsets_start_both_models_away_from_trim() -> None:
    plant = plain(lambda t, x, u: [-2.0 * (x[0] - 5.0) + u[0]])
    rig = rig_of(plant, [[-2]], [[1]], x=[5.0])
    runs = run(rig, [drive([0.0, 0.0]), drive([0.0, 0.0], x=0.25)], FINE)
    assert np.abs(runs.plant[..., 0]).max() == 0.0
    assert runs.plant[0, :, :, 1] == pytest.approx(0.25 * np.exp(-2 * runs.times), abs=1e-6)
    assert runs.model[0, :, :, 1] == pytest.approx(0.25 * np.exp(-2 * runs.times), abs=1e-14)


def test_deviations_are_taken_from_a_drifting_course() -> None:
    """A craft that climbs steadily, with an output that bends with altitude."""
    plant = plain(
        lambda t, x, u: [3.0 + x[1], -x[1] + u[0]],
        "altitude climb",
        outputs={"pressure": "1"},
        measurement=lambda t, x, u, p: np.stack([100.0 * np.exp(-x[0] / 50.0)]),
    )
    slope = [[-2.0 * math.exp(-0.2), 0.0]]
    rig = rig_of(
        plant, [[0, 1], [0, -1]], [[0], [1]], x=[10, 0], C=slope, drift=[3, 0], signals=("altitude", "pressure")
    )
    still = run_alone(rig, drive([0.0] * 4), FINE)
    assert np.abs(still.plant).max() < 1e-12
    moved = run_alone(rig, drive([1.0] * 4), FINE)
    exact = moved.times - (1 - np.exp(-moved.times))
    assert moved.plant[0, :, :, 0] == pytest.approx(exact, abs=1e-6)
    course = 10 + 3 * moved.times
    bent = 100 * np.exp(-(course + exact) / 50) - 100 * np.exp(-course / 50)
    assert moved.plant[1, :, :, 0] == pytest.approx(bent, abs=1e-5)


def test_time_of_the_plant_begins_where_it_was_trimmed() -> None:
    plant = plain(lambda t, x, u: [np.cos(t) + 0.0 * x[0]])
    rig = rig_of(plant, [[0]], [[0]], time=2.0)
    runs = run_alone(rig, drive([0.0] * 4), FINE)
    assert runs.plant[0, :, :, 0] == pytest.approx(np.sin(2 + runs.times) - math.sin(2), abs=1e-7)


# difference equations


def test_difference_equation_with_several_steps_an_interval() -> None:
    plant = plain(lambda t, x, u: [0.9 * x[0] + 0.1 * u[0]], step=0.1)
    rig = rig_of(plant, [[0.9]], [[0.1]])
    runs = run_alone(rig, drive([1.0, 0.0], 0.3), FINE)
    assert runs.times.shape == (2, 4)
    assert runs.times[1] == pytest.approx([0.3, 0.4, 0.5, 0.6])
    up = 1 - 0.9 ** np.arange(4)
    assert runs.plant[0, 0, :, 0] == pytest.approx(up, abs=1e-15)
    assert runs.plant[0, 1, :, 0] == pytest.approx(up[-1] * 0.9 ** np.arange(4), abs=1e-15)
    assert np.abs(runs.error).max() < 1e-15
    assert runs.method == "difference equation"


def test_difference_equation_counts_time_in_steps_and_is_read_at_instants_only() -> None:
    plant = plain(
        lambda t, x, u: [x[0] + t],
        step=0.5,
        outputs={"y": "1"},
        measurement=lambda t, x, u, p: np.stack([x[0] + 10.0 * u[0]]),
    )
    rig = rig_of(plant, [[1]], [[0]], D=[[10]], signals=("x", "y"), time=4.0)
    runs = run_alone(rig, drive([1.0, 2.0], 1.0), FINE)
    assert runs.plant[0].ravel().tolist() == [0, 4, 9, 9, 15, 22]
    # the node that ends an interval shows the next instant's input, as the sampled plant does
    assert runs.plant[1].ravel().tolist() == [10, 14, 29, 29, 35, 42]
    assert runs.model[1].ravel().tolist() == [10, 10, 20, 20, 20, 20]


def test_difference_equation_drifts_by_steps() -> None:
    plant = plain(lambda t, x, u: [x[0] + 0.25 + u[0]], step=0.1)
    rig = rig_of(plant, [[1]], [[1]], drift=[0.25])
    runs = run_alone(rig, drive([0.0, 1.0, 0.0], 0.1), FINE)
    assert runs.plant[0].ravel() == pytest.approx([0, 0, 0, 1, 1, 1], abs=1e-12)
    assert np.abs(runs.error).max() < 1e-12


def test_drives_that_do_not_fit_the_step_are_refused() -> None:
    rig = rig_of(plain(lambda t, x, u: [0.9 * x[0] + u[0]], step=0.1), [[0.9]], [[1]])
    with pytest.raises(ValueError, match="do not fit a plant that steps every"):
        run_alone(rig, drive([1.0], 0.25), FINE)


# leaving the envelope


def test_exit_is_located_between_nodes_and_ends_the_comparison() -> None:
    plant = plain(lambda t, x, u: [u[0] + 0.0 * x[0]])
    rig = rig_of(plant, [[0]], [[1]], envelope={"x": Interval(-1.0, 0.9)})
    runs = run(rig, [drive([1.0] * 4), drive([-0.1] * 4), drive([-1.0] * 4)], FINE)
    first, none, third = runs.exits
    assert first is not None
    assert (first.signal, first.side, first.limit) == ("x", "high", 0.9)
    assert first.time == pytest.approx(0.9, abs=1e-9)
    assert first.model_way == pytest.approx(1.0, abs=1e-9)
    assert none is None
    assert third is not None
    assert (third.side, third.time) == ("low", pytest.approx(1.0, abs=1e-9))
    assert runs.ended == pytest.approx([0.9, 2.0, 1.0], abs=1e-9)
    assert runs.completed.tolist() == [False, True, False]
    assert runs.outcomes == (Outcome.DONE,) * 3
    counted = runs.counts()
    assert np.isfinite(runs.plant[:, counted]).all()
    assert runs.times[counted[..., 0]].max() <= 0.9
    assert not counted[-1, :, 0].any()
    assert counted[..., 1].all()


def test_exit_through_a_bound_that_is_only_watched_tells_how_far_the_model_was() -> None:
    plant = plain(
        lambda t, x, u: [u[0] + 0.0 * x[0]],
        outputs={"y": "1"},
        measurement=lambda t, x, u, p: np.stack([x[0] + x[0] ** 2]),
    )
    rig = rig_of(plant, [[0]], [[1]], C=[[1]], envelope={"y": Interval(-1, 2.0)}, signals=("x",))
    left = run_alone(rig, drive([1.0] * 4), Fidelity(64, 1e-4)).exits[0]
    assert left is not None
    assert left.signal == "y"
    assert left.time == pytest.approx(1.0, abs=1e-4)
    assert left.model_way == pytest.approx(0.5, abs=1e-4)  # the model's y is x, 1 of 2


def test_exit_by_a_jump_of_the_input_is_told_at_that_instant() -> None:
    plant = plain(
        lambda t, x, u: [-x[0] + u[0]],
        outputs={"y": "1"},
        measurement=lambda t, x, u, p: np.stack([x[0] + 2.0 * u[0]]),
    )
    rig = rig_of(plant, [[-1]], [[1]], D=[[2]], envelope={"y": Interval(-1.0, 1.0)}, signals=("y",))
    runs = run_alone(rig, drive([0.1, 0.1, 0.9, 0.1]), FINE)
    left = runs.exits[0]
    assert left is not None
    assert left.time == 1.0
    assert left.model_way > 1.0
    assert runs.counts()[:2].all()
    assert not runs.counts()[2:].any()


def test_values_on_a_limit_are_inside() -> None:
    rig = rig_of(lag(), [[-2]], [[1]], envelope={"x": Interval(0.0, 0.3)})
    runs = run_alone(rig, drive([0.0, 0.0], x=0.3), FINE)
    assert runs.exits == (None,)
    outside = run_alone(rig, drive([0.0, 0.0], x=0.31), FINE)
    assert outside.exits[0] is not None
    assert outside.exits[0].time == 0.0
    assert not outside.counts().any()


def test_a_plant_that_explodes_after_its_exit_neither_stalls_nor_poisons_the_others() -> None:
    plant = plain(lambda t, x, u: [x[0] ** 2 * (x[0] > 0.5) * 50 - 2.0 * x[0] + 4.0 * u[0]])
    rig = rig_of(plant, [[-2]], [[4]], envelope={"x": Interval(-1, 1)})
    calm, wild = drive([0.2] * 6), drive([1.0] * 6)
    runs = run(rig, [calm, wild, calm], FINE)
    alone = run(rig, [calm, calm, calm], FINE)
    assert runs.exits[0] is None
    assert runs.exits[1] is not None
    assert runs.exits[1].time < 0.5
    assert runs.outcomes == (Outcome.DONE,) * 3
    assert np.abs(runs.plant[..., 0] - alone.plant[..., 0]).max() < 1e-6
    assert runs.evaluations < 40 * alone.evaluations


def test_of_two_exits_the_first_in_time_is_told() -> None:
    plant = plain(lambda t, x, u: [u[0] + 0 * x[0], 2.0 * u[0] + 0 * x[0]], "a b")
    envelope = {"a": Interval(-1, 1), "b": Interval(-1, 1)}
    left = run_alone(rig_of(plant, np.zeros((2, 2)), [[1], [2]], envelope=envelope), drive([1.0] * 4), FINE).exits[0]
    assert left is not None
    assert (left.signal, left.time) == ("b", pytest.approx(0.5, abs=1e-9))


# plants that fail


def root(**more: Any) -> Plant:
    return plain(lambda t, x, u: [-np.sqrt(x[0]) + 1.0 + u[0]], **more)


def test_nan_before_any_exit_is_an_outcome_that_names_the_call() -> None:
    rig = rig_of(root(), [[-0.5]], [[1]], x=[1.0])
    runs = run(rig, [drive([-1.5] * 8), drive([0.1] * 8)], FINE)
    assert runs.outcomes == (Outcome.NOT_FINITE, Outcome.DONE)
    assert "dynamics returned nan for x when called with t = " in runs.errors[0]
    assert runs.errors[1] == ""
    assert runs.exits == (None, None)
    assert 0 < runs.ended[0] < 4.0
    assert runs.completed.tolist() == [False, True]
    assert np.isfinite(runs.plant[..., 1]).all()


def test_running_dry_at_the_limit_of_the_envelope_is_an_exit() -> None:
    for more in ({}, {"domain": {"x": (0.0, None)}}):
        rig = rig_of(root(**more), [[-0.5]], [[1]], x=[1.0], envelope={"x": Interval(0.0, 4.0)})
        runs = run_alone(rig, drive([-1.5] * 8), FINE)
        assert runs.outcomes == (Outcome.DONE,)
        left = runs.exits[0]
        assert left is not None
        assert (left.signal, left.side) == ("x", "low")


def test_leaving_the_domain_inside_the_envelope_is_an_outcome() -> None:
    rig = rig_of(lag(domain={"x": (-0.2, None)}), [[-2]], [[1]], envelope={"x": Interval(-1, 1)})
    runs = run_alone(rig, drive([-1.0] * 4), FINE)
    assert runs.outcomes == (Outcome.NOT_FINITE,)
    assert runs.errors == ("the states leave the plant's domain (x)",)
    assert runs.ended[0] == pytest.approx(-0.5 * math.log(1 - 0.4), abs=1e-3)


def test_inputs_outside_the_plants_domain_are_an_outcome() -> None:
    rig = rig_of(lag(domain={"u": (0.0, 1.0)}), [[-2]], [[1]], u=[0.5], x=[0.25])
    runs = run(rig, [drive([0.5, -0.5, 0.0]), drive([0.1, 0.6, 0.0]), drive([0.1, -0.6, 0.0], course="held")], FINE)
    assert runs.outcomes == (Outcome.DONE, Outcome.NOT_FINITE, Outcome.NOT_FINITE)
    assert runs.errors[1] == "the drive moves u out of the plant's domain"
    assert runs.ended.tolist() == [1.5, 0.5, 0.5]


def test_states_that_overflow_are_an_outcome() -> None:
    rig = rig_of(plain(lambda t, x, u: [x[0] ** 2 + u[0]]), [[0]], [[1]])
    runs = run(rig, [drive([40.0] * 4), drive([0.1] * 4)], FINE)
    assert runs.outcomes[0] in (Outcome.DIVERGED, Outcome.NOT_FINITE, Outcome.TOO_MANY_STEPS)
    assert runs.errors[0]
    assert runs.ended[0] == pytest.approx(math.pi / 2 / math.sqrt(40.0), rel=1e-2)
    assert runs.outcomes[1] is Outcome.DONE


def test_a_drifting_course_that_cannot_be_read_is_an_outcome() -> None:
    plant = plain(
        lambda t, x, u: [1.0 + u[0] + 0 * x[0]],
        outputs={"y": "1"},
        measurement=lambda t, x, u, p: np.stack([np.sqrt(1.2 - x[0])]),
    )
    rig = rig_of(plant, [[0]], [[1]], C=[[-0.5]], drift=[1], signals=("y",))
    runs = run_alone(rig, drive([-0.5] * 4), FINE)
    assert runs.outcomes == (Outcome.NOT_FINITE,)
    assert "trimmed course itself" in runs.errors[0]
    assert 1.2 <= runs.ended[0] <= 1.5


def test_an_exception_is_told_with_the_arguments_it_came_with() -> None:
    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        if np.any(x[0] > 0.3):
            raise ZeroDivisionError("blade stalled")
        return np.stack([-2.0 * x[0] + u[0]])

    plant = Plant(states={"x": "1"}, inputs={"u": "1"}, dynamics=dynamics)
    runs = run(rig_of(plant, [[-2]], [[1]]), [drive([1.0] * 4), drive([0.3] * 4)], FINE)
    assert runs.outcomes == (Outcome.PLANT_RAISED, Outcome.DONE)
    assert "ZeroDivisionError" in runs.errors[0]
    assert "blade stalled" in runs.errors[0]
    assert "u = 1" in runs.errors[0]
    assert runs.ended[0] == pytest.approx(-0.5 * math.log(1 - 0.6), abs=1e-3)


def test_an_output_that_cannot_be_read_is_an_outcome() -> None:
    def measurement(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([np.log(0.3 - x[0])])

    plant = plain(lambda t, x, u: [-2.0 * x[0] + u[0]], outputs={"y": "1"}, measurement=measurement)
    rig = rig_of(plant, [[-2]], [[1]], C=[[-1 / 0.3]], signals=("y",))
    runs = run(rig, [drive([1.0] * 4), drive([0.1] * 4)], FINE)
    assert runs.outcomes == (Outcome.NOT_FINITE, Outcome.DONE)
    assert "measurement returned nan for y" in runs.errors[0]


def test_an_exit_before_the_failure_counts_and_one_after_it_does_not() -> None:
    rig = rig_of(root(), [[-0.5]], [[1]], x=[1.0], envelope={"x": Interval(0.5, 4)})
    before = run_alone(rig, drive([-1.5] * 8), FINE)
    assert before.outcomes == (Outcome.DONE,)
    assert before.exits[0] is not None
    assert before.exits[0].limit == 0.5


def test_a_difference_equation_that_fails_stops_alone() -> None:
    plant = plain(lambda t, x, u: [np.log(1.0 + x[0] + u[0])], step=0.5)
    runs = run(rig_of(plant, [[1]], [[1]]), [drive([0.1] * 4), drive([0.1, -3.0, 0.1, 0.1])], FINE)
    assert runs.outcomes == (Outcome.DONE, Outcome.NOT_FINITE)
    assert runs.ended.tolist() == [2.0, 0.5]
    assert "dynamics returned nan" in runs.errors[1]


def test_budgets_are_counted_in_plant_columns() -> None:
    plant = plain(lambda t, x, u: [np.cos(1e5 * t) + 0.0 * x[0] + u[0]])
    rig = rig_of(plant, [[0]], [[1]], weights=[1e-9], attempts=50)
    runs = run_alone(rig, drive([0.0] * 2), FINE)
    assert runs.outcomes == (Outcome.TOO_MANY_STEPS,)
    assert "budget of 50" in runs.errors[0]
    rig = rig_of(lag(), [[-2]], [[1]], evaluations=30)
    runs = run_alone(rig, drive([0.1] * 100), FINE)
    assert runs.outcomes == (Outcome.TOO_MANY_STEPS,)
    assert "budget of 30 a drive" in runs.errors[0]
    assert 0 < runs.ended[0] < 50.0


# bits


def same(first: Runs, second: Runs) -> bool:
    return first.plant.tobytes() == second.plant.tobytes() and first.model.tobytes() == second.model.tobytes()


@pytest.mark.parametrize("batched", [True, False], ids=["batched", "single columns"])
def test_a_canonical_run_has_the_same_bits_whatever_ran_before(batched: bool) -> None:
    def pendulum() -> Rig:
        plant = plain(lambda t, x, u: [x[1], -9.0 * np.sin(x[0]) - 0.6 * x[1] + u[0]], "x v")
        return rig_of(plant, [[0, 1], [-9, -0.6]], [[0], [1]], batched=batched)

    values = np.random.default_rng(3).uniform(-2, 2, (70, 10, 1))
    drives = [drive(row, 0.2) for row in values]
    fresh, used = pendulum(), pendulum()
    first = run_alone(fresh, drives[7], FINE)
    together = run(used, drives[:20], FINE)
    assert same(first, run_alone(used, drives[7], FINE))
    assert same(together, run(fresh, drives[:20], FINE))
    assert np.abs(together.plant[..., 7] - first.plant[..., 0]).max() < 1e-5


def test_many_drives_come_back_in_order() -> None:
    rig = rig_of(lag(), [[-2]], [[1]])
    drives = [drive([0.001 * index] * 2) for index in range(300)]
    runs = run(rig, drives, FINE)
    assert len(runs) == 300
    final = 0.0005 * np.arange(300) * (1 - math.exp(-2.0))
    assert runs.model[0, -1, -1] == pytest.approx(final, abs=1e-15)
    assert runs.plant[0, -1, -1] == pytest.approx(final, abs=1e-6)


def test_single_columns_and_batches_agree() -> None:
    plant = plain(lambda t, x, u: [x[1], -9.0 * np.sin(x[0]) + u[0]], "x v")
    drives = [drive(row, 0.2) for row in np.random.default_rng(4).uniform(-1, 1, (20, 6, 1))]
    one = run(rig_of(plant, [[0, 1], [-9, 0]], [[0], [1]], batched=False), drives, FINE)
    many = run(rig_of(plant, [[0, 1], [-9, 0]], [[0], [1]]), drives, FINE)
    assert np.abs(one.plant - many.plant).max() < 1e-6


# accuracy


def test_finer_run_halves_the_steps_even_where_one_an_interval_was_enough() -> None:
    rig = rig_of(
        plain(lambda t, x, u: [x[1], -np.sin(x[0]) + u[0]], "x v"), [[0, 1], [-1, 0]], [[0], [1]], weights=[1, 1]
    )
    d = drive([0.5, -0.5, 0.3], 1.0)
    coarse, fine, exact = (run_alone(rig, d, f) for f in (FINE, FINE.finer(), Fidelity(64, 1e-9)))
    told = np.abs(coarse.plant - fine.plant[:, :, ::2]).max()
    true = np.abs(coarse.plant - exact.plant[:, :, ::16]).max()
    assert told == pytest.approx(true, rel=0.1)
    assert FINE.finer() == Fidelity(8, 1e-4 / 32)


def test_stiff_points_are_integrated_implicitly_by_a_rule_that_looks_at_the_point_only() -> None:
    slow = rig_of(lag(), [[-2]], [[1]])
    stiff = rig_of(plain(lambda t, x, u: [-1e5 * (x[0] - u[0])]), [[-1e5]], [[1e5]])
    assert run_alone(slow, drive([1.0]), FINE).method == "Dormand-Prince 5(4)"
    runs = run_alone(stiff, drive([1.0, 0.5], course="straight"), FINE)
    assert runs.method == "Rosenbrock 4(3)"
    assert runs.plant[0, -1, -1, 0] == pytest.approx(0.5, abs=2e-5)
    assert runs.evaluations < 8 * 3000


def test_a_plant_that_turns_stiff_away_from_trim_is_followed_implicitly() -> None:
    plant = plain(lambda t, x, u: [-x[0] - 1e6 * np.maximum(x[0] - 0.1, 0.0) + u[0]])
    rig = rig_of(plant, [[-1]], [[1]], attempts=300)
    runs = run(rig, [drive([1.0] * 4), drive([0.05] * 4)], FINE)
    assert runs.method == "Rosenbrock 4(3)"
    assert runs.outcomes == (Outcome.DONE, Outcome.DONE)
    assert runs.plant[0, -1, -1, 0] == pytest.approx(0.1, abs=1e-5)
    assert runs.plant[0, :, :, 1] == pytest.approx(0.05 * (1 - np.exp(-runs.times)), abs=1e-6)


def test_what_is_fast_and_not_stiff_gets_all_steps_of_the_budget() -> None:
    """Fifty turns an interval: too many for the first try, and for an implicit method of order 4 at any time."""
    fast = 2.0 * np.pi * 100.0
    plant = plain(lambda t, x, u: [np.cos(fast * t) * fast * 1e-3 + 0.0 * x[0] + u[0] * 1e-3])
    runs = run_alone(rig_of(plant, [[0]], [[1e-3]], weights=[1e-6]), drive([0.5] * 2), FINE)
    assert runs.outcomes == (Outcome.DONE,)
    assert runs.method == "Dormand-Prince 5(4)"
    assert runs.plant[0, -1, -1, 0] == pytest.approx(5e-4, abs=1e-6)
    assert runs.evaluations > 8 * 7 * 400 + 8 * 4000  # both others were tried


def test_a_trim_on_a_limit_is_not_left_by_rounding() -> None:
    plant = plain(lambda t, x, u: [-2.0 * (x[0] - 0.3) + u[0] * 0.0])
    rig = rig_of(plant, [[-2]], [[0]], x=[0.3 + 1e-8], envelope={"x": Interval(0.3 + 2e-8, 1.0)})
    assert run_alone(rig, drive([0.0] * 4), FINE).exits == (None,)


def test_weights_below_rounding_end_in_noise_not_in_a_stall() -> None:
    plant = plain(lambda t, x, u: [-2.0 * (x[0] - 1e6) + u[0]])
    rig = rig_of(plant, [[-2]], [[1]], x=[1e6], weights=[1e-12])
    runs = run_alone(rig, drive([1.0] * 2), FINE)
    assert runs.outcomes == (Outcome.DONE,)
    assert np.abs(runs.error).max() < 1e-7


def test_long_drives_are_taken_in_narrower_batches(monkeypatch: pytest.MonkeyPatch) -> None:
    rig = rig_of(lag(), [[-2]], [[1]])
    drives = [drive([0.01 * index] * 3) for index in range(40)]
    whole = run(rig, drives, FINE)
    monkeypatch.setattr(simulate, "SAMPLES", 200)
    parts = run(rig, drives, FINE)
    assert parts.evaluations != whole.evaluations
    assert parts.model == pytest.approx(whole.model, abs=1e-15)
    assert parts.plant == pytest.approx(whole.plant, abs=1e-6)


def test_what_does_not_fit_together_is_refused() -> None:
    rig = rig_of(lag(), [[-2]], [[1]])
    with pytest.raises(ValueError, match="share every, number of intervals and course"):
        run(rig, [drive([1.0]), drive([1.0, 2.0])], FINE)
    with pytest.raises(ValueError, match="no drive"):
        run(rig, [], FINE)
    with pytest.raises(ValueError, match="weights must be 1 positive"):
        rig_of(lag(), [[-2]], [[1]], weights=[0.0])
    with pytest.raises(ValueError, match="no state or output 'z'"):
        rig_of(lag(), [[-2]], [[1]], signals=("z",))
    with pytest.raises(ValueError, match="at least 4 nodes"):
        Fidelity(2, 1e-3)
