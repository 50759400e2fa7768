"""The parts of the trim by themselves: starts, differences, steps in a box, noise, open directions."""

from __future__ import annotations

import numpy as np
import pytest
from trimming import plant_of, trimmed

from linverify.core.case import Interval, TrimAsk
from linverify.core.outcome import Outcome
from linverify.numerics.equations import Equations, Slack, equations
from linverify.numerics.newton import jacobian, pseudo_inverse, solve
from linverify.numerics.roots import open_directions, roots_among, roughness
from linverify.numerics.starts import halton, start_points


def _system(dynamics, states, find, **limits) -> Equations:
    envelope = {name: Interval(*pair) for name, pair in limits.items()}
    return equations(plant_of(dynamics, states), TrimAsk(hold={}, find=tuple(find.split())), envelope, {}, 0.0)


def test_the_first_points_of_the_low_discrepancy_set():
    expected = [[1 / 2, 1 / 4, 3 / 4, 1 / 8], [1 / 3, 2 / 3, 1 / 9, 4 / 9], [1 / 5, 2 / 5, 3 / 5, 4 / 5]]
    np.testing.assert_allclose(halton(4, 3), expected, rtol=1e-15)


@pytest.mark.parametrize("limits", [(-2.0, 5.0), (-2.0, np.inf), (-np.inf, 5.0), (-np.inf, np.inf)])
def test_starts_lie_inside_the_bounds_and_reach_far_on_open_sides(limits):
    points = start_points(_system(lambda t, x, u, p: -x, "x", "x", x=limits))
    assert np.isfinite(points).all()
    assert points.min() >= limits[0]
    assert points.max() <= limits[1]
    assert np.ptp(points) > 6.0


def test_more_unknowns_get_more_starts_up_to_a_limit():
    counts = [start_points(_system(lambda t, x, u, p: -x, " ".join(f"x{i}" for i in range(n)), "x0 x1 x2"[: 3 * n - 1]))
              for n in (1, 3)]  # fmt: skip
    assert [points.shape[1] for points in counts] == [24, 40]


def test_differences_stay_inside_the_box_and_use_the_side_that_can_be_called():
    def edge(t, x, u, p):
        return np.where(x < 1.0, np.nan, x**2)

    system = _system(edge, "x", "x", x=(0.0, 3.0))
    z = np.array([[1.0, 2.0, 3.0]])
    slopes = jacobian(system, z, system.residual(z))
    np.testing.assert_allclose(slopes[:, 0, 0], [2.0, 4.0, 6.0], rtol=1e-5)


def test_the_shortest_step_of_a_redundant_system():
    slopes = np.array([[[1.0, 1.0], [2.0, 2.0]]])
    step = -pseudo_inverse(slopes)[0] @ np.array([2.0, 4.0])
    np.testing.assert_allclose(step, [-1.0, -1.0], rtol=1e-12)


def test_elimination_and_singular_values_agree():
    generator = np.random.default_rng(4)
    matrices = generator.normal(size=(20, 4, 4))
    singular = matrices.copy()
    singular[::2, 3] = singular[::2, 0] + singular[::2, 1]
    np.testing.assert_allclose(pseudo_inverse(matrices), np.linalg.inv(matrices), rtol=1e-9)
    for matrix, inverse in zip(singular, pseudo_inverse(singular), strict=True):
        np.testing.assert_allclose(matrix @ inverse @ matrix, matrix, atol=1e-9)


def test_an_unknown_on_its_bound_stays_there_while_the_others_solve():
    def dynamics(t, x, u, p):
        return np.stack([x[0] + x[1] - 3.0, 0.0 * x[0]])

    system = _system(dynamics, "a b", "a b", a=(0.0, 1.0))
    ends = solve(system, np.array([[1.0], [0.0]]))
    np.testing.assert_allclose(ends.z[:, 0], [1.0, 2.0], rtol=1e-9)


def test_a_slack_relaxes_its_equation_only():
    system = _system(lambda t, x, u, p: x - np.array([[1.0], [2.0]]) if x.ndim == 2 else x - [1.0, 2.0], "a b", "a b")
    relaxed = system.relaxed(Slack(1))
    assert (relaxed.count, relaxed.all_unknowns) == (3, ("a", "b", "b"))
    np.testing.assert_allclose(relaxed.residual(np.array([[1.0], [5.0], [3.0]]))[:, 0], [0.0, 0.0], atol=1e-15)
    assert relaxed.point(np.array([1.0, 5.0, 3.0])).residuals == {"a": 0.0, "b": 3.0}


def test_open_directions_do_not_depend_on_the_sizes_of_rows():
    slopes = np.diag([1e8, 1e-6])
    assert open_directions(slopes).shape == (2, 0)
    direction = open_directions(np.array([[1e8, -1e8], [1e-6, -1e-6]]))
    np.testing.assert_allclose(np.abs(direction[:, 0]), np.sqrt([0.5, 0.5]), rtol=1e-9)


def test_an_influence_of_round_off_alone_is_none():
    # `place` enters by the rounding of a large sum only; taken for an influence it would hide the family
    def dynamics(t, x, u, p):
        return np.stack([1.0 - x[1], (x[0] + 1e6) - 1e6 - x[0]])

    assert trimmed(plant_of(dynamics, "place speed"), "place speed").outcome is Outcome.FAMILY


def test_noise_is_measured_in_the_equations():
    system = _system(lambda t, x, u, p: np.round(x, 6) - 1.0, "x", "x")
    rough = roughness(system, np.array([1.0]))
    assert 1e-8 < rough.coarse[0] < 1e-5


def test_a_point_within_the_accuracy_but_far_from_solved_is_no_root():
    system = _system(lambda t, x, u, p: np.exp(-x), "x", "x", x=(0.0, 30.0))
    ends = solve(system, np.array([[25.0]]), iterations=0)
    found = roots_among(system, ends, 1e-8)
    assert (found.roots, len(found.fading)) == ((), 1)


@pytest.mark.parametrize("count", [1, 2])
@pytest.mark.parametrize("seed", range(12))
def test_products_of_random_parabolas(count, seed):
    """Every root of rotated and mixed parabolas is found, and of them the nearest to the start is chosen."""
    generator = np.random.default_rng([count, seed])
    roots = generator.uniform(-3, 3, (count, 2))
    turn, _ = np.linalg.qr(generator.normal(size=(count, count)))
    mix = generator.normal(size=(count, count)) + 2.0 * np.eye(count)

    def dynamics(t, x, u, p):
        z = turn @ x
        return mix @ np.stack([(z[i] - roots[i, 0]) * (z[i] - roots[i, 1]) for i in range(count)])

    names = [f"x{i}" for i in range(count)]
    start = generator.uniform(-3, 3, count)
    result = trimmed(
        plant_of(dynamics, " ".join(names)), " ".join(names), start=dict(zip(names, start, strict=True)),
        limits=dict.fromkeys(names, (-5.0, 5.0)),
    )  # fmt: skip
    choices = np.stack(np.meshgrid(*roots), axis=-1).reshape(-1, count)
    points = choices @ turn  # the inverse of a turn is its transpose
    inside = points[np.abs(points).max(axis=1) <= 5.0]
    nearest = inside[np.argmin(np.linalg.norm(inside - start, axis=1))]
    np.testing.assert_allclose(result.point.x, nearest, atol=1e-8)
    assert len(result.others) + 1 == len(inside)
