"""Freezing and settling against hand calculations, and the refusals."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from linear_plants import linear_plant, local

from linverify.core.delivered import DeliveredModel, Keep
from linverify.core.errors import Place
from linverify.core.model import LocalModel
from linverify.numerics.placed import placed
from linverify.numerics.reduce import reduced, restricted

PLACE = Place("specs/two.yaml")
A = [[-1.0, 2.0], [3.0, -20.0]]
B = [[0.0], [4.0]]
C = [[1.0, 0.0], [0.5, 5.0]]
D = [[0.0], [0.1]]


def model(A: object = A, B: object = B, C: object = C, D: object = D, **more: object) -> LocalModel:
    plant = linear_plant(A, B, C, D, states={"slow": "", "fast": ""})
    return local(plant, A, B, C, D, **more)


def keep(how: str, *states: str, outputs: tuple[str, ...] = ("y1", "y2")) -> Keep:
    return Keep(states or ("slow",), ("u1",), outputs, how, PLACE)  # type: ignore[arg-type]


def close(found: object, expected: object) -> None:
    assert found == pytest.approx(np.array(expected))


def made(one: LocalModel, how: Keep) -> LocalModel:
    found = reduced(one, how)
    assert found.model is not None, found.refusal
    return found.model


def test_freezing_keeps_rows_and_columns() -> None:
    found = made(model(), keep("freeze"))
    assert found.states.names == ("slow",)
    assert (found.A.tolist(), found.B.tolist()) == ([[-1.0]], [[0.0]])
    assert (found.C.tolist(), found.D.tolist()) == ([[1.0], [0.5]], [[0.0], [0.1]])


def test_settling_solves_for_the_fast_state() -> None:
    """fast = (3 slow + 4 u) / 20, so slow' = (-1 + 0.3) slow + 0.4 u, y2 = (0.5 + 0.75) slow + 1.1 u."""
    found = made(model(), keep("settle"))
    close(found.A, [[-0.7]])
    close(found.B, [[0.4]])
    close(found.C, [[1.0], [1.25]])
    close(found.D, [[0.0], [1.1]])
    close(made(model(), keep("settle", outputs=("y2",))).C, [[1.25]])


def test_settling_keeps_the_static_gain() -> None:
    rng = np.random.default_rng(3)
    A = rng.normal(size=(5, 5))
    A[3:, 3:] = [[-60.0, 5.0], [-4.0, -80.0]]
    plant = linear_plant(A, rng.normal(size=(5, 2)), rng.normal(size=(3, 5)), rng.normal(size=(3, 2)))
    whole = local(plant, A, plant_B := rng.normal(size=(5, 2)), plant_C := rng.normal(size=(3, 5)))
    found = made(whole, Keep(("x1", "x2", "x3"), ("u1", "u2"), ("y1", "y2", "y3"), "settle", PLACE))
    static = -plant_C @ np.linalg.solve(A, plant_B)
    assert found.D - found.C @ np.linalg.solve(found.A, found.B) == pytest.approx(static, rel=1e-9)


def test_settling_a_difference_equation_asks_for_no_change_from_step_to_step() -> None:
    """fast = 0.1 fast + 0.3 slow + 0.6 u means fast = (0.3 slow + 0.6 u) / 0.9."""
    one = model([[0.98, 0.03], [0.3, 0.1]], [[0.0], [0.6]], step=0.1)
    found = made(one, keep("settle"))
    close(found.A, [[0.98 + 0.03 / 3.0]])
    close(found.B, [[0.02]])
    assert found.step == 0.1


@pytest.mark.parametrize(
    "A, told",
    [
        (
            [[-1.0, 0.0], [0.0, -2.9]],
            "decays only 2.9 times as fast as what is kept moves (pole -2.9 left out, -1 kept)",
        ),
        ([[-1.0, 0.0], [0.0, 30.0]], "not stable (pole 30)"),
        ([[-1.0, 0.0], [0.0, 0.0]], "it integrates (a pole at the origin)"),
    ],
)
def test_settling_is_refused(A: object, told: str) -> None:
    found = reduced(model(A), keep("settle"))
    assert found.model is None
    assert told in found.refusal
    assert made(model(A), keep("freeze")).A.tolist() == [[-1.0]]
    assert reduced(model([[-1.0, 0.0], [0.0, -3.1]]), keep("settle")).refusal == ""


