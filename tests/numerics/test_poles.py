"""Poles: closed forms, bad scaling, order, difference equations."""

from __future__ import annotations

import math

import numpy as np
import pytest

from linverify.numerics.poles import eigenvalues


def test_an_oscillator_in_closed_form() -> None:
    natural, damping = 2.0, 0.1
    A = np.array([[0.0, 1.0], [-(natural**2), -2 * damping * natural]])
    first, second = eigenvalues(A)
    assert first.value == second.value.conjugate()
    assert first.value.imag > 0
    for pole in (first, second):
        assert pole.natural == pytest.approx(natural, rel=1e-14)
        assert pole.damping == pytest.approx(damping, rel=1e-13)
        assert pole.hertz == pytest.approx(natural / (2 * math.pi), rel=1e-14)
        assert pole.time_constant == pytest.approx(1 / (damping * natural), rel=1e-13)
        assert pole.stable
        assert math.isnan(pole.z.real)


def test_hertz_counts_seconds_whatever_the_time_unit() -> None:
    """A minute as time unit: 2 pi rad/min is one cycle a minute."""
    A = np.array([[0.0, 2 * math.pi], [-2 * math.pi, 0.0]])
    pole = eigenvalues(A, seconds=60.0)[0]
    assert pole.hertz == pytest.approx(1 / 60, rel=1e-14)
    assert pole.time_constant == math.inf
    assert not pole.stable


def test_unstable_and_at_the_origin() -> None:
    origin, unstable = eigenvalues(np.diag([0.5, 0.0]))
    assert (origin.natural, origin.time_constant) == (0.0, math.inf)
    assert math.isnan(origin.damping)
    assert (unstable.damping, unstable.time_constant) == (-1.0, -2.0)
    assert not origin.stable
    assert not unstable.stable


def test_units_do_not_cost_digits() -> None:
    sizes = np.array([1e9, 1e-7, 1.0])
    A = np.array([[-1.0, 2.0, 0.3], [-2.0, -1.0, 0.1], [0.5, 0.2, -1e-3]])
    scaled = A * sizes[:, np.newaxis] / sizes
    plain = np.array([pole.value for pole in eigenvalues(A)])
    found = np.array([pole.value for pole in eigenvalues(scaled, sizes)])
    np.testing.assert_allclose(found, plain, rtol=1e-12)


def test_the_order_is_by_frequency_with_pairs_together() -> None:
    rng = np.random.default_rng(7)
    blocks = [np.array([[-0.1, w], [-w, -0.1]]) for w in (3.0, 1.0, 2.0)]
    A = np.zeros((8, 8))
    for index, block in enumerate(blocks):
        A[2 * index : 2 * index + 2, 2 * index : 2 * index + 2] = block
    A[6, 6], A[7, 7] = -1.5, 1.5
    expected = [1.0, 1.0, 1.5, 1.5, 2.0, 2.0, 3.0, 3.0]
    for _ in range(5):
        T = np.linalg.qr(rng.normal(size=(8, 8)))[0]
        poles = eigenvalues(T @ A @ T.T)
        assert [round(pole.natural, 1) for pole in poles] == expected
        assert [np.sign(round(pole.value.imag, 6)) for pole in poles] == [1, -1, 0, 0, 1, -1, 1, -1]
        assert [round(pole.value.real, 6) for pole in poles[2:4]] == [-1.5, 1.5]


def test_a_difference_equation_is_mapped() -> None:
    step, continuous = 0.1, complex(-0.3, 2.0)
    z = np.exp(continuous * step)
    A = np.array([[z.real, z.imag], [-z.imag, z.real]])
    first, second = eigenvalues(A, step=step)
    assert first.value == pytest.approx(continuous, rel=1e-12)
    assert second.value == pytest.approx(continuous.conjugate(), rel=1e-12)
    assert first.z == pytest.approx(z, rel=1e-14)
    assert eigenvalues(np.array([[1.1]]), step=step)[0].value.real > 0


def test_a_dead_beat_pole_is_infinitely_fast() -> None:
    (pole,) = eigenvalues(np.zeros((1, 1)), step=0.1)
    assert pole.value.real == -math.inf
    assert (pole.natural, pole.damping, pole.stable) == (math.inf, 1.0, True)
    assert pole.time_constant == 0.0


def test_misuse_and_nothing() -> None:
    assert eigenvalues(np.zeros((0, 0))) == ()
    with pytest.raises(ValueError, match="square"):
        eigenvalues(np.zeros((2, 3)))
    with pytest.raises(ValueError, match="finite"):
        eigenvalues(np.array([[np.nan]]))
