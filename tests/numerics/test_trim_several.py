"""More than one equilibrium: the one that `start` means, or none; families; roots that only look like a family."""

from __future__ import annotations

import numpy as np
import pytest
from trimming import plant_of, trimmed, values

from linverify.core.outcome import Outcome


def _two(t, x, u, p):
    return (x - 2.0) * (x + 3.0)


@pytest.mark.parametrize("start, chosen, other", [(1.0, 2.0, -3.0), (-1.0, -3.0, 2.0), (40.0, 2.0, -3.0)])
def test_the_equilibrium_nearest_the_start_is_chosen_and_the_other_listed(start, chosen, other):
    result = trimmed(plant_of(_two, "x"), "x", start={"x": start})
    np.testing.assert_allclose(values(result), [chosen], rtol=1e-13)
    np.testing.assert_allclose([point.x[0] for point in result.others], [other], rtol=1e-13)
    assert result.notes == (f"other equilibria: (1) x = {other:g}",)


def test_near_is_measured_in_nominal_sizes():
    def four(t, x, u, p):
        return np.stack([x[0] ** 2 - 1.0, x[1] - 100.0 * x[0]])  # (1, 100) and (-1, -100)

    start = {"a": 0.9, "b": -60.0}
    plant = plant_of(four, "a b")
    assert values(trimmed(plant, "a b", start=start, nominal={"a": 0.01}))[0] == pytest.approx(1.0)
    assert values(trimmed(plant, "a b", start=start, nominal={"a": 100.0}))[0] == pytest.approx(-1.0)


def test_without_start_several_equilibria_are_listed_and_none_is_taken():
    result = trimmed(plant_of(_two, "x"), "x")
    assert (result.outcome, result.point) == (Outcome.SEVERAL_TRIMS, None)
    assert sorted(round(float(point.x[0]), 9) for point in result.others) == [-3.0, 2.0]
    assert result.message.startswith(
        "2 equilibria lie inside the envelope and no `start` says which one is meant: (1) "
    )


def test_a_start_just_between_two_equilibria_does_not_say_which_one_is_meant():
    result = trimmed(plant_of(_two, "x"), "x", start={"x": -0.5})
    assert result.outcome is Outcome.SEVERAL_TRIMS
    assert "`start` is as near to one as to another" in result.message


def test_a_start_that_speaks_of_other_unknowns_does_not_choose():
    plant = plant_of(lambda t, x, u, p: np.stack([x[0] ** 2 - 1.0, x[1] - 5.0]), "a b")
    assert trimmed(plant, "a b", start={"b": 4.0}).outcome is Outcome.SEVERAL_TRIMS
    assert trimmed(plant, "a b", start={"a": 0.5}).outcome is Outcome.DONE


def test_without_start_a_single_equilibrium_is_taken():
    result = trimmed(plant_of(_two, "x"), "x", limits={"x": (0.0, 50.0)})
    np.testing.assert_allclose(values(result), [2.0], rtol=1e-13)


def test_all_equilibria_of_a_product_are_found():
    mixing = np.array([[1.0, 0.4], [-0.3, 0.8]])

    def four(t, x, u, p):
        z = mixing @ x
        return np.stack([(z[0] - 1.0) * (z[0] + 0.5), (z[1] - 0.7) * (z[1] + 1.1)])

    result = trimmed(plant_of(four, "a b"), "a b", limits={"a": (-4, 4), "b": (-4, 4)}, start={"a": 1.0, "b": 0.0})
    expected = [np.linalg.solve(mixing, [first, second]) for first in (1.0, -0.5) for second in (0.7, -1.1)]
    found = sorted([tuple(np.round(point.x, 9)) for point in (result.point, *result.others)])
    assert found == sorted(tuple(np.round(point, 9)) for point in expected)
    nearest = min(expected, key=lambda point: np.linalg.norm(point - [1.0, 0.0]))
    np.testing.assert_allclose(values(result), nearest, rtol=1e-12)


@pytest.mark.parametrize("limit", [35.0, 55.0, 105.0])
def test_equilibria_that_repeat_are_no_family(limit):
    # sixteen turns apart, seventeen even samples between two of them are equilibria all
    result = trimmed(plant_of(lambda t, x, u, p: np.sin(x), "x"), "x", limits={"x": (-limit, limit)}, start={"x": 0.1})
    assert result.outcome is Outcome.DONE
    np.testing.assert_allclose(values(result), [0.0], atol=1e-12)