def test_what_rings_for_long_does_not_settle_however_fast_it_rings() -> None:
    A = np.array([[-1.0, 0.0, 0.0], [0.0, -0.5, 50.0], [0.0, -50.0, -0.5]])
    plant = linear_plant(A, np.ones((3, 1)), np.ones((1, 3)))
    found = reduced(local(plant, A, np.ones((3, 1)), np.ones((1, 3))), Keep(("x1",), ("u1",), ("y1",), "settle", PLACE))
    assert "pole -0.5 +- 50j left out, -1 kept" in found.refusal


def test_slow_and_unstable_steps_are_told_too() -> None:
    assert "not stable (pole" in reduced(model([[0.9, 0.0], [0.0, -1.2]], step=0.1), keep("settle")).refusal
    assert "decays only 2 times" in reduced(model([[0.9, 0.0], [0.0, 0.81]], step=0.1), keep("settle")).refusal
    assert reduced(model([[0.9, 0.0], [0.0, 0.0]], step=0.1), keep("settle")).refusal == ""


@pytest.mark.parametrize("how", ["freeze", "settle"])
def test_errors_of_entries_cover_what_wrong_entries_would_give(how: str) -> None:
    rng = np.random.default_rng(5)
    sizes = {name: 1e-6 * np.abs(getattr(model(), name)) for name in "ABCD"}
    exact = made(model(), keep(how))
    found = made(replace(model(), errors=sizes), keep(how))
    reached = {name: np.zeros_like(getattr(found, name)) for name in "ABCD"}
    for _ in range(200):
        moved = {name: getattr(model(), name) + rng.choice([-1, 1], size.shape) * size for name, size in sizes.items()}
        other = made(replace(model(), **moved), keep(how))
        for name in "ABCD":
            shift = np.abs(getattr(other, name) - getattr(exact, name))
            assert np.all(shift <= found.errors[name] * (1 + 1e-4) + 1e-15)
            reached[name] = np.maximum(reached[name], shift)
    assert reached["A"] == pytest.approx(found.errors["A"], rel=0.01)


def test_restricting_keeps_all_states() -> None:
    found = restricted(model(), ("u1",), ("y2",))
    assert found.states.names == ("slow", "fast")
    assert found.C.tolist() == [[0.5, 5.0]]


# delivered models by name


def delivered(**changes: object) -> DeliveredModel:
    right = DeliveredModel(
        "m.json", PLACE, np.array([[-20.0, 3.0], [2.0, -1.0]]), np.array([[4.0], [0.0]]), np.array([[5.0, 0.5]]),
        np.array([[0.1]]), ("fast", "slow"), ("u1",), ("y2",),
    )  # fmt: skip
    return replace(right, **changes)


def test_delivered_order_means_nothing() -> None:
    found = placed(delivered(), model().at)
    assert (found.A.tolist(), found.B.tolist()) == (A, B)
    assert (found.C.tolist(), found.D.tolist()) == ([[0.5, 5.0]], [[0.1]])
    assert found.outputs.names == ("y2",)


def test_anonymous_states_keep_their_order_and_no_plant_name() -> None:
    found = placed(delivered(states=None), model().at)
    assert found.anonymous
    assert found.A.tolist() == [[-20.0, 3.0], [2.0, -1.0]]
    assert not set(found.states.names) & {"slow", "fast"}


@pytest.mark.parametrize(
    "changes, told",
    [
        ({"states": ("fast", "slowly")}, "no state slowly; did you mean slow"),
        ({"inputs": ("u7",)}, "no input u7"),
        ({"states": ("fast", "fast")}, "named twice"),
        ({"B": np.zeros((3, 1))}, r"B has shape \(3, 1\)"),
    ],
)
def test_what_does_not_fit_is_told(changes: dict[str, object], told: str) -> None:
    with pytest.raises(ValueError, match=told):
        placed(delivered(**changes), model().at)
