"""Discretization by the matrix exponential against closed forms."""

from __future__ import annotations

import math

import numpy as np
import pytest

from linverify.numerics.hold import held, responses, straight


def test_first_order_lag_under_a_held_and_a_straight_input() -> None:
    A, B, h = np.array([[-2.0]]), np.array([[3.0]]), 0.4
    decay = math.exp(-0.8)
    Ad, Bd = held(A, B, h)
    assert Ad[0, 0] == pytest.approx(decay, rel=1e-15)
    assert Bd[0, 0] == pytest.approx(1.5 * (1 - decay), rel=1e-14)
    Ad, G0, G1 = straight(A, B, h)
    ramp = 1.5 * (1.0 - (1 - decay) / 0.8)  # answer at h to u = t / h
    assert G1[0, 0] == pytest.approx(ramp, rel=1e-13)
    assert G0[0, 0] == pytest.approx(1.5 * (1 - decay) - ramp, rel=1e-13)


def test_double_integrator_is_exact() -> None:
    A, B = np.array([[0.0, 1.0], [0.0, 0.0]]), np.array([[0.0], [1.0]])
    Ad, Bd = held(A, B, 0.5)
    assert Ad.tolist() == [[1.0, 0.5], [0.0, 1.0]]
    assert Bd.ravel() == pytest.approx([0.125, 0.5], rel=1e-15)
    _, G0, G1 = straight(A, B, 0.5)
    assert G1.ravel() == pytest.approx([0.125 / 3, 0.25], rel=1e-14)
    assert (G0 + G1).ravel() == pytest.approx(Bd.ravel(), rel=1e-14)


def test_oscillator_over_many_instants() -> None:
    w = 7.0
    A, B = np.array([[0.0, w], [-w, 0.0]]), np.array([[0.0], [w]])
    times = np.array([0.01, 0.3, 2.0])
    P, Q, R = responses(A, B, times)
    for index, t in enumerate(times):
        c, s = math.cos(w * t), math.sin(w * t)
        assert P[index] == pytest.approx(np.array([[c, s], [-s, c]]), abs=1e-13)
        assert Q[index].ravel() == pytest.approx([1 - c, s], abs=1e-13)
        assert R[index].ravel() == pytest.approx([t - s / w, (1 - c) / w], abs=1e-13)


def test_units_of_very_unlike_size_cost_no_digits() -> None:
    A, B = np.array([[-1.0, 2.0], [0.5, -3.0]]), np.array([[1.0], [0.2]])
    scale, gain = np.diag([1e7, 1e-6]), 1e9
    Ad, G0, G1 = straight(A, B, 0.7)
    far, far0, far1 = straight(scale @ A @ np.linalg.inv(scale), scale @ B * gain, 0.7)
    assert np.linalg.inv(scale) @ far @ scale == pytest.approx(Ad, rel=1e-13)
    assert np.linalg.inv(scale) @ far0 / gain == pytest.approx(G0, rel=1e-12)
    assert np.linalg.inv(scale) @ far1 / gain == pytest.approx(G1, rel=1e-12)


def test_a_model_without_inputs_or_with_a_zero_matrix() -> None:
    Ad, Bd = held(np.zeros((2, 2)), np.zeros((2, 1)), 1.0)
    assert Ad.tolist() == [[1.0, 0.0], [0.0, 1.0]]
    assert not Bd.any()
    Ad, Bd = held(np.array([[-1.0]]), np.zeros((1, 0)), 1.0)
    assert Bd.shape == (1, 0)
    assert Ad[0, 0] == pytest.approx(math.exp(-1.0), rel=1e-15)
