"""Static gains, relative gains, zeros and changes of coordinates: closed forms and definitions."""

from __future__ import annotations

import numpy as np
import pytest
from linear_models import linear, pair_of, random_model

from linverify.numerics import gains
from linverify.numerics.pair import printed_to
from linverify.numerics.similarity import same_behaviour, similar
from linverify.numerics.zeros import matched, transmission_zeros


def _static(matrix, error: float = 0.0, step: float | None = None):
    """A model whose static gain is `matrix`, through one lag an output."""
    G = np.array(matrix, dtype=float)
    pole = np.exp(-0.3) if step else -3.0
    through = 1.0 - pole if step else -pole
    return linear(pole * np.eye(len(G)), through * G, np.eye(len(G)), np.zeros(G.shape), step=step, error=error)


@pytest.mark.parametrize("step", [None, 0.1])
def test_the_static_gain_is_that_of_a_lasting_step(step: float | None):
    G = [[2.6, 1.5], [1.4, 2.8]]
    found = gains.static_gain(_static(G, step=step))
    assert found is not None
    assert found[0] == pytest.approx(np.array(G), rel=1e-13)
    assert (found[1] < 1e-12).all()


def test_an_integrator_has_no_static_gain_even_where_differences_left_a_little_noise():
    assert gains.static_gain(linear([[0.0]], [[1.0]], [[1.0]], [[0.0]])) is None
    assert gains.static_gain(linear([[-1e-13]], [[1.0]], [[1.0]], [[0.0]], error=1e-12)) is None
    assert gains.static_gain(linear([[1.0]], [[1.0]], [[1.0]], [[0.0]], step=0.1)) is None


def test_relative_gains_of_two_by_two_are_those_of_the_formula_and_need_no_units():
    G = np.array([[2.6, 1.5], [1.4, 2.8]])
    exact = 2.6 * 2.8 / (2.6 * 2.8 - 1.5 * 1.4)
    found = gains.relative_gains(G)
    assert found == pytest.approx(np.array([[exact, 1 - exact], [1 - exact, exact]]), rel=1e-13)
    assert gains.relative_gains(G * [[1e6], [1e-7]] * [1e-9, 1e8]) == pytest.approx(found, rel=1e-9)
    assert gains.relative_gains(np.array([[1.0, 2.0, 3.0]])).sum() == pytest.approx(1.0)


def test_changes_come_with_the_error_that_entries_leave():
    pair = pair_of(_static([[2.0, 0.0], [0.0, 1.1]]), _static([[2.0, 0.0], [0.0, 1.0]], error=1e-6))
    found = gains.static_gains(pair)
    assert found is not None
    moved = gains.singular_values(found, np.ones(2), np.ones(2))
    assert (moved.change, moved.place) == (pytest.approx(0.1), (1,))
    assert 1e-7 < moved.error < 1e-4
    relative = gains.relative_gain(found)
    assert relative.change == pytest.approx(0.0, abs=1e-12)
    # scaling by nominal sizes decides which singular value is which, and changes none of the shares of a diagonal gain
    assert gains.singular_values(found, np.array([1.0, 50.0]), np.ones(2)).place == (0,)


def test_the_sign_of_a_determinant_is_open_where_the_gain_may_be_singular():
    near = [[1.0, 1.0], [1.0, 1.0 + 1e-7]]
    sure = gains.static_gains(pair_of(_static(near), _static(near)))
    open_ = gains.static_gains(pair_of(_static(near), _static(near, error=1e-6)))
    assert sure is not None
    assert open_ is not None
    assert gains.determinant_signs(sure) == (1, 1)
    assert gains.determinant_signs(open_) == (0, 0)
    turned = gains.static_gains(pair_of(_static([[0.0, 1.0], [1.0, 0.0]]), _static(np.eye(2))))
    assert turned is not None
    assert gains.determinant_signs(turned) == (-1, 1)


def test_zeros_at_infinity_are_none():
    chain = linear(np.diag(np.ones(4), 1), np.eye(5)[:, [4]], np.eye(5)[[0]], [[0.0]])
    assert transmission_zeros(chain).size == 0
    companion = np.array([[0, 1, 0], [0, 0, 1], [-6.0, -11.0, -6.0]])
    one = linear(companion, np.eye(3)[:, [2]], [[3.0, 1.0, 0.0]], [[0.0]])
    assert transmission_zeros(one) == pytest.approx(np.array([-3.0]), rel=1e-9)
    shared = linear(companion, np.eye(3)[:, [2]], [[3.0, 1.0, 0.0], [6.0, 2.0, 0.0]], np.zeros((2, 1)))
    assert transmission_zeros(shared) == pytest.approx(np.array([-3.0]), rel=1e-9)
    none = linear(companion, np.eye(3)[:, [2]], [[3.0, 1.0, 0.0], [5.0, 1.0, 0.0]], np.zeros((2, 1)))
    assert transmission_zeros(none).size == 0


@pytest.mark.parametrize("seed", range(12))
def test_at_a_zero_the_system_matrix_loses_rank(seed: int):
    generator = np.random.default_rng(seed)
    n, m = int(generator.integers(2, 8)), int(generator.integers(1, 3))
    model = random_model(generator, n, m, m, damping=1e-2)
    for zero in transmission_zeros(model):
        whole = np.block([[zero * np.eye(n) - model.A, -model.B], [model.C, model.D]])
        sizes = np.linalg.svd(whole / np.abs(whole).max(axis=1, keepdims=True), compute_uv=False)
        assert sizes[-1] < 1e-8 * sizes[0]


def test_matching_pairs_what_is_near_and_leaves_the_rest_alone():
    pairs = matched(np.array([-1.0 + 0j, -5.0]), np.array([-5.1 + 0j, -0.9, -70.0]))
    assert set(pairs) == {(-1.0, -0.9), (-5.0, -5.1), (None, -70.0)}


@pytest.mark.parametrize("seed", range(6))
def test_other_coordinates_are_recognised_and_a_small_change_is_not(seed: int):
    generator = np.random.default_rng(seed)
    model = random_model(generator, 5, 2, 2, damping=1e-3)
    T = generator.normal(size=(5, 5)) * 10.0 ** generator.uniform(-3, 3, 5)
    turned = linear(np.linalg.solve(T, model.A @ T), np.linalg.solve(T, model.B), model.C @ T, model.D)
    assert same_behaviour(pair_of(turned, model))
    assert similar(pair_of(turned, model))
    other = random_model(np.random.default_rng(seed), 5, 2, 2, damping=1e-3, change=1e-5)
    assert not same_behaviour(pair_of(other, model))


def test_a_model_with_a_hidden_state_does_the_same_in_fewer_coordinates():
    model = linear(np.diag([-1.0, -2.0]), [[1.0], [1.0]], [[1.0, 0.5]], [[0.0]])
    more = linear(np.diag([-1.0, -2.0, -9.0]), [[1.0], [1.0], [0.0]], [[1.0, 0.5, 7.0]], [[0.0]])
    pair = pair_of(more, model)
    assert same_behaviour(pair)
    assert not similar(pair)


def test_printed_digits_are_half_a_unit_of_the_last_one():
    found = printed_to(np.array([[-2.756, 0.0], [0.0001187, 774.0]]), 4)
    assert found == pytest.approx(np.array([[5e-4, 0.0], [5e-8, 5e-2]]), rel=1e-6)
    assert printed_to(np.array([[3.0]]), 17)[0, 0] < 1e-15
