"""`minimize`: of many equilibria the one nearest `start` in the weights given, on bounds and along curves."""

from __future__ import annotations

import numpy as np
import pytest
from trimming import plant_of, trimmed, values

from linverify.core.outcome import Outcome


def _shared(t, x, u, p):
    return np.stack([u[0] + u[1] - x[0]])


def _plant(**more):
    return plant_of(_shared, "x", "u v", **more)


def test_a_load_is_shared_equally_between_equal_weights():
    result = trimmed(_plant(), "u v", hold={"x": 1.0}, minimize={"u": 1.0, "v": 1.0})
    np.testing.assert_allclose(values(result), [1.0, 0.5, 0.5], rtol=1e-9)


def test_weights_count_in_nominal_sizes():
    # least w1 (u / 2)^2 + w2 v^2 with u + v = 1
    ask = {"hold": {"x": 1.0}, "minimize": {"u": 3.0, "v": 1.0}, "nominal": {"u": 2.0, "v": 1.0}}
    result = trimmed(_plant(), "u v", **ask)
    np.testing.assert_allclose(values(result)[1:], [1.0 / 1.75, 0.75 / 1.75], rtol=1e-8)


def test_distances_are_taken_from_start():
    ask = {"hold": {"x": 1.0}, "minimize": {"u": 1.0, "v": 1.0}, "start": {"u": 3.0, "v": 0.0}}
    np.testing.assert_allclose(values(trimmed(_plant(), "u v", **ask)), [1.0, 2.0, -1.0], rtol=1e-9)


def test_a_bound_takes_part():
    ask = {"hold": {"x": 1.0}, "minimize": {"u": 1.0, "v": 1.0}, "limits": {"u": (-1.0, 0.25)}}
    result = trimmed(_plant(), "u v", **ask)
    np.testing.assert_allclose(values(result), [1.0, 0.25, 0.75], rtol=1e-9)
    assert result.active_bounds == ("u at its upper limit 0.25",)


def test_a_bound_that_the_search_met_on_its_way_is_left_again():
    # from the first equilibrium met the way leads along u = 2, but the nearest point has u = 1
    def curved(t, x, u, p):
        return np.stack([u[0] ** 2 + u[1] ** 2 - 4.0])

    plant = plant_of(curved, "x", "u v")
    ask = {"hold": {"x": 0.0}, "minimize": {"u": 1.0, "v": 1.0}, "start": {"u": 3.0, "v": 3.0 * np.sqrt(3.0)}}
    result = trimmed(plant, "u v", limits={"u": (0.0, 2.0), "v": (0.0, 2.0)}, **ask)
    np.testing.assert_allclose(values(result)[1:], [1.0, np.sqrt(3.0)], rtol=1e-9)


def test_an_output_limit_takes_part():
    plant = _plant(outputs="difference", measurement=lambda t, x, u, p: u[:1] - u[1:])
    ask = {"hold": {"x": 1.0}, "minimize": {"u": 1.0, "v": 1.0}}
    assert values(trimmed(plant, "u v", **ask))[1] == pytest.approx(0.5)
    result = trimmed(plant, "u v", limits={"difference": (0.4, 3.0)}, **ask)
    np.testing.assert_allclose(values(result)[1:], [0.7, 0.3], rtol=1e-8)
    assert result.active_bounds == ("difference at its lower limit 0.4",)


def test_the_nearest_point_of_a_parabola():
    # u = x^2, nearest to (u, x) = (0.2, 3): 2 x^3 + (1 - 2 * 0.2) x - 3 = 0
    plant = plant_of(lambda t, x, u, p: u - x**2, "x", "u")
    result = trimmed(plant, "x u", minimize={"x": 1.0, "u": 1.0}, start={"x": 3.0, "u": 0.2})
    roots = np.roots([2.0, 0.0, 0.6, -3.0])
    root = float(roots[np.abs(roots.imag) < 1e-12].real[0])
    np.testing.assert_allclose(values(result), [root, root**2], rtol=1e-8)
    assert result.worst_residual <= 1e-14


def test_of_two_local_minima_the_nearer_is_taken():
    plant = plant_of(lambda t, x, u, p: u - x**2, "x", "u")
    result = trimmed(plant, "x u", minimize={"x": 1.0, "u": 1.0}, start={"x": -0.1, "u": 4.0})
    assert values(result)[0] == pytest.approx(-1.87, abs=0.02)


def test_two_equally_near_are_not_told_apart():
    plant = plant_of(lambda t, x, u, p: u - x**2, "x", "u")
    result = trimmed(plant, "x u", minimize={"x": 1.0, "u": 1.0}, start={"x": 0.0, "u": 2.0})
    assert (result.outcome, len(result.others)) == (Outcome.NOT_UNIQUE, 2)
    assert result.message.startswith("equally near to `start` in these weights: (1) ")


def test_weights_that_leave_a_direction_free_are_told_with_the_unknowns_in_it():
    def three(t, x, u, p):
        return np.stack([u[0] + u[1] + u[2] - x[0]])

    result = trimmed(plant_of(three, "x", "u v w"), "u v w", hold={"x": 1.0}, minimize={"u": 1.0})
    assert (result.outcome, result.free_names) == (Outcome.NOT_UNIQUE, ("v", "w"))
    assert result.message.startswith("the weights of `minimize` leave v, w free to change, for example at u = ")


def test_unique_without_a_weight_on_every_unknown():
    # one direction is free before the weight, and u decides it
    result = trimmed(_plant(), "u v", hold={"x": 1.0}, minimize={"u": 1.0}, start={"u": 0.3})
    np.testing.assert_allclose(values(result), [1.0, 0.3, 0.7], rtol=1e-9)


def test_bounds_that_leave_no_equilibrium_are_told_as_without_minimize():
    limits = {"u": (-1.0, 0.25), "v": (-1.0, 0.25), "x": (0.0, 5.0)}
    result = trimmed(_plant(), "u v", hold={"x": 1.0}, minimize={"u": 1.0, "v": 1.0}, limits=limits)
    assert (result.outcome, result.conclusive) == (Outcome.NO_TRIM, True)
    assert result.active_bounds == ("u at its upper limit 0.25", "v at its upper limit 0.25")
    assert result.nearest_holds["x"] == pytest.approx(0.5)


def test_output_limits_that_leave_no_equilibrium_are_told():
    plant = _plant(outputs="difference", measurement=lambda t, x, u, p: u[:1] - u[1:])
    result = trimmed(
        plant, "u v", hold={"x": 1.0}, minimize={"u": 1.0, "v": 1.0},
        limits={"difference": (5.0, 6.0), "u": (-1.0, 1.0), "v": (-1.0, 1.0)},
    )  # fmt: skip
    assert (result.outcome, result.worst_equation, result.conclusive) == (Outcome.NO_TRIM, "difference", True)
    assert result.message == (
        "no equilibrium was found inside the envelope: difference cannot keep its limits: with every other equation "
        "met the nearest is difference = 1, with u at its upper limit 1"
    )


def test_the_same_bits_twice():
    plant = plant_of(lambda t, x, u, p: np.stack([np.sin(u[0]) + u[1] ** 3 - x[0]]), "x", "u v")
    ask = {"hold": {"x": 0.4}, "minimize": {"u": 1.0, "v": 2.0}, "start": {"u": 0.2, "v": 0.1}}
    first, second = (trimmed(plant, "u v", **ask) for _ in range(2))
    assert values(first).tobytes() == values(second).tobytes()
