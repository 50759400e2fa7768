"""Discs of eigenvalues: no matrix within the errors has one outside of them, and they are not far too wide."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from linverify.numerics.spectrum import Root, roots, structural
from linverify.numerics.structure import leads, strong_blocks, zeros_for_sure


def found(A: object, E: object = None) -> tuple[Root, ...]:
    matrix = np.array(A, dtype=float)
    return roots(matrix, np.zeros_like(matrix) if E is None else np.array(E, dtype=float))


def random_matrix(generator: np.random.Generator, n: int) -> tuple[np.ndarray, np.ndarray]:
    A = generator.normal(size=(n, n)) * 10.0 ** generator.uniform(-2, 2, (n, n))
    return A * (generator.random((n, n)) < 0.8), 10.0 ** generator.uniform(-10, -2) * np.abs(A)


@settings(deadline=None, derandomize=True, max_examples=120)
@given(st.integers(1, 7), st.integers(0, 10**6))
def test_no_matrix_within_the_errors_leaves_the_discs(n: int, seed: int) -> None:
    generator = np.random.default_rng(seed)
    A, E = random_matrix(generator, n)
    E = np.where(A == 0.0, 0.0, E)
    discs = roots(A, E)
    assert sum(1 if root.value.imag == 0.0 else 2 for root in discs) == n
    for _ in range(12):
        values = np.linalg.eigvals(A + E * generator.choice([-1.0, 1.0], (n, n)))
        for value in values[values.imag >= 0.0]:
            reach = [root for root in discs if abs(value - root.value) <= root.radius * (1 + 1e-9) + 1e-9 * abs(value)]
            assert reach, (value, discs)
        for root in discs:
            if not root.zero and root.together < n:
                inside = np.abs(values - root.center) <= root.spread * (1 + 1e-9) + 1e-12 * abs(root.center)
                assert inside.sum() >= root.together


def test_the_disc_of_a_simple_eigenvalue_is_its_first_order_error_with_a_reserve() -> None:
    A = np.array([[-1.0, 3.0], [0.2, -4.0]])
    E = 1e-6 * np.abs(A)
    for root in roots(A, E):
        values, left = np.linalg.eig(A.T)
        y = left[:, np.argmin(abs(values - root.value))].real
        values, right = np.linalg.eig(A)
        x = right[:, np.argmin(abs(values - root.value))].real
        first_order = float(np.abs(y) @ E @ np.abs(x)) / abs(float(y @ x))
        assert first_order < root.radius < 1.4 * first_order


def test_a_chain_of_integrators_in_natural_coordinates_is_zero_for_sure() -> None:
    chain = found(np.eye(3, k=1))
    assert [root.value for root in chain] == [0j, 0j, 0j]
    assert all(root.zero and root.real and root.radius == 0.0 for root in chain)
    beside = found([[0.0, 1.0, 0.0], [0.0, 0.0, 1.0], [0.0, 0.0, -3.0]])
    assert sorted(root.value.real for root in beside) == [-3.0, 0.0, 0.0]


def test_errors_of_exact_zeros_below_notice_do_not_blur_a_chain() -> None:
    A, others = np.eye(4, k=1), np.ones(4)
    blurred = roots(A, structural(A, np.full((4, 4), 1e-12), others))
    assert all(root.zero for root in blurred)
    assert not any(root.zero for root in roots(A, structural(A, np.full((4, 4), 1e-6), others)))
    # nothing is small beside a row that is nothing but zeros
    assert structural(A, np.full((4, 4), 1e-12))[3].all()


def test_a_chain_in_other_coordinates_is_one_disc_as_large_as_rounding_makes_it() -> None:
    T = np.random.default_rng(3).normal(size=(3, 3))
    turned = found(np.linalg.solve(T, np.eye(3, k=1) @ T))
    assert {root.together for root in turned} == {3}
    spread = {root.spread for root in turned}
    assert len(spread) == 1
    assert 1e-7 < spread.pop() < 1e-3  # eps^(1/3) is 6e-6
    assert all(abs(root.center) <= root.spread for root in turned)


def test_near_double_poles_are_apart_where_errors_allow_and_together_where_not() -> None:
    A = [[-1.0, 1.0], [1e-8, -1.0]]  # -1 +- 1e-4
    apart = found(A)
    assert [root.together for root in apart] == [1, 1]
    assert sorted(root.value.real for root in apart) == pytest.approx([-1.0001, -0.9999], abs=1e-12)
    together = found(A, [[0.0, 0.0], [1e-7, 0.0]])
    assert {root.together for root in together} == {2}
    assert not any(root.real for root in together)  # -1 +- 3e-4j is within the errors
    for error in (1e-7, -1.1e-7):
        values = np.linalg.eigvals(np.array(A) + np.array([[0.0, 0.0], [error / 1.1, 0.0]]))
        assert all(abs(value - together[0].center) <= together[0].spread for value in values)


def test_errors_without_bound_leave_nothing_known() -> None:
    (first, second) = found([[-1.0, 1.0], [-1.0, -1.0]], [[math.inf, 0.0], [0.0, 0.0]]) * 2
    assert first.radius == second.radius == math.inf
    with pytest.raises(ValueError, match="not finite"):
        found([[math.nan]])


def test_no_states_no_eigenvalues() -> None:
    assert roots(np.zeros((0, 0)), np.zeros((0, 0))) == ()
    assert strong_blocks(np.zeros((0, 0), dtype=bool)) == ()
    assert zeros_for_sure(np.zeros((0, 0), dtype=bool)) == 0


@settings(deadline=None, derandomize=True, max_examples=60)
@given(st.integers(1, 6), st.integers(0, 10**6))
def test_what_vanishes_for_sure_vanishes_for_every_matrix_with_the_pattern(n: int, seed: int) -> None:
    generator = np.random.default_rng(seed)
    pattern = generator.random((n, n)) < 0.35
    sure = zeros_for_sure(pattern)
    coefficients = [np.poly(pattern * generator.normal(size=(n, n))) for _ in range(3)]
    vanish = min(n - max(k for k in range(n + 1) if abs(one[k]) > 1e-12) for one in coefficients)
    assert sure == vanish


def test_blocks_are_states_that_act_on_each_other() -> None:
    pattern = np.array([[0, 1, 0, 1], [1, 0, 0, 0], [0, 1, 1, 0], [0, 0, 0, 0]], dtype=bool)
    assert [list(block) for block in strong_blocks(pattern)] == [[0, 1], [2], [3]]
    starts, ends = np.array([False, False, False, True]), np.array([False, False, True, False])
    assert list(np.flatnonzero(leads(pattern, starts, ends))) == [0, 1, 2, 3]
    assert not leads(pattern, ends, starts).any()


@settings(deadline=None, derandomize=True, max_examples=120)
@given(st.integers(2, 6), st.integers(0, 10**6), st.booleans())
def test_no_eigenvalue_moves_farther_than_told_in_the_direction_asked_for(n: int, seed: int, turned: bool) -> None:
    generator = np.random.default_rng(seed)
    A, E = random_matrix(generator, n)
    E = np.where(A == 0.0, 0.0, E)

    def turn(value: complex) -> complex:
        return 1.0 if not turned or value == 0 else value.conjugate() / abs(value)

    for root in roots(A, E, turn):
        assert root.along <= root.radius
        if not root.single or root.zero:
            continue
        for _ in range(6):
            values = np.linalg.eigvals(A + E * generator.choice([-1.0, 1.0], (n, n)))
            nearest = complex(values[np.argmin(abs(values - root.value))])
            moved = abs((turn(root.value) * (nearest - root.value)).real)
            assert moved <= root.along * (1 + 1e-9) + 1e-9 * abs(root.value)


def test_a_stiffness_hardly_changes_the_damping_of_a_light_pole() -> None:
    A = np.array([[0.0, 1.0], [-1e4, -0.4]])  # 100 rad/s, damping 0.002
    E = np.array([[0.0, 0.0], [5.0, 0.0]])
    (root,) = roots(A, E)
    assert root.radius > 0.025
    assert root.along < 1e-3
