"""Bounds of the structured singular value of single matrices."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from linverify.numerics.scalings import from_above, from_below, scaled


def matrices(seed: int, number: int, m: int, spread: float = 1.0) -> np.ndarray:
    rng = np.random.default_rng(seed)
    plain = rng.normal(size=(number, m, m)) + 1j * rng.normal(size=(number, m, m))
    return plain * 10 ** rng.uniform(-spread, spread, (number, m, m))


@pytest.mark.parametrize("m", [1, 2, 3])
def test_bounds_meet_for_up_to_three_channels(m: int) -> None:
    """The bound from above is the value itself there (Packard & Doyle, Automatica 29(1), 1993)."""
    M = matrices(m, 200, m)
    above, D = from_above(M)
    below, _ = from_below(M, D)
    assert (below <= above * (1.0 + 1e-12)).all()
    assert (above <= below * (1.0 + 1e-7)).all()


@pytest.mark.parametrize("m", [4, 6])
def test_bounds_are_near_for_more(m: int) -> None:
    M = matrices(m, 40, m)
    above, D = from_above(M)
    below, _ = from_below(M, D)
    assert (below <= above * (1.0 + 1e-12)).all()
    assert (above <= below * 1.05).all()
    assert np.median(above / below) < 1.0 + 1e-6


def test_two_channels_against_a_search_of_one_number() -> None:
    M = matrices(7, 40, 2)
    above, _ = from_above(M)
    for one, found in zip(M, above, strict=True):

        def size(y: float, one: np.ndarray = one) -> float:
            return float(np.linalg.norm(one * np.exp(np.array([[0.0, -y], [y, 0.0]])), 2))

        best = minimize_scalar(size, bounds=(-8.0, 8.0), method="bounded", options={"xatol": 1e-10})
        assert found == pytest.approx(best.fun, rel=1e-7)


def test_the_scaling_gives_the_bound_and_the_phases_the_other() -> None:
    M = matrices(3, 20, 3)
    above, D = from_above(M)
    below, phases = from_below(M, D)
    assert D[:, 0] == pytest.approx(np.ones(20))
    assert np.linalg.norm(scaled(M, D), 2, axis=(1, 2)) == pytest.approx(above, rel=1e-12)
    turned = np.linalg.eigvals(M * np.exp(1j * phases)[:, np.newaxis, :])
    assert np.abs(turned).max(axis=1) == pytest.approx(below, rel=1e-12)


def test_known_values() -> None:
    """Diagonal: largest entry; [[0, a], [b, 0]]: sqrt(|a b|); triangle: its diagonal; rank one: sum of |u_i v_i|."""
    u, v = np.array([1.0, 2.0j, -0.5]), np.array([0.3, 1.0, 4.0j])
    M = np.array(
        [np.diag([1.0, -3.0, 2.0j]), np.outer(u, v), [[0, 4, 0], [9, 0, 0], [0, 0, 1]], np.zeros((3, 3))],
        dtype=np.complex128,
    )
    above, D = from_above(M)
    below, _ = from_below(M, D)
    exact = np.array([3.0, 0.3 + 2.0 + 2.0, 6.0, 0.0])
    assert above == pytest.approx(exact, rel=1e-9)
    assert below == pytest.approx(exact, rel=1e-9)
    triangle = np.array([[[1.0, 50.0], [0.0, 2.0]]], dtype=np.complex128)
    assert from_above(triangle)[0] == pytest.approx(2.0, rel=1e-4)
