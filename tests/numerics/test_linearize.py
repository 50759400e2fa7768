"""Local models: closed forms, names, equilibria, difference equations, exact Jacobians, and what fails."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from random_functions import scattered
from truth import mechanics

from linverify.core.bound import BoundPlant
from linverify.core.case import SlopeAsk
from linverify.core.errors import PlantError
from linverify.core.model import OperatingPoint
from linverify.core.outcome import Outcome
from linverify.core.plant import Plant
from linverify.numerics.linearize import Linearization, linearize, row_names

G, LENGTH, FRICTION = 9.81, 0.5, 0.3


def swing(t: float, x: Any, u: Any, p: Any) -> Any:
    return np.stack([x[1], -G / LENGTH * np.sin(x[0]) - FRICTION * x[1] + p["gain"] * u[0]])


def swing_jacobian(t: float, x: Any, u: Any, p: Any) -> Any:
    A = [[0.0, 1.0], [-G / LENGTH * np.cos(x[0]), -FRICTION]]
    return A, [[0.0], [p["gain"]]], [[2.0, 0.0], [0.0, 1.0]], [[0.0], [0.0]]


SWING = Plant(
    states={"angle": "rad", "rate": "rad/s"},
    inputs={"torque": "N*m"},
    outputs={"twice": "rad", "rate": "rad/s"},
    parameters={"gain": 2.0},
    dynamics=swing,
    measurement=lambda t, x, u, p: np.stack([2.0 * x[0], x[1]]),
)


def local(
    plant: Plant,
    x: Any,
    u: Any,
    *,
    drift: Any = None,
    ask: SlopeAsk | None = None,
    nominal: Any = None,
    accuracy: float = 1e-8,
    parameters: Any = None,
) -> Linearization:
    bound = BoundPlant(plant, parameters or {})
    x, u = np.array(x, dtype=float), np.array(u, dtype=float)
    spread = np.linspace(-0.01, 0.01, 7)
    if not plant.domain:
        bound.detect(0.0, x[:, np.newaxis] + spread, u[:, np.newaxis] + spread)
    rest = np.zeros(len(x)) if drift is None else np.array(drift, dtype=float)
    point = OperatingPoint(x, u, np.zeros(bound.k), rest, 0.0, bound.states, bound.inputs, bound.outputs)
    return linearize(bound, point, nominal or {}, {}, ask or SlopeAsk(), accuracy=accuracy)


def held(angle: float) -> list[float]:
    return [G / LENGTH * np.sin(angle) / 2.0]


def test_blocks_names_and_errors() -> None:
    found = local(SWING, [0.4, 0.0], held(0.4))
    assert (found.outcome, found.message, found.gaps) == (Outcome.DONE, "", ())
    A, B, C, D = swing_jacobian(0.0, np.array([0.4, 0.0]), None, {"gain": 2.0})
    model = found.model
    for name, exact in zip("ABCD", (A, B, C, D), strict=True):
        block, error = getattr(model, name), model.errors[name]
        assert block.shape == error.shape == np.shape(exact)
        assert np.all(np.abs(block - exact) <= error)
        assert np.all(error < 1e-10)
        assert not block.flags.writeable
    assert (model.states.names, model.inputs.names, model.outputs.names) == (
        ("angle", "rate"),
        ("torque",),
        ("twice", "rate"),
    )
    assert model.step is None
    assert set(found.noise) == {"angle_rate", "rate_rate", "twice", "rate"}
    assert found.jacobian_source == "central differences, extrapolated"


def test_parameters_reach_the_model() -> None:
    found = local(SWING, [0.0, 0.0], [0.0], parameters={"gain": 5.0})
    assert found.model.B[1, 0] == pytest.approx(5.0, rel=1e-12)


def test_a_point_that_is_no_equilibrium_is_refused() -> None:
    found = local(SWING, [0.4, 0.0], [0.0])
    assert found.outcome is Outcome.NOT_EQUILIBRIUM
    assert found.model is None
    assert found.message == (
        "rate_rate is off by -7.64039 rad/s^2, 7.64 nominal sizes of rate; at most 1e-8 is an equilibrium"
    )


def test_the_accuracy_of_the_trim_is_the_limit() -> None:
    u = np.array(held(0.4)) + 1e-6
    assert local(SWING, [0.4, 0.0], u).outcome is Outcome.NOT_EQUILIBRIUM
    assert local(SWING, [0.4, 0.0], u, accuracy=1e-5).outcome is Outcome.DONE


def test_a_drifting_point_is_linearized() -> None:
    """A steady climb: the altitude moves, the rest rests."""
    plant = Plant(
        states={"altitude": "m", "speed": "m/s"},
        inputs={"thrust": "N"},
        dynamics=lambda t, x, u, p: np.stack([x[1], u[0] - x[1] ** 2]),
    )
    found = local(plant, [100.0, 3.0], [9.0], drift=[3.0, 0.0])
    assert found.outcome is Outcome.DONE
    np.testing.assert_allclose(found.model.A, [[0.0, 1.0], [0.0, -6.0]], atol=1e-9)
    assert local(plant, [100.0, 3.0], [9.0]).outcome is Outcome.NOT_EQUILIBRIUM


def test_a_difference_equation() -> None:
    plant = Plant(
        states={"level": "m"},
        inputs={"flow": "m/s"},
        dynamics=lambda k, x, u, p: np.stack([x[0] + 0.1 * (u[0] - x[0] ** 2)]),
        step=0.1,
    )
    found = local(plant, [2.0], [4.0])
    assert found.outcome is Outcome.DONE
    assert (found.model.A[0, 0], found.model.B[0, 0]) == pytest.approx((0.6, 0.1), abs=1e-11)
    assert found.model.step == 0.1
    assert row_names(BoundPlant(plant)) == ("level_next", "level")
    assert local(plant, [2.0], [4.5]).outcome is Outcome.NOT_EQUILIBRIUM
    drifting = local(plant, [2.0], [4.5], drift=[0.05])
    assert drifting.outcome is Outcome.DONE


def test_a_row_never_shares_its_name_with_an_output() -> None:
    plant = replace(SWING, outputs={"twice": "rad", "angle_rate": "rad/s"})
    assert row_names(BoundPlant(plant)) == ("rate of angle", "rate_rate", "twice", "angle_rate")


def test_an_exact_jacobian_is_used_when_it_agrees() -> None:
    found = local(replace(SWING, jacobian=swing_jacobian), [0.4, 0.0], held(0.4))
    assert found.outcome is Outcome.DONE
    assert found.model.A[1, 0] == -G / LENGTH * np.cos(0.4)  # to the last bit
    assert found.jacobian_source == "the plant's own Jacobian, cross-checked by differences"
    assert found.cross_check == ()
    assert found.model.errors["A"][1, 0] > 0


@pytest.mark.parametrize("off", [1e-8, 1e-3, 1.0])
def test_a_wrong_exact_jacobian_is_named_entry_by_entry(off: float) -> None:
    def wrong(t: float, x: Any, u: Any, p: Any) -> Any:
        A, B, C, _ = swing_jacobian(t, x, u, p)
        return A, B, C, [[off], [0.0]]

    found = local(replace(SWING, jacobian=wrong), [0.4, 0.0], held(0.4))
    assert found.outcome is Outcome.WRONG_JACOBIAN
    (mismatch,) = found.cross_check
    assert (mismatch.row, mismatch.column, mismatch.claimed) == ("twice", "torque", off)
    assert found.message.startswith(
        f"the plant's own Jacobian gives d twice / d torque = {off:.9g}, differences give 0"
    )
    assert found.model.D[0, 0] == 0.0  # the measured one stands in the record


def test_the_worst_wrong_entry_comes_first() -> None:
    def zeros(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.zeros((2, 2)), np.zeros((2, 1)), np.zeros((2, 2)), np.zeros((2, 1))

    found = local(replace(SWING, jacobian=zeros), [0.4, 0.0], held(0.4))
    assert len(found.cross_check) == 6
    named = {(mismatch.row, mismatch.column) for mismatch in found.cross_check[:4]}
    assert ("rate_rate", "angle") in named


@pytest.mark.parametrize(
    ("answer", "word"),
    [
        ((np.zeros((2, 2)),), "must return A, B, C, D"),
        ((np.zeros((2, 1)), np.zeros((2, 1)), np.zeros((2, 2)), np.zeros((2, 1))), "a A of shape"),
        ((np.full((2, 2), np.nan), np.zeros((2, 1)), np.zeros((2, 2)), np.zeros((2, 1))), "not finite"),
        (("x", "y", "z", "w"), "no matrix of real numbers"),
    ],
)
def test_a_jacobian_of_another_form_is_told(answer: Any, word: str) -> None:
    plant = replace(SWING, jacobian=lambda t, x, u, p: answer)
    with pytest.raises(PlantError, match=word):
        local(plant, [0.4, 0.0], held(0.4))


def test_a_jacobian_that_raises_is_told() -> None:
    def broken(t: float, x: Any, u: Any, p: Any) -> Any:
        raise KeyError("mass")

    with pytest.raises(PlantError, match=r"jacobian raised KeyError.*angle = 0.4 rad"):
        local(replace(SWING, jacobian=broken), [0.4, 0.0], held(0.4))


def clipped(edge: float) -> Plant:
    """The input saturates `edge` nominal sizes (of 2) above the point."""
    limit = 1.0 + 2.0 * edge
    return replace(
        SWING,
        dynamics=lambda t, x, u, p: np.stack([x[1], -3.0 * x[0] + 2.0 * np.minimum(u[0], limit)]),
        nominal={"torque": 2.0},
    )


@pytest.mark.parametrize("edge", [0.0, 1e-9, 5e-5, -5e-5])
def test_a_saturation_edge_on_the_point_has_no_slope(edge: float) -> None:
    level = min(1.0, 1.0 + 2.0 * edge)
    found = local(clipped(edge), [2.0 * level / 3.0, 0.0], [1.0], nominal={"torque": 2.0})
    assert found.outcome is Outcome.NOT_DIFFERENTIABLE
    assert "d rate_rate / d torque" in found.message
    assert "differ by 100 %" in found.message
    assert found.largest_entry == "d rate_rate / d torque"
    assert found.largest == pytest.approx(1.0, rel=1e-3)
    assert found.model.B[1, 0] == pytest.approx(1.0, rel=1e-3)
    assert found.model.errors["B"][1, 0] >= 1.0


def test_beside_the_edge_the_slope_holds_and_the_edge_is_told() -> None:
    found = local(clipped(1e-3), [2.0 / 3.0, 0.0], [1.0], nominal={"torque": 2.0})
    assert found.outcome is Outcome.DONE
    (corner,) = found.gaps
    assert (corner.row, corner.column, corner.near) == ("rate_rate", "torque", False)
    assert (corner.distance, corner.place) == pytest.approx((1e-3, 1.002), rel=1e-6)
    assert found.model.B[1, 0] == pytest.approx(2.0, rel=1e-10)
    assert found.model.errors["B"][1, 0] < 1e-9


def test_an_input_that_moves_down_only() -> None:
    found = local(clipped(0.0), [2.0 / 3.0, 0.0], [1.0], ask=SlopeAsk(side={"torque": "down"}))
    assert found.outcome is Outcome.DONE
    assert found.model.B[1, 0] == pytest.approx(2.0, rel=1e-10)
    assert found.notes == ("slopes by torque are taken from below only: as `side` says",)
    up = local(clipped(0.0), [2.0 / 3.0, 0.0], [1.0], ask=SlopeAsk(side={"torque": "up"}))
    assert up.model.B[1, 0] == pytest.approx(0.0, abs=1e-10)


def test_at_the_edge_of_the_domain_a_note_says_so() -> None:
    plant = Plant(
        states={"level": "m"},
        inputs={"flow": "1/s"},
        dynamics=lambda t, x, u, p: np.stack([u[0] - x[0] * np.exp(x[0])]),
        domain={"level": (0.0, None)},
    )
    found = local(plant, [0.0], [0.0])
    assert found.outcome is Outcome.DONE
    assert found.notes == ("slopes by level are taken from above only: the domain ends there",)
    assert found.model.A[0, 0] == pytest.approx(-1.0, abs=1e-8)


def test_a_small_corner_passes_with_the_mean_of_both_sides() -> None:
    plant = replace(SWING, dynamics=lambda t, x, u, p: np.stack([x[1], -3.0 * x[0] + 0.06 * np.abs(x[0]) + u[0]]))
    found = local(plant, [0.0, 0.0], [0.0])
    assert found.outcome is Outcome.DONE
    assert found.largest == pytest.approx(0.12 / 3.06, rel=1e-2)
    assert found.model.A[1, 0] == pytest.approx(-3.0, abs=1e-6)
    assert found.model.errors["A"][1, 0] >= 0.06
    strict = local(plant, [0.0, 0.0], [0.0], ask=SlopeAsk(slope_gap=0.03))
    assert strict.outcome is Outcome.NOT_DIFFERENTIABLE


def test_a_corner_counts_against_the_largest_term_of_its_row() -> None:
    """The same corner, with its column of a size at which it is drowned by another term."""

    def f(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([x[1], -100.0 * x[1] + np.abs(x[0])])

    plant = replace(SWING, dynamics=f)
    assert local(plant, [0.0, 0.0], [0.0]).outcome is Outcome.DONE
    wide = local(plant, [0.0, 0.0], [0.0], nominal={"angle": 10.0})
    assert wide.outcome is Outcome.NOT_DIFFERENTIABLE
    assert wide.largest == pytest.approx(0.2, rel=1e-3)


@pytest.mark.parametrize(
    ("term", "words"),
    [
        (
            lambda x: 0.5 * np.where(x >= 1e-6, 1.0, 0.0),
            "rate_rate jumps by 0.5 rad/s^2, 1e-6 nominal sizes above the point",
        ),
        (lambda x: np.sqrt(np.abs(x)), "the slope grows without bound at the point"),
        (lambda x: np.abs(x), "slopes -4 below and -2 1/s^2 above differ by 50 % at the point, at angle = 0 rad"),
    ],
)
def test_the_message_says_what_is_wrong(term: Any, words: str) -> None:
    plant = replace(SWING, dynamics=lambda t, x, u, p: np.stack([x[1], -3.0 * x[0] + term(x[0]) + u[0]]))
    found = local(plant, [0.0, 0.0], [0.0])
    assert found.outcome is Outcome.NOT_DIFFERENTIABLE
    assert words in found.message


def test_corners_of_outputs_count_too() -> None:
    plant = replace(SWING, measurement=lambda t, x, u, p: np.stack([np.maximum(x[0], 0.4), x[1]]))
    found = local(plant, [0.4, 0.0], held(0.4))
    assert found.outcome is Outcome.NOT_DIFFERENTIABLE
    assert found.message.startswith("d twice / d angle: slopes 0 below and 1 above differ by 100 %")


def test_a_corner_that_noise_may_hide_is_undecided() -> None:
    def f(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([x[1], -3.0 * x[0] + u[0] + 0.02 * (scattered(x[0]) - p["offset"])])

    plant = replace(SWING, dynamics=f, parameters={"offset": 0.0})
    found = local(plant, [0.3, 0.0], [0.9], accuracy=1.0)
    assert found.outcome is Outcome.NOISY
    assert "noise" in found.message


def test_what_fails_next_to_the_point_is_undecided_and_named() -> None:
    def f(t: float, x: Any, u: Any, p: Any) -> Any:
        with np.errstate(invalid="ignore"):
            return np.stack([x[1], np.sqrt(x[0]) ** 3 + u[0]])

    found = local(replace(SWING, dynamics=f), [0.0, 0.0], [0.0])
    assert found.outcome is Outcome.NOT_FINITE
    assert found.model is None
    assert "along angle: dynamics returned nan for rate when called with t = 0 s, angle = -" in found.message


def test_what_raises_next_to_the_point_is_undecided_and_named() -> None:
    def f(t: float, x: Any, u: Any, p: Any) -> Any:
        if np.any(x[0] < 0.0):
            raise ArithmeticError("below the table")
        return np.stack([x[1], -x[0] + u[0]])

    found = local(replace(SWING, dynamics=f), [0.0, 0.0], [0.0])
    assert found.outcome is Outcome.PLANT_RAISED
    assert "ArithmeticError: below the table" in found.message


def test_constant_rows_and_idle_columns_are_zero() -> None:
    plant = Plant(
        states={"idle": "", "moving": ""},
        inputs={"unused": "", "used": ""},
        outputs={"fixed": "", "moving": ""},
        dynamics=lambda t, x, u, p: np.stack([0.0 * x[0], u[1] - x[1]]),
        measurement=lambda t, x, u, p: np.stack([101325.0 + 0.0 * x[0], x[1]]),
    )
    found = local(plant, [3.0, 2.0], [7.0, 2.0])
    assert found.outcome is Outcome.DONE
    np.testing.assert_allclose(found.model.A, [[0.0, 0.0], [0.0, -1.0]], atol=1e-11)
    np.testing.assert_allclose(found.model.B, [[0.0, 0.0], [0.0, 1.0]], atol=1e-11)
    np.testing.assert_allclose(found.model.C, [[0.0, 0.0], [0.0, 1.0]], atol=1e-7)


@pytest.mark.parametrize("degrees", [0.0, 30.0, 90.0, 135.0])
def test_the_published_pendulum_within_its_errors(degrees: float) -> None:
    plant, angle = mechanics.pendulum, np.deg2rad(degrees)
    mass, inertia = mechanics.MASS, mechanics.MASS * mechanics.LENGTH**2
    found = local(plant, [angle, 0.0], [mass * mechanics.GRAVITY * mechanics.LENGTH * np.sin(angle)])
    assert found.outcome is Outcome.DONE
    exact = [[0.0, 1.0], [-mechanics.GRAVITY / mechanics.LENGTH * np.cos(angle), -mechanics.DAMPING / inertia]]
    assert np.all(np.abs(found.model.A - exact) <= found.model.errors["A"])
    np.testing.assert_allclose(found.model.A, exact, rtol=1e-7, atol=1e-9)


def test_a_plant_that_is_not_batched_gives_the_same_model() -> None:
    import math

    def one(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.array([x[1], -G / LENGTH * math.sin(x[0]) - FRICTION * x[1] + p["gain"] * u[0]])

    many = local(SWING, [0.4, 0.0], held(0.4))
    single = local(replace(SWING, dynamics=one), [0.4, 0.0], held(0.4))
    np.testing.assert_allclose(single.model.A, many.model.A, rtol=0, atol=1e-10)
