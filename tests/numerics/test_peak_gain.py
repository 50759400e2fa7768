"""The peak gain of transfer matrices against closed forms and scans."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from channels import highest, respond, scan, sigma, transfer
from scipy.signal import cont2discrete

from linverify.core.outcome import Outcome
from linverify.numerics import peak_gain
from linverify.numerics.mapped import mapped
from linverify.numerics.peak_gain import axis_values, peak
from linverify.numerics.transfer import Transfer


def resonance(damping: float, size: float = 1.0) -> Transfer:
    """size^2 / (s^2 + 2 damping size s + size^2)."""
    A = np.array([[0.0, size], [-size, -2.0 * damping * size]])
    return Transfer(A, np.array([[0.0], [size]]), np.array([[1.0, 0.0]]), np.zeros((1, 1)))


@pytest.mark.parametrize("damping", [0.5, 0.1, 1e-3, 1e-6, 1e-9])
@pytest.mark.parametrize("size", [1e-4, 1.0, 300.0])
def test_resonance_of_any_sharpness(damping: float, size: float) -> None:
    found = peak(resonance(damping, size))
    exact = 1.0 / (2.0 * damping * math.sqrt(1.0 - damping**2))
    assert found.outcome is Outcome.DONE
    assert found.value == pytest.approx(exact, rel=max(1e-9, 1e-15 / damping))
    assert abs(found.value - exact) <= found.error
    assert found.frequency == pytest.approx(size * math.sqrt(1.0 - 2.0 * damping**2), rel=1e-4)


def test_supremum_at_infinity_and_at_zero_counts() -> None:
    lag = Transfer(np.array([[-2.0]]), np.array([[1.0]]), np.array([[2.0]]), np.zeros((1, 1)))
    assert peak(lag).value == pytest.approx(1.0, rel=1e-12)
    assert peak(lag).frequency == 0.0
    lead = replace(lag, C=-lag.C, D=np.ones((1, 1)))  # s / (s + 2)
    assert peak(lead).value == pytest.approx(1.0, rel=1e-6)
    assert peak(lead).frequency == math.inf


def test_pole_on_the_axis_is_infinite_unless_hidden() -> None:
    integrator = Transfer(np.zeros((1, 1)), np.ones((1, 1)), np.ones((1, 1)), np.zeros((1, 1)))
    assert peak(integrator).value == math.inf
    swing = Transfer(np.array([[0.0, 3.0], [-3.0, 0.0]]), np.eye(2), np.eye(2), np.zeros((2, 2)))
    assert peak(swing).value == math.inf
    assert peak(swing).frequency == pytest.approx(3.0)
    double = Transfer(np.diag([0.0, -1.0]), np.array([[1.0], [1.0]]), np.array([[0.0, 2.0]]), np.zeros((1, 1)))
    assert peak(double).value == pytest.approx(2.0)


def test_poles_on_both_sides_do_not_matter() -> None:
    stable = peak(resonance(0.01))
    unstable = resonance(0.01)
    assert peak(replace(unstable, A=-unstable.A)).value == pytest.approx(stable.value, rel=1e-9)


def test_repeated_poles_are_no_axis_poles() -> None:
    n = 6
    chain = Transfer(np.diag(np.ones(n - 1), 1) - np.eye(n), np.eye(n)[:, [-1]], np.eye(n)[[0]], np.zeros((1, 1)))
    assert peak(chain).value == pytest.approx(1.0, rel=1e-9)


def test_static_and_empty() -> None:
    gain = Transfer(np.zeros((0, 0)), np.zeros((0, 2)), np.zeros((2, 0)), np.array([[3.0, 0.0], [4.0, 0.0]]))
    assert peak(gain).value == pytest.approx(5.0)
    assert peak(replace(gain, D=np.zeros((2, 2)))).value == 0.0


def test_not_finite_is_an_outcome() -> None:
    assert peak(replace(resonance(0.1), D=np.array([[math.nan]]))).outcome is Outcome.NOT_FINITE


@pytest.mark.parametrize("seed", range(60))
def test_no_narrow_peak_is_missed(seed: int) -> None:
    rng = np.random.default_rng(seed)
    one = transfer(rng, int(rng.integers(1, 13)), *rng.integers(1, 5, 2), lightest=1e-5, feed=rng.integers(0, 2))
    poles = np.linalg.eigvals(one.A)
    found = peak(one)
    scanned = highest(lambda omega: sigma(respond(one, omega)), scan(poles), poles)
    assert found.outcome is Outcome.DONE
    assert scanned <= found.value + found.error
    assert scanned == pytest.approx(found.value, rel=1e-6, abs=found.error)


@pytest.mark.parametrize("step", [1e-5, 1e-2])
@pytest.mark.parametrize("seed", range(8))
def test_sampled_peaks(seed: int, step: float) -> None:
    rng = np.random.default_rng(seed)
    slow = transfer(rng, int(rng.integers(2, 9)), 2, 2, lightest=1e-3)
    A, B, C, D, _ = cont2discrete((slow.A, slow.B, slow.C, slow.D), step)
    one = Transfer(A, B, C, D, step=step)
    # the scan goes round the circle, in which the poles are so near to each other as the step is short
    omega = scan(np.linalg.eigvals(slow.A), 1e-4, math.pi / step)
    omega = omega[omega <= math.pi / step]
    found = peak(one)
    scanned = float(sigma(respond(one, omega)).max())
    assert scanned <= (found.value + found.error) * (1.0 + 1e-6)
    assert found.value == pytest.approx(scanned, rel=2e-3)
    assert found.frequency <= math.pi / step * (1.0 + 1e-12)


def test_pole_at_the_nyquist_frequency() -> None:
    one = Transfer(np.array([[-1.0]]), np.ones((1, 1)), np.ones((1, 1)), np.zeros((1, 1)), step=0.1)
    assert (peak(one).value, peak(one).frequency) == (math.inf, math.pi / 0.1)


@pytest.mark.parametrize("seed", range(6))
def test_pencil_and_hamiltonian_matrix_agree(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    one = mapped(transfer(np.random.default_rng(seed), 6, 2, 3, feed=1.0))
    level = 1.2 * float(np.linalg.norm(one.D, 2))
    by_matrix = axis_values(one, level)
    monkeypatch.setattr(peak_gain, "SINGULAR", 10.0)
    by_pencil = axis_values(one, level)
    assert len(by_matrix) == len(by_pencil) == 12
    assert np.abs(by_matrix[:, np.newaxis] - by_pencil).min(axis=1).max() < 1e-6 * np.abs(by_pencil).max()
