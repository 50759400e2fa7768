"""No equilibrium: what stands in the way, how near the search came, where one would be; and when nothing is known."""

from __future__ import annotations

import numpy as np
import pytest
from trimming import plant_of, trimmed

from linverify.core.outcome import Outcome


def test_a_plant_without_any_equilibrium_is_not_said_to_have_one():
    result = trimmed(plant_of(lambda t, x, u, p: x**2 + 1.0, "x"), "x")
    assert (result.outcome, result.point, result.conclusive) == (Outcome.NO_TRIM, None, True)
    assert (result.worst_equation, result.worst_residual) == ("x", pytest.approx(1.0))
    assert result.closest.x[0] == pytest.approx(0.0, abs=1e-4)


def _tug(t, x, u, p):
    """Speed under thrust and quadratic drag; a hull trim angle that depends on the speed."""
    return np.stack([(u[0] - 40.0 * x[0] ** 2) / 1000.0, 0.2 * (u[1] - 0.1 * x[0]) - x[1]])


def _tug_plant():
    return plant_of(_tug, "speed angle", "thrust flap", nominal={"speed": 2.0, "thrust": 1000.0})


def test_the_rate_that_cannot_vanish_is_named_with_what_is_left_and_the_bound_that_holds_it():
    result = trimmed(
        _tug_plant(), "thrust flap", hold={"speed": 10.0, "angle": 0.0}, nominal={"speed": 2.0, "thrust": 1000.0},
        limits={"thrust": (0.0, 3000.0), "speed": (0.0, 20.0), "flap": (-2.0, 2.0)},
    )  # fmt: skip
    assert (result.outcome, result.conclusive) == (Outcome.NO_TRIM, True)
    assert (result.worst_equation, result.worst_residual) == ("speed", pytest.approx(0.5))  # 1 a second, size 2
    assert result.active_bounds == ("thrust at its upper limit 3000",)
    assert result.message == (
        "no equilibrium was found inside the envelope: the rate of speed cannot vanish: with every other equation met "
        "it stays at -1 per s, with thrust at its upper limit 3000"
    )
    assert result.closest.value("flap") == pytest.approx(1.0)  # the other equation is met


def test_the_nearest_held_value_at_which_a_trim_exists_is_found():
    result = trimmed(
        _tug_plant(), "thrust flap", hold={"speed": 10.0, "angle": 0.0}, nominal={"thrust": 1000.0},
        limits={"thrust": (0.0, 3000.0), "speed": (0.0, 20.0), "flap": (-2.0, 2.0)},
    )  # fmt: skip
    assert result.nearest_holds["speed"] == pytest.approx(np.sqrt(75.0), rel=1e-6)
    assert result.nearest_holds["angle"] == pytest.approx(0.0, abs=1e-6)
    assert result.notes[-1].startswith("a trim exists at the held values speed = 8.66025")


def test_held_values_without_any_trim_near_are_not_made_up():
    plant = plant_of(lambda t, x, u, p: x**2 + 1.0 + u**2, "x", "u")
    result = trimmed(plant, "x", hold={"u": 0.5})
    assert (result.outcome, dict(result.nearest_holds)) == (Outcome.NO_TRIM, {})
    assert result.notes[-1] == "no other values of the held quantities were found at which a trim exists"


def test_a_held_output_that_cannot_be_reached_is_named():
    plant = plant_of(lambda t, x, u, p: u - x, "x", "u", outputs="square", measurement=lambda t, x, u, p: x**2)
    result = trimmed(plant, "x u", hold={"square": 9.0}, limits={"x": (0.0, 2.0)})
    assert (result.outcome, result.worst_equation) == (Outcome.NO_TRIM, "square")
    assert "square = 9 cannot be reached: with every other equation met it misses by 5" in result.message
    assert result.nearest_holds["square"] == pytest.approx(4.0)


def test_a_prescribed_rate_that_cannot_be_had_is_told_as_such():
    plant = plant_of(lambda t, x, u, p: u - x, "x", "u")
    result = trimmed(plant, "u", hold={"x": 1.0}, rates={"x": 2.0}, limits={"u": (0.0, 2.5)})
    assert "the rate of x cannot be 2 per s: with every other equation met it stays at 1.5 per s" in result.message


def test_an_equilibrium_whose_outputs_leave_the_envelope_is_not_inside_it():
    plant = plant_of(lambda t, x, u, p: u - x, "x", "u", outputs="square", measurement=lambda t, x, u, p: x**2)
    result = trimmed(plant, "x", hold={"u": 3.0}, limits={"square": (0.0, 2.0)})
    assert (result.outcome, result.conclusive) == (Outcome.NO_TRIM, True)
    assert result.message.endswith("lies outside, since square = 9 is beyond its limit 2")
    assert result.nearest_holds["u"] == pytest.approx(np.sqrt(2.0))


