"""Poles that a loop cannot move: by construction, in coordinates of all kinds, and never one that it does move."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from linverify.numerics.minimal import reached
from linverify.numerics.transfer import Transfer
from linverify.numerics.unmoved import split

NAMES = tuple("abcdefgh")


def at(one: Transfer, s: complex) -> Any:
    return (one.C @ np.linalg.solve(s * np.eye(len(one.A)) - one.A, one.B) + one.D)[0, 0]


def hidden(seed: int) -> tuple[Transfer, list[float]]:
    """Poles 1 to 4 moved; 5 not reached, 6 not seen, 7 neither."""
    rng = np.random.default_rng(seed)
    A = np.diag([-1.0, -2.0, -3.0, -4.0, -5.0, -6.0, -7.0])
    A[:4, 4] = rng.normal(size=4)  # what is not reached may act on others
    A[5, :4] = rng.normal(size=4)  # and others on what is not seen
    B, C = rng.normal(size=(7, 1)), rng.normal(size=(1, 7))
    B[[4, 6]], C[:, [5, 6]] = 0.0, 0.0
    return Transfer(A, B, C, np.zeros((1, 1))), [-7.0, -6.0, -5.0]


@pytest.mark.parametrize("seed", range(8))
def test_whole_states_are_told_apart_exactly(seed: int) -> None:
    loop, poles = hidden(seed)
    found = split(loop, NAMES[:7])
    assert sorted(one.value.real for one in found.unmoved) == poles
    assert {one.shares[0][0] for one in found.unmoved} == {"e", "f", "g"}
    assert len(found.moved.A) == 4
    assert at(found.moved, 1.0j) == pytest.approx(at(loop, 1.0j), rel=1e-12)


@pytest.mark.parametrize("seed", range(8))
def test_directions_are_told_apart_in_any_coordinates_and_units(seed: int) -> None:
    loop, poles = hidden(seed)
    rng = np.random.default_rng(seed)
    T = np.linalg.qr(rng.normal(size=(7, 7)))[0] * 10.0 ** rng.uniform(-3, 3, size=(7, 1))
    turned = Transfer(T @ loop.A @ np.linalg.inv(T), T @ loop.B, loop.C @ np.linalg.inv(T), loop.D)
    found = split(turned, NAMES[:7])
    assert sorted(one.value.real for one in found.unmoved) == pytest.approx(poles, rel=1e-6)
    assert at(found.moved, 1.0j) == pytest.approx(at(loop, 1.0j), rel=1e-7)


@pytest.mark.parametrize("seed", range(20))
def test_nothing_is_left_out_of_a_loop_that_moves_everything(seed: int) -> None:
    rng = np.random.default_rng(seed)
    n = int(rng.integers(1, 9))
    scale = 10.0 ** rng.uniform(-4, 4, size=n)
    A = rng.normal(size=(n, n)) * scale[:, np.newaxis] / scale
    loop = Transfer(A, rng.normal(size=(n, 1)) * scale[:, np.newaxis], rng.normal(size=(1, n)) / scale, np.eye(1))
    found = split(loop, NAMES[:n])
    assert not found.unmoved
    assert found.moved.A is not None
    assert len(found.moved.A) == n


def test_a_chain_of_integrators_that_nobody_sees() -> None:
    A = np.array([[-1.0, 0.0, 0.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0]])
    found = split(Transfer(A, np.array([[1.0], [0.0], [0.0]]), np.array([[1.0, 0.0, 0.0]]), np.zeros((1, 1))), "abc")
    assert [one.value for one in found.unmoved] == [0.0, 0.0]
    assert [one.shares for one in found.unmoved] == [(("b", 1.0),), (("c", 1.0),)]


def test_an_oscillator_that_nothing_reaches_is_named_with_both_its_states() -> None:
    A = np.array([[-1.0, 1.0, 0.0], [0.0, 0.0, 2.0], [0.0, -2.0, 0.0]])
    found = split(Transfer(A, np.array([[1.0], [0.0], [0.0]]), np.array([[1.0, 0.0, 0.0]]), np.zeros((1, 1))), "abc")
    assert sorted(one.value.imag for one in found.unmoved) == pytest.approx([-2.0, 2.0])
    assert dict(found.unmoved[0].shares) == pytest.approx({"b": 0.5, "c": 0.5})


@pytest.mark.parametrize("step", [1e-2, 1e-5])
def test_fast_sampling_hides_no_coupling(step: float) -> None:
    """x' = -x + u behind a hold, and an integral controller: at small steps all entries but the ones are small."""
    a = np.exp(-step)
    A = np.array([[a, 0.0], [step, 1.0]])
    loop = Transfer(A, np.array([[1.0 - a], [0.0]]), np.array([[0.0, 1.0]]), np.zeros((1, 1)), step=step)
    assert not split(loop, "ab").unmoved
    rng = np.random.default_rng(0)
    T = np.linalg.qr(rng.normal(size=(2, 2)))[0]
    turned = Transfer(T @ A @ T.T, T @ loop.B, loop.C @ T.T, loop.D, step=step)
    assert not split(turned, "ab").unmoved


def test_slow_and_fast_together() -> None:
    """Poles from 1e-7 to 1e5, weakly coupled: every one of them is moved."""
    poles = np.array([-1e-7, -1e-3, -1.0, -1e2, -1e5])
    loop = Transfer(np.diag(poles), np.ones((5, 1)), (-poles * 0.1)[np.newaxis], np.zeros((1, 1)))
    assert not split(loop, NAMES[:5]).unmoved
    cascade = np.diag(poles) + np.diag(-poles[1:], -1)
    loop = Transfer(cascade, np.eye(5, 1), np.eye(1, 5, 4), np.zeros((1, 1)))
    assert not split(loop, NAMES[:5]).unmoved


@pytest.mark.parametrize("seed", range(40))
def test_weak_coupling_spoils_no_basis(seed: int) -> None:
    """What a step adds may be tiny beside the rounding along what is there already."""
    rng = np.random.default_rng(seed)
    n = int(rng.integers(2, 7))
    A, B = rng.normal(size=(n, n)), np.zeros((n, 2))
    A[n // 2 :, : n // 2] *= 10.0 ** rng.uniform(-13.0, -9.0)
    B[: n // 2] = rng.normal(size=(n // 2, 2))
    turn = np.linalg.qr(rng.normal(size=(n, n)))[0]
    basis = reached(turn @ A @ turn.T, turn @ B)
    assert basis.shape[1] <= n
    assert np.abs(basis.T @ basis - np.eye(basis.shape[1])).max() < 1e-13
