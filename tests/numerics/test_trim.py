"""Equilibria in closed form: found, to round-off, inside their bounds, by the residual and by nothing else."""

from __future__ import annotations

import numpy as np
import pytest
from trimming import plant_of, trimmed, values

from linverify.core.outcome import Outcome


def test_a_known_false_success_of_root_finders_is_solved():
    # from 1.0, where the slope vanishes, a widely used root finder stops at 1.01 and reports success
    plant = plant_of(lambda t, x, u, p: x**2 - 2 * x, "x")
    result = trimmed(plant, "x", start={"x": 1.0}, limits={"x": (0.5, 5.0)})
    np.testing.assert_allclose(values(result), [2.0], rtol=1e-14)
    assert result.worst_residual <= 1e-14


def test_a_residual_at_round_off_is_accepted_whatever_the_search_thinks():
    plant = plant_of(lambda t, x, u, p: 1e3 * (np.tanh(x - 0.3) + 1e-3 * (x - 0.3) ** 3), "x")
    result = trimmed(plant, "x", start={"x": 40.0})
    np.testing.assert_allclose(values(result), [0.3], rtol=1e-12)


def test_the_root_inside_the_bounds_is_taken_and_the_negative_one_never_seen():
    plant = plant_of(lambda t, x, u, p: (x - 2.0) * (x + 3.0), "concentration")
    result = trimmed(plant, "concentration", start={"concentration": 0.0}, limits={"concentration": (0.0, 10.0)})
    np.testing.assert_allclose(values(result), [2.0], rtol=1e-14)
    assert result.others == ()


def test_the_domain_of_the_plant_bounds_the_search_like_the_envelope():
    def dynamics(t, x, u, p):
        if np.any(x < 0.0):
            raise ValueError("a level below the bottom")
        return u - np.sqrt(x)

    plant = plant_of(dynamics, "level", "inflow", domain={"level": (0.0, None)})
    result = trimmed(plant, "level", hold={"inflow": 2.0})
    np.testing.assert_allclose(values(result), [4.0, 2.0], rtol=1e-14)
    assert result.failed_calls == 0


def test_calls_that_fail_during_the_search_are_passed_over_and_counted():
    def dynamics(t, x, u, p):
        if np.any(x < 0.0):
            raise ValueError("a level below the bottom")
        return u - np.sqrt(x)

    plant = plant_of(dynamics, "level", "inflow")
    result = trimmed(plant, "level", hold={"inflow": 2.0}, limits={"level": (-10.0, 10.0)})
    np.testing.assert_allclose(values(result), [4.0, 2.0], rtol=1e-14)
    assert result.failed_calls > 0


def test_a_plant_that_returns_nan_at_places_is_trimmed_elsewhere():
    plant = plant_of(lambda t, x, u, p: np.where(x > 1.5, np.nan, 1.0 - x), "x")
    result = trimmed(plant, "x", limits={"x": (-8.0, 8.0)})
    np.testing.assert_allclose(values(result), [1.0], rtol=1e-14)
    assert result.failed_calls > 0


@pytest.mark.parametrize("nominal", [{"big": 1e6, "small": 1e-6}, {}], ids=["nominal sizes", "sizes left at 1"])
def test_states_of_very_unlike_size_are_both_solved(nominal):
    def dynamics(t, x, u, p):
        return np.stack([-2.0 * (x[0] - 1e6) + 1e12 * (x[1] - 3e-6), -2.0 * (x[1] - 3e-6)])

    result = trimmed(plant_of(dynamics, "big small"), "big small", nominal=nominal)
    np.testing.assert_allclose(values(result), [1e6, 3e-6], rtol=1e-12)


def test_a_stiff_plant_is_trimmed_to_the_accuracy_in_every_rate():
    def dynamics(t, x, u, p):
        fast = 1e8 * (x[1] - x[0] ** 3)
        return np.stack([u[0] - x[0] - 1e-4 * fast, fast - 1e-3 * (x[1] - 8.0)])

    result = trimmed(plant_of(dynamics, "slow fast", "heat"), "slow fast", hold={"heat": 2.0}, start={"slow": 5.0})
    np.testing.assert_allclose(values(result)[:2], [2.0, 8.0], rtol=1e-10)
    assert max(abs(value) for value in result.residuals.values()) <= 1e-8


def test_held_outputs_are_equations_like_any_other():
    plant = plant_of(
        lambda t, x, u, p: u - x, "x", "u", outputs="square", measurement=lambda t, x, u, p: x**2 + 0.5 * u
    )
    result = trimmed(plant, "x u", hold={"square": 9.0}, limits={"x": (0.0, 10.0)})
    root = (-0.5 + np.sqrt(0.25 + 36.0)) / 2.0
    np.testing.assert_allclose(values(result), [root, root], rtol=1e-14)
    assert result.residuals.keys() == {"x", "square"}
    assert result.point.value("square") == pytest.approx(9.0, abs=1e-13)


def test_an_output_with_a_states_name_is_held_as_that_state():
    plant = plant_of(lambda t, x, u, p: u - 3.0 * x, "x", "u")  # its output is x
    result = trimmed(plant, "u", hold={"x": 2.0})
    np.testing.assert_allclose(values(result), [2.0, 6.0], rtol=1e-15)
    assert result.residuals.keys() == {"x"}


def test_a_difference_equation_is_trimmed_where_the_next_state_is_the_state():
    plant = plant_of(lambda k, x, u, p: 0.5 * x + u, "x", "u", step=0.1)
    result = trimmed(plant, "x", hold={"u": 1.0})
    np.testing.assert_allclose(values(result), [2.0, 1.0], rtol=1e-15)
    assert result.point.drift.tolist() == [0.0]