def test_of_two_equilibria_the_one_whose_outputs_stay_inside_is_taken():
    plant = plant_of(lambda t, x, u, p: x**2 - 4.0, "x", outputs="twice", measurement=lambda t, x, u, p: 2.0 * x)
    result = trimmed(plant, "x", start={"x": -1.9}, limits={"twice": (0.0, 9.0)})
    assert result.point.x[0] == pytest.approx(2.0)


@pytest.mark.parametrize(
    "hold, limits, text",
    [
        ({"u": 5.0}, {"u": (0.0, 2.0)}, "u = 5 is required, beyond its limit 2"),
        (
            {"u": 1.0},
            {"x": (3.0, 2.0)},
            "x has no allowed value: its envelope and the plant's domain exclude each other",
        ),
    ],
)
def test_what_is_outside_from_the_beginning_is_told_without_a_search(hold, limits, text):
    result = trimmed(plant_of(lambda t, x, u, p: u - x, "x", "u"), "x", hold=hold, limits=limits)
    assert (result.outcome, result.conclusive, result.message) == (Outcome.NO_TRIM, True, text)


@pytest.mark.parametrize("limits", [{}, {"x": (0.0, 20.0)}], ids=["unbounded", "bounded"])
def test_rates_that_fade_away_without_an_equilibrium_are_neither_a_trim_nor_shown_to_be_none(limits):
    result = trimmed(plant_of(lambda t, x, u, p: np.exp(-x), "x"), "x", limits=limits)
    assert (result.outcome, result.point, result.conclusive) == (Outcome.NO_TRIM, None, False)
    assert result.message.startswith("the residuals fall below the accuracy 1e-08 where the equations are still far")


def test_a_plant_in_single_precision_is_told_to_be_too_noisy_for_the_accuracy():
    def single(t, x, u, p):
        return (np.float32(3.0) - np.float32(np.pi) * np.asarray(x, dtype=np.float32) ** 2).astype(float)

    result = trimmed(plant_of(single, "x"), "x", limits={"x": (0.1, 2.0)}, accuracy=1e-9)
    assert (result.outcome, result.conclusive) == (Outcome.NOISY, False)
    assert "plant's own noise" in result.message
    assert trimmed(plant_of(single, "x"), "x", limits={"x": (0.1, 2.0)}, accuracy=1e-5).outcome is Outcome.DONE


def test_a_plant_that_raises_everywhere_is_told_with_its_first_call():
    def broken(t, x, u, p):
        raise RuntimeError("table not loaded")

    result = trimmed(plant_of(broken, "x"), "x", limits={"x": (1.0, 3.0)})
    assert (result.outcome, result.conclusive) == (Outcome.PLANT_RAISED, False)
    assert result.message.startswith("the plant could be called at none of 24 starts; the first: dynamics raised")
    assert "table not loaded" in result.message
    assert "x = 2" in result.message


@pytest.mark.parametrize(
    "answer, outcome",
    [(np.nan, Outcome.NOT_FINITE), (np.inf, Outcome.NOT_FINITE), (np.zeros(3), Outcome.PLANT_ANSWER)],
    ids=["nan", "inf", "shape"],
)
def test_what_a_plant_answers_everywhere_is_told_by_its_kind(answer, outcome):
    plant = plant_of(lambda t, x, u, p: np.zeros(1) + answer, "x")
    assert trimmed(plant, "x").outcome is outcome


def test_a_measurement_that_fails_at_the_answer_decides():
    plant = plant_of(lambda t, x, u, p: 3.0 - x, "x", outputs="y", measurement=lambda t, x, u, p: np.array([np.nan]))
    result = trimmed(plant, "x")
    assert (result.outcome, result.point) == (Outcome.NOT_FINITE, None)
    assert result.message == (
        "at the equilibrium that the search found, measurement returned nan for y when called with t = 0 s, x = 3"
    )


def test_units_stand_in_the_message():
    from linverify.core.bound import BoundPlant
    from linverify.core.plant import Plant

    plant = BoundPlant(
        Plant(states={"speed": "m/s"}, inputs={"thrust": "N"}, dynamics=lambda t, x, u, p: u - x**2, time_unit="min")
    )
    result = trimmed(plant, "thrust", hold={"speed": 4.0}, limits={"thrust": (0.0, 9.0)})
    assert "stays at -7 m/s per min, with thrust at its upper limit 9 N" in result.message
