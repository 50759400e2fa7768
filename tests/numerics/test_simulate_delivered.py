"""Models that were handed over beside the plant: sampled, smaller, anonymous, with dead times and angles."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from linear_plants import linear_plant, local, rig
from scipy.linalg import expm

from linverify.core.case import Course, Interval
from linverify.core.delivered import Delays
from linverify.core.drive import Drive
from linverify.core.plant import Plant
from linverify.numerics.hold import straight
from linverify.numerics.independent import run_independent
from linverify.numerics.sampled import sampled
from linverify.numerics.simulate import Fidelity, Rig, Runs, run, run_alone

A = [[0.0, 1.0], [-9.0, -0.6]]
B = [[0.0], [1.0]]
C, D = [[1.0, 0.2]], [[0.5]]
PLANT = linear_plant(A, B, C, D)
FINE = Fidelity(4, 1e-4)
VALUES = np.random.default_rng(0).uniform(-1, 1, (9, 1))


def drive(values: object = VALUES, every: float = 0.2, course: Course = "held", **offsets: float) -> Drive:
    rows = np.asarray(values, dtype=float)
    rows = rows.reshape(len(rows), -1)
    return Drive(every, tuple(f"u{j + 1}" for j in range(rows.shape[1])), rows, course, offsets)


def both(one: Rig, what: Drive, fidelity: Fidelity = FINE) -> tuple[Runs, Runs]:
    return run_alone(one, what, fidelity), run_independent(one, what, fidelity)


# sampled models


@pytest.mark.parametrize("course", ["held", "straight"])
@pytest.mark.parametrize("steps", [1, 3, 20])
def test_a_sampled_model_equals_a_linear_plant_at_its_instants(course: Course, steps: int) -> None:
    model = sampled(local(PLANT, A, B, C, D), 0.2 / steps, course)
    one = rig(PLANT, model, ("y1",))
    for runs in both(one, drive(course=course, x1=0.3)):
        assert runs.times.shape == (9, steps + 1)
        assert runs.times[1] == pytest.approx(0.2 + 0.2 * np.arange(steps + 1) / steps)
        assert np.abs(runs.error).max() < 2e-6
        assert np.abs(runs.plant).max() > 0.3


def test_a_sampled_model_is_its_own_recursion_at_right_hand_values() -> None:
    """Whatever its matrices are: x[k+1] = F x[k] + G u[k], y[k] = H x[k] + J u[k]."""
    F, G, H, J = np.array([[0.5, 0.1], [-0.2, 0.7]]), np.array([0.3, 1.0]), np.array([1.0, -1.0]), 2.0
    model = local(PLANT, F, G.reshape(2, 1), [H], [[J]], step=0.1)
    for runs in both(rig(PLANT, model, ("y1",)), drive()):
        x, expected = np.zeros(2), []
        inputs = np.repeat(VALUES[:, 0], 2)
        for value in inputs:
            expected.append(H @ x + J * value)
            x = F @ x + G * value
        seen = runs.model[0, :, :-1, 0].ravel()
        assert seen == pytest.approx(expected, abs=1e-14)
        assert runs.model[0, :-1, -1, 0] == pytest.approx(expected[2::2], abs=1e-14)
        assert runs.model[0, -1, -1, 0] == pytest.approx(H @ x + J * inputs[-1], abs=1e-14)
        assert runs.plant[0, 1, 0, 0] == runs.plant[0, 0, -1, 0]


def test_states_of_a_model_sampled_for_straight_inputs_are_read_as_the_plants() -> None:
    model = sampled(local(PLANT, A, B, C, D), 0.1, "straight")
    what = drive(course="straight")
    blind = run_alone(rig(PLANT, model, ("x2",)), what, FINE)
    assert np.abs(blind.error).max() > 0.01
    ahead = straight(np.array(A), np.array(B), 0.1)[2]
    for runs in both(rig(PLANT, replace(model, ahead=ahead), ("x2",)), what):
        assert np.abs(runs.error).max() < 2e-6


def test_a_model_sampled_otherwise_than_driven_shows_its_error() -> None:
    model = sampled(local(PLANT, A, B, C, D), 0.1, "held")
    runs = run_alone(rig(PLANT, model, ("y1",)), drive(course="straight"), FINE)
    assert np.abs(runs.error).max() > 1e-3


def test_steps_that_do_not_fit_are_refused() -> None:
    model = sampled(local(PLANT, A, B, C, D), 0.15, "held")
    with pytest.raises(ValueError, match="do not fit a local model that steps every"):
        run_alone(rig(PLANT, model, ("y1",)), drive(), FINE)


def test_an_exit_between_the_instants_of_a_coarse_model_is_found_and_was_predicted() -> None:
    plant = linear_plant([[0.0]], [[1.0]])
    model = local(plant, [[1.0]], [[1.0]], step=1.0)
    one = rig(plant, model, ("x1",), envelope={"x1": Interval(-9, 1.5)})
    for runs in both(one, drive([1.0] * 4, 1.0)):
        left = runs.exits[0]
        assert left is not None
        assert left.time == pytest.approx(1.5, abs=1e-5)
        assert left.model_way == pytest.approx(1.0, abs=1e-5)
        assert np.isfinite(runs.plant[0, :, :, 0]).sum() == 3  # instants 0, 1 and 1 again


@pytest.mark.parametrize("steps", [1, 3, 20])
def test_the_halved_grid_halves_steps_though_instants_stay(steps: int) -> None:
    """A grid that did not change where samples are would hide the error of integration from itself."""
    one = rig(PLANT, sampled(local(PLANT, A, B, C, D), 0.2 / steps, "held"), ("y1",), weight=1e3)
    coarse, fine = Fidelity(4, 1.0), Fidelity(4, 1.0).finer()
    first, second = run_alone(one, drive(), coarse), run_alone(one, drive(), fine)
    assert first.times.shape == second.times.shape
    assert second.evaluations >= 1.8 * first.evaluations
    exact = run_alone(one, drive(), Fidelity(64, 1e-9))
    off = [np.abs(runs.plant - exact.plant).max() for runs in (first, second)]
    assert 0.0 < off[1] < 0.2 * off[0]


# fewer states, other orders, no names


def test_reordered_states_and_inputs_are_no_change() -> None:
    plant = linear_plant(A, [[0.0, 0.3], [1.0, 0.0]])
    right = local(plant, A, [[0.0, 0.3], [1.0, 0.0]])
    turned = local(
        plant, [[-0.6, -9.0], [1.0, 0.0]], [[0.0, 1.0], [0.3, 0.0]], [[0.0, 1.0], [1.0, 0.0]],
        states=("x2", "x1"), inputs=("u2", "u1"),
    )  # fmt: skip
    what = drive(np.random.default_rng(1).uniform(-1, 1, (9, 2)), x1=0.2, x2=-0.4)
    for first, second in zip(
        both(rig(plant, right, ("x1", "x2")), what), both(rig(plant, turned, ("x1", "x2")), what), strict=True
    ):
        assert first.model == pytest.approx(second.model, abs=1e-14)
        assert np.abs(second.error).max() < 1e-6


def test_offsets_of_states_that_the_model_lacks_move_the_plant_only() -> None:
    plant = linear_plant([[-1.0, 0.0], [0.0, -2.0]], [[1.0], [0.0]])
    model = local(plant, [[-1.0]], [[1.0]], states=("x1",))
    for runs in both(rig(plant, model, ("x1",)), drive([0.0] * 3, x1=0.1, x2=0.7)):
        assert np.abs(runs.error).max() < 1e-6
        assert runs.model[0, -1, -1, 0] == pytest.approx(0.1 * np.exp(-0.6), abs=1e-12)


def test_an_anonymous_model_is_compared_by_its_outputs() -> None:
    turn = np.array([[2.0, 1.0], [0.5, -3.0]])
    back = np.linalg.inv(turn)
    model = local(PLANT, turn @ A @ back, turn @ B, C @ back, D, states=("state 1", "state 2"), anonymous=True)
    for runs in both(rig(PLANT, model, ("y1",)), drive()):
        assert np.abs(runs.error).max() < 2e-6
    with pytest.raises(ValueError, match="the local model has no state or output 'x1'"):
        rig(PLANT, model, ("x1",))


def test_a_limit_on_what_the_model_lacks_is_left_without_a_word_about_the_model() -> None:
    plant = linear_plant([[-1.0, 0.0], [0.0, 0.0]], [[1.0], [1.0]], [[1.0, 0.0]])
    model = local(plant, [[-1.0]], [[1.0]], states=("x1",))
    one = rig(plant, model, ("x1",), envelope={"x2": Interval(-1, 1)})
    for runs in both(one, drive([1.0] * 8)):
        left = runs.exits[0]
        assert left is not None
        assert left.time == pytest.approx(1.0, abs=1e-5)
        assert np.isnan(left.model_way)


# dead times


LAG = linear_plant([[-2.0]], [[1.0, 3.0]], [[1.0]], [[0.0, 0.0]])
LAG_MODEL = local(LAG, [[-2.0]], [[1.0, 3.0]])


def rising(t: np.ndarray, late: float) -> np.ndarray:
    return np.where(t > late, 0.5 * (1 - np.exp(-2 * np.maximum(t - late, 0.0))), 0.0)


@pytest.mark.parametrize("late", [(0.2, 0.0), (0.05, 0.13), (0.37, 0.37), (0.1, 5.0)])
def test_dead_times_of_inputs_against_the_closed_form(late: tuple[float, float]) -> None:
    one = rig(LAG, LAG_MODEL, ("x1", "y1"), delays=Delays({"u1": late[0], "u2": late[1]}))
    for runs in both(one, drive(np.ones((7, 2)))):
        exact = rising(runs.times, late[0]) + 3.0 * rising(runs.times, late[1])
        assert runs.times.shape[0] == 7
        assert runs.model[0, :, :, 0] == pytest.approx(exact, abs=1e-13)
        assert runs.plant[0, :, :, 0] == pytest.approx(exact, abs=2e-6)
        assert runs.plant[1] == pytest.approx(runs.plant[0], abs=1e-12)


def test_a_dead_time_with_straight_courses() -> None:
    """u = t from the first instant on; the lag answers 0.5 s - 0.25 (1 - exp(-2 s)), s = t - dead time."""
    ramp = np.stack([0.2 * np.arange(1, 8), np.zeros(7)], axis=1)
    one = rig(LAG, LAG_MODEL, ("x1",), delays=Delays({"u1": 0.27}))
    for runs in both(one, drive(ramp, course="straight")):
        s = np.maximum(runs.times - 0.27, 0.0)
        exact = 0.5 * s - 0.25 * (1 - np.exp(-2 * s))
        assert runs.model[0, :, :, 0] == pytest.approx(exact, abs=1e-13)
        assert runs.plant[0, :, :, 0] == pytest.approx(exact, abs=2e-6)


def test_no_step_crosses_a_delayed_change() -> None:
    """At a fidelity of one step an interval, a step over the jump would be off by a tenth."""
    late, every = 0.6, 1.0
    one = rig(LAG, LAG_MODEL, ("x1",), delays=Delays({"u1": late}), weight=1e3)
    runs = run_alone(one, Drive(every, ("u1",), np.ones((3, 1))), Fidelity(4, 1.0))
    assert np.abs(runs.error).max() < 2e-3


def test_dead_times_of_a_difference_equation_and_of_a_sampled_model() -> None:
    plant = linear_plant([[0.9]], [[0.1]], step=0.1)
    one = rig(plant, local(plant, [[0.9]], [[0.1]]), ("x1",), delays=Delays({"u1": 0.4}))
    for runs in both(one, drive([1.0, 0.0, 0.0], 0.3)):
        expected = np.zeros(10)
        for k in range(9):
            expected[k + 1] = 0.9 * expected[k] + (0.1 if 4 <= k < 7 else 0.0)
        assert runs.plant[0, -1, -1, 0] == pytest.approx(expected[9], abs=1e-15)
        assert runs.error == pytest.approx(0.0, abs=1e-15)
        assert np.interp(runs.times.ravel(), 0.1 * np.arange(10), expected) == pytest.approx(runs.plant[0].ravel())
    model = sampled(local(PLANT, A, B, C, D), 0.05, "held")
    for runs in both(rig(PLANT, model, ("y1",), delays=Delays({"u1": 0.35})), drive()):
        assert np.abs(runs.error).max() < 2e-6
        assert np.abs(runs.plant).max() > 0.2
    with pytest.raises(ValueError, match=r"the dead time 0.07 of u1 does not fit a local model that steps every 0.05"):
        run_alone(rig(PLANT, model, ("y1",), delays=Delays({"u1": 0.07})), drive(), FINE)


def test_a_dead_time_of_an_output_is_told_and_its_last_sample_is_a_node() -> None:
    one = rig(LAG, LAG_MODEL, ("x1", "y1"), delays=Delays(outputs={"y1": 0.33}))
    for runs in both(one, drive(np.ones((5, 2)))):
        assert runs.late == (0.0, 0.33)
        assert np.abs(runs.times - (1.0 - 0.33)).min() < 1e-12
        assert np.abs(runs.arrives(1) - 1.0).min() < 1e-12


def test_a_model_without_the_dead_time_is_caught() -> None:
    """Both sides get the declared dead time; a plant that has another one of its own differs."""
    one = rig(LAG, LAG_MODEL, ("x1",), delays=Delays({"u1": 0.3}))
    other = rig(LAG, LAG_MODEL, ("x1",))
    what = Drive(0.2, ("u1",), np.ones((5, 1)))
    assert np.abs(run_alone(one, what, FINE).plant - run_alone(other, what, FINE).model[:, :, :1]).max() > 0.1


def test_a_batch_equals_its_drives_alone_with_dead_times() -> None:
    one = rig(LAG, LAG_MODEL, ("x1", "y1"), delays=Delays({"u1": 0.13, "u2": 0.5}, {"y1": 0.07}))
    drives = [drive(values) for values in np.random.default_rng(4).uniform(-1, 1, (5, 6, 2))]
    batch = run(one, drives, FINE)
    for column, what in enumerate(drives):
        alone = run_alone(one, what, FINE)
        assert batch.model[..., column] == pytest.approx(alone.model[..., 0], abs=1e-13)
        assert batch.plant[..., column] == pytest.approx(alone.plant[..., 0], abs=1e-5)


# angles


def test_a_wrapped_angle_is_compared_modulo_a_turn() -> None:
    plant = Plant(
        states={"heading": "deg"},
        inputs={"u1": "deg/s"},
        outputs={"shown": "deg"},
        dynamics=lambda t, x, u, p: np.stack([u[0] + 0.0 * x[0]]),
        measurement=lambda t, x, u, p: np.stack([np.mod(x[0] + 180.0, 360.0) - 180.0]),
    )
    model = local(plant, [[0.0]], [[1.0]], [[1.0]])
    what = drive([90.0] * 12, 0.5)
    plain = run_alone(rig(plant, model, ("shown",)), what, FINE)
    assert np.abs(plain.error).max() > 359.0
    for runs in both(rig(plant, model, ("shown",), turns={"shown": 360.0}), what):
        assert np.abs(runs.error).max() < 1e-4


def test_matrices_of_the_tests_are_those_of_the_exponential() -> None:
    """The sampled models above are right by an exponential of their own."""
    whole = expm(np.block([[np.array(A), np.array(B)], [np.zeros((1, 3))]]) * 0.1)
    model = sampled(local(PLANT, A, B, C, D), 0.1, "held")
    assert np.abs(np.hstack([model.A, model.B]) - whole[:2]).max() < 1e-14