def test_a_prescribed_change_a_step_of_a_difference_equation():
    plant = plant_of(lambda k, x, u, p: 0.5 * x + u, "x", "u", step=0.1)
    result = trimmed(plant, "x", hold={"u": 1.0}, rates={"x": 0.25})
    np.testing.assert_allclose(values(result), [1.5, 1.0], rtol=1e-15)  # 0.75 + 1 = 1.5 + 0.25
    assert result.point.drift.tolist() == [0.25]


def test_a_prescribed_rate_is_met_and_becomes_the_drift():
    def climb(t, x, u, p):
        return np.stack([x[1], u[0] - 0.5 * x[1]])

    result = trimmed(
        plant_of(climb, "altitude climb", "lift"), "climb lift", hold={"altitude": 100.0}, rates={"altitude": 2.0}
    )
    np.testing.assert_allclose(values(result), [100.0, 2.0, 1.0], rtol=1e-14)
    assert result.point.drift.tolist() == [2.0, 0.0]


def test_a_free_rate_is_no_equation_and_is_recorded_as_drift():
    def drifting(t, x, u, p):
        return np.stack([3.0 * x[1], 1.0 - x[1]])

    result = trimmed(plant_of(drifting, "position speed"), "speed", hold={"position": 7.0}, free=("position",))
    np.testing.assert_allclose(values(result), [7.0, 1.0], rtol=1e-15)
    np.testing.assert_allclose(result.point.drift, [3.0, 0.0], rtol=1e-15)
    assert result.residuals.keys() == {"speed"}


def test_what_is_neither_held_nor_found_stays_at_its_start():
    plant = plant_of(lambda t, x, u, p: np.stack([u[0] + u[1] - x[0]]), "x", "u v")
    result = trimmed(plant, "u", hold={"x": 1.0}, start={"v": 0.25})
    np.testing.assert_allclose(values(result), [1.0, 0.75, 0.25], rtol=1e-15)


def test_everything_held_is_a_trim_if_the_rates_vanish_there_and_none_if_not():
    plant = plant_of(lambda t, x, u, p: u - x, "x", "u")
    assert trimmed(plant, "", hold={"x": 2.0, "u": 2.0}).outcome is Outcome.DONE
    result = trimmed(plant, "", hold={"x": 2.0, "u": 2.5})
    assert (result.outcome, result.worst_equation, result.worst_residual) == (Outcome.NO_TRIM, "x", 0.5)


def test_no_equation_at_all_leaves_nothing_to_solve():
    result = trimmed(plant_of(lambda t, x, u, p: x + 1.0, "x"), "", hold={"x": 2.0}, free=("x",))
    assert (result.outcome, result.point.drift.tolist()) == (Outcome.DONE, [3.0])


def test_an_equilibrium_on_a_bound_is_one_and_the_bound_is_told():
    plant = plant_of(lambda t, x, u, p: u - 2.0 * x, "x", "u")
    result = trimmed(plant, "u", hold={"x": 1.5}, limits={"u": (0.0, 3.0)})
    np.testing.assert_allclose(values(result), [1.5, 3.0], rtol=1e-14)
    assert result.active_bounds == ("u at its upper limit 3",)


def test_a_plant_that_depends_on_time_is_trimmed_at_the_time_given():
    from linverify.core.case import TrimAsk
    from linverify.numerics.trim import trim

    plant = plant_of(lambda t, x, u, p: t - x, "x")
    result = trim(plant, TrimAsk(hold={}, find=("x",)), {}, {}, 4.0)
    assert (values(result).tolist(), result.point.time) == ([4.0], 4.0)


def test_the_same_trim_twice_gives_the_same_bits():
    def dynamics(t, x, u, p):
        return np.stack([np.sin(x[0]) - 0.3 * x[1] ** 2 + u[0], np.exp(-x[1]) - x[0] * u[0]])

    def once(batched):
        plant = plant_of(dynamics, "a b", "u")
        if batched:
            plant.detect(0.0, np.array([[0.1, 0.4, 0.9], [0.2, 0.3, 0.8]]), np.array([[0.5, 0.6, 0.7]]))
        result = trimmed(plant, "a b", hold={"u": 0.4}, start={"a": 0.5, "b": 0.5}, limits={"a": (-3, 3), "b": (-3, 3)})
        return values(result).tobytes(), result.evaluations, [other.x.tobytes() for other in result.others]

    assert once(False) == once(False)
    assert once(True) == once(True)


def test_a_name_that_the_plant_does_not_have_is_a_key_error():
    with pytest.raises(KeyError, match="y"):
        trimmed(plant_of(lambda t, x, u, p: -x, "x"), "y")


def test_the_error_estimate_covers_what_the_plants_round_off_hides():
    # the rate is a difference of two numbers of size 1e6: its zero is known to 1e-10 and no better
    plant = plant_of(lambda t, x, u, p: (1e6 + x) - (1e6 + np.float64(0.1234567890123)), "x", nominal={"x": 1.0})
    result = trimmed(plant, "x")
    off = abs(values(result)[0] - 0.1234567890123)
    assert off <= result.errors["x"] <= 1e-8


@pytest.mark.parametrize("power", [3, 5])
def test_the_error_estimate_of_a_flat_root_is_not_that_of_a_steep_one(power):
    plant = plant_of(lambda t, x, u, p: -((x - 1.0) ** power), "x")
    result = trimmed(plant, "x")
    assert result.outcome is Outcome.DONE
    assert abs(values(result)[0] - 1.0) <= result.errors["x"] <= 1e-2
