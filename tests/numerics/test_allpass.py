"""The chain that stands for a dead time: of size one everywhere, right up to the stated frequency, well scaled."""

from __future__ import annotations

from math import factorial

import numpy as np
import pytest

from linverify.numerics.allpass import all_pass, good_up_to


def response(delay: float, order: int, w: float) -> complex:
    A, b, c, d = all_pass(delay, order)
    return complex(c @ np.linalg.solve(1j * w * np.eye(order) - A, b) + d)


@pytest.mark.parametrize("order", [1, 2, 3, 4, 7, 8])
def test_it_is_the_pade_approximation(order: int) -> None:
    """exp(-s) as D(-s) / D(s) with D = sum over k of (2 N - k)! N! / ((2 N)! k! (N - k)!) s^k (value from memory)."""
    n, terms = factorial(order), range(order + 1)
    below = np.array(
        [factorial(2 * order - k) * n / factorial(2 * order) / factorial(k) / factorial(order - k) for k in terms]
    )
    for w in (0.3, 1.7, 4.0):
        powers = (1j * w) ** np.arange(order + 1)
        expected = (below @ (powers * (-1.0) ** np.arange(order + 1))) / (below @ powers)
        assert response(1.0, order, w) == pytest.approx(complex(expected), rel=1e-9)


@pytest.mark.parametrize("order", [5, 6])
def test_its_size_is_one_at_every_frequency(order: int) -> None:
    for w in np.geomspace(1e-2, 1e4, 30):
        assert abs(response(0.03, order, float(w))) == pytest.approx(1.0, rel=1e-12)


@pytest.mark.parametrize("delay", [1e-4, 0.5, 40.0])
def test_it_is_good_up_to_the_frequency_that_is_told(delay: float) -> None:
    limit = good_up_to(delay)
    for share in (0.1, 0.5, 1.0):
        assert abs(response(delay, 6, share * limit) - np.exp(-1j * share * limit * delay)) <= 0.01
    assert abs(response(delay, 6, 1.1 * limit) - np.exp(-1j * 1.1 * limit * delay)) > 0.01


def test_it_is_stable() -> None:
    for order in (2, 5, 6, 9):
        assert np.linalg.eigvals(all_pass(2.0, order)[0]).real.max() < 0.0