@pytest.mark.parametrize("gap", [1e-2, 1e-3, 3e-4])
def test_equilibria_close_to_each_other_are_two(gap):
    plant = plant_of(lambda t, x, u, p: (x - 1.0) * (x - 1.0 - gap), "x")
    assert trimmed(plant, "x", accuracy=1e-12).outcome is Outcome.SEVERAL_TRIMS


@pytest.mark.parametrize("power", [2, 3, 4, 5])
@pytest.mark.parametrize("centre", [0.0, 1.0])
def test_an_isolated_root_of_higher_order_is_one_equilibrium_and_no_family(power, centre):
    result = trimmed(plant_of(lambda t, x, u, p: -((x - centre) ** power), "x"), "x")
    assert result.outcome is Outcome.DONE
    assert values(result)[0] == pytest.approx(centre, abs=1e-3)


def test_a_higher_order_root_in_one_direction_of_several_is_no_family():
    def dynamics(t, x, u, p):
        return np.stack([-((x[0] - x[1]) ** 3), -(x[0] + x[1] - 2.0)])

    result = trimmed(plant_of(dynamics, "a b"), "a b")
    assert result.outcome is Outcome.DONE
    np.testing.assert_allclose(values(result), [1.0, 1.0], atol=1e-3)


def test_a_state_that_no_equation_knows_is_a_family_and_is_named():
    def rolling(t, x, u, p):
        return np.stack([x[1], u[0] - x[1]])

    result = trimmed(plant_of(rolling, "position speed", "force"), "position speed", hold={"force": 0.0})
    assert (result.outcome, result.free_names) == (Outcome.FAMILY, ("position",))
    assert result.message == (
        "the equilibria form a family in which position may change (2 unknowns, 2 equations), "
        "for example at position = 0, speed = 0; add a hold or `minimize`"
    )


def test_more_unknowns_than_equations_are_a_family_and_the_unknowns_in_it_are_named():
    def dynamics(t, x, u, p):
        return np.stack([u[0] + u[1] - x[0], -x[1] + 3.0])

    result = trimmed(plant_of(dynamics, "a b", "u v"), "b u v", hold={"a": 1.0})
    assert (result.outcome, result.free_names) == (Outcome.FAMILY, ("u", "v"))


def test_a_curved_family_is_followed_round_its_bends():
    def circle(t, x, u, p):
        return np.stack([x[0] ** 2 + x[1] ** 2 - 0.04, 0.0 * x[0]])

    result = trimmed(plant_of(circle, "a b"), "a b", limits={"a": (-1, 1), "b": (-1, 1)})
    assert (result.outcome, result.free_names) == (Outcome.FAMILY, ("a", "b"))


def test_a_family_between_close_bounds_is_still_a_family():
    plant = plant_of(lambda t, x, u, p: np.stack([-x[1], -x[1]]), "a b")
    assert trimmed(plant, "a b", limits={"a": (0.0, 0.02)}).outcome is Outcome.FAMILY


def _family_and_point(t, x, u, p):
    # b = 0 with any a, and the single equilibrium (3, 4)
    return np.stack([x[1] * (x[0] - 3.0), x[1] * (x[1] - 4.0)])


def test_an_isolated_equilibrium_nearer_the_start_than_a_family_is_chosen():
    result = trimmed(plant_of(_family_and_point, "a b"), "a b", start={"a": 3.0, "b": 3.5})
    np.testing.assert_allclose(values(result), [3.0, 4.0], rtol=1e-12)


def test_a_family_that_passes_nearer_the_start_than_the_isolated_equilibrium_is_told():
    result = trimmed(plant_of(_family_and_point, "a b"), "a b", start={"a": 3.0, "b": 1.0})
    assert (result.outcome, result.free_names) == (Outcome.FAMILY, ("a",))


def test_without_start_a_family_anywhere_is_told():
    assert trimmed(plant_of(_family_and_point, "a b"), "a b").outcome is Outcome.FAMILY


def test_a_weak_but_true_influence_is_no_family():
    # an integrator with a time constant of a hundred days among seconds
    plant = plant_of(lambda t, x, u, p: np.stack([-1e-7 * (x[0] - 3.0), 50.0 * (x[0] - x[1])]), "slow fast")
    result = trimmed(plant, "slow fast", accuracy=1e-12)
    np.testing.assert_allclose(values(result), [3.0, 3.0], rtol=1e-6)
