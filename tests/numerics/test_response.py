"""The worst frequency: closed forms, resonances that a grid would miss, and an oracle that shares no code."""

from __future__ import annotations

import math

import numpy as np
import pytest
from linear_models import linear, pair_of, random_model
from scipy.linalg import eigvals

from linverify.numerics.frequency import respond, respond_within
from linverify.numerics.response import channels, singularities, walk


def _resonance(natural: float, damping: float, gain: float = 1.0):
    A = np.array([[0.0, 1.0], [-(natural**2), -2 * damping * natural]])
    return linear(A, [[0.0], [gain * natural**2]], [[1.0, 0.0]], [[0.0]])


def _plain(model, omega: np.ndarray, i: int, j: int) -> np.ndarray:
    """G by modes: partial fractions, sharing no code with the package."""
    poles, modes = np.linalg.eig(model.A)
    left, right = model.C[i] @ modes, np.linalg.solve(modes, model.B[:, j])
    s = 1j * omega if model.step is None else np.exp(1j * omega * model.step)
    return (left * right / (s[:, None] - poles)).sum(axis=1) + model.D[i, j]


def test_a_gain_error_is_the_same_at_every_frequency():
    (one,) = channels(pair_of(_resonance(2.0, 0.1, 1.03), _resonance(2.0, 0.1)), 0.01, 100.0, 0.0)
    assert one.share == pytest.approx(0.03, rel=1e-9)
    assert one.highest == pytest.approx(0.03, rel=1e-9)
    assert one.error < 1e-10


def test_a_first_order_lag_against_a_gain_is_worst_at_the_upper_end():
    reference = linear(np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)), [[1.0]])
    lag = linear([[-5.0]], [[5.0]], [[1.0]], [[0.0]])
    (one,) = channels(pair_of(lag, reference), 0.1, 2.0, 0.0)
    # |1/(1 + jw/5) - 1| = (w/5) / sqrt(1 + (w/5)^2)
    assert (one.frequency, one.share) == (2.0, pytest.approx(0.4 / math.sqrt(1.16), rel=1e-12))


def test_the_worst_of_two_lags_lies_where_calculus_puts_it():
    reference, delivered = linear([[-1.0]], [[1.0]], [[1.0]], [[0.0]]), linear([[-2.0]], [[2.0]], [[1.0]], [[0.0]])
    (one,) = channels(pair_of(delivered, reference), 0.01, 100.0, 1.0)
    # against the peak, 1: |1/(1 + jw/2) - 1/(1 + jw)| = (w/2) / sqrt((1 + w^2/4)(1 + w^2)), largest at w = sqrt 2
    assert one.frequency == pytest.approx(math.sqrt(2.0), rel=1e-6)
    assert one.share == pytest.approx(math.sqrt(1.0001) / 3.0, rel=1e-9)  # the peak is that of the band


@pytest.mark.parametrize("damping", [1e-2, 1e-3, 1e-4, 1e-5, 1e-6])
def test_a_resonance_that_moved_by_its_own_width_is_met(damping: float):
    natural = 7.0
    reference, delivered = _resonance(natural, damping), _resonance(natural * (1 + damping), damping)
    (one,) = channels(pair_of(delivered, reference), 0.01, 1000.0, 0.01)
    near = natural * (1 + damping * np.linspace(-6, 6, 200_001))
    gap = np.abs(_plain(delivered, near, 0, 0) - _plain(reference, near, 0, 0))
    size = np.abs(_plain(reference, near, 0, 0))
    assert one.share == pytest.approx(float((gap / size).max()), rel=2e-6)
    assert one.share > 1.0


def test_a_delivered_resonance_that_the_plant_does_not_have_is_met():
    quiet = linear(np.diag([-1.0, -3.0]), [[1.0], [1.0]], [[1.0, 1.0]], [[0.0]])
    A = np.zeros((4, 4))
    A[:2, :2] = quiet.A
    A[2:, 2:] = [[0.0, 1.0], [-900.0, -2e-5 * 30.0]]
    B, C = np.vstack([quiet.B, [[0.0], [1e-4]]]), np.hstack([quiet.C, [[1.0, 0.0]]])
    (one,) = channels(pair_of(linear(A, B, C, [[0.0]]), quiet), 0.01, 1000.0, 1e-3)
    # 1e-4 / (2 z w^2) at 30 rad/s against |G| near 2 / 30
    assert one.frequency == pytest.approx(30.0, rel=1e-5)
    assert one.share == pytest.approx(1e-4 / (2e-5 * 900.0) / abs(_plain(quiet, np.array([30.0]), 0, 0)[0]), rel=1e-3)


def test_a_notch_is_judged_against_the_floor():
    # zeros at +-j: the plant passes nothing at 1 rad/s, where the delivered model passes 1 %
    A, B = np.array([[0.0, 1.0], [-4.0, -4.0]]), [[0.0], [1.0]]
    plant, delivered = linear(A, B, [[1.0 - 4.0, -4.0]], [[1.0]]), linear(A, B, [[1.0 - 4.0, -4.0]], [[1.01]])
    (bare,) = channels(pair_of(delivered, plant), 0.1, 10.0, 0.0)
    assert bare.share > 1e6
    (one,) = channels(pair_of(delivered, plant), 0.1, 10.0, 0.05)
    assert one.share == pytest.approx(0.01 / (0.05 * one.peak), rel=1e-6)
    assert one.peak == pytest.approx(99.0 / 104.0, rel=1e-6)


def test_discrete_models_are_compared_on_the_unit_circle_up_to_nyquist():
    reference = linear([[0.5]], [[0.5]], [[1.0]], [[0.0]], step=0.1)
    delivered = linear([[0.6]], [[0.4]], [[1.0]], [[0.0]], step=0.1)
    nyquist = math.pi / 0.1
    (one,) = channels(pair_of(delivered, reference), 0.1, nyquist, 0.0)
    omega = np.linspace(0.1, nyquist, 100_001)
    gap = np.abs(_plain(delivered, omega, 0, 0) - _plain(reference, omega, 0, 0)) / np.abs(
        _plain(reference, omega, 0, 0)
    )
    assert one.share == pytest.approx(float(gap.max()), rel=1e-8)
    with pytest.raises(ValueError, match="sample time"):
        channels(pair_of(linear([[0.6]], [[0.4]], [[1.0]], [[0.0]], step=0.2), reference), 0.1, 10.0, 0.0)


@pytest.mark.parametrize("seed", range(24))
def test_no_grid_and_no_level_set_finds_a_worse_frequency(seed: int):
    generator = np.random.default_rng(seed)
    n, m, k = (int(generator.integers(1, high)) for high in (9, 4, 4))
    reference = random_model(generator, n, m, k, damping=1e-5)
    delivered = random_model(np.random.default_rng(seed), n, m, k, damping=1e-5, change=1e-3)
    found = {(one.output, one.input): one for one in channels(pair_of(delivered, reference), 0.01, 100.0, 0.01)}
    poles = np.concatenate([np.linalg.eigvals(reference.A), np.linalg.eigvals(delivered.A)])
    near = [abs(p.imag) + abs(p.real) * np.linspace(-4, 4, 81) for p in poles]
    omega = np.unique(np.clip(np.concatenate([np.geomspace(0.01, 100.0, 4000), *near]), 0.01, 100.0))
    for i in range(k):
        for j in range(m):
            one = found[f"y{i}", f"u{j}"]
            size = np.abs(_plain(reference, omega, i, j))
            gap = np.abs(_plain(delivered, omega, i, j) - _plain(reference, omega, i, j))
            assert one.peak >= size.max() * (1 - 1e-7)
            assert one.share >= (gap / np.maximum(size, 0.01 * one.peak)).max() * (1 - 1e-5)
            assert not _crossings(delivered, reference, i, j, 1.001 * one.share, 0.01 * one.peak)


def _crossings(delivered, reference, i: int, j: int, level: float, least: float) -> list[float]:
    """Frequencies in the band where |difference| exceeds level x both |reference| and `least`, by level sets.

    Zeros of D(-s) D(s) - level^2 R(-s) R(s) on the imaginary axis, by eigenvalues of a pencil; every eigenvalue and
    every middle between neighbours is tried by evaluation, whatever its real part.
    """
    n = len(reference.A) + len(delivered.A)
    zero = np.zeros((len(reference.A), len(delivered.A)))
    A = np.block([[reference.A, zero], [zero.T, delivered.A]])
    B = np.concatenate([reference.B[:, j], delivered.B[:, j]])[:, None]
    R = np.concatenate([reference.C[i], 0 * delivered.C[i]])[None]
    D = np.concatenate([-reference.C[i], delivered.C[i]])[None]
    dD, dR = delivered.D[i, j] - reference.D[i, j], reference.D[i, j]
    Q = D.T @ D - level**2 * R.T @ R
    S = D.T * dD - level**2 * R.T * dR
    whole = np.block(
        [
            [A, np.zeros((n, n)), B],
            [-Q, -A.T, -S],
            [S.T, B.T, np.array([[dD**2 - level**2 * dR**2]])],
        ]
    )
    found = eigvals(whole, np.diag(np.r_[np.ones(2 * n), 0.0]))
    found = np.abs(found[np.isfinite(found)].imag)
    tried = np.unique(found[(found > 0.01) & (found < 100.0)])
    tried = np.concatenate([tried, 0.5 * (tried[1:] + tried[:-1])])
    size = np.maximum(np.abs(_plain(reference, tried, i, j)), least)
    gap = np.abs(_plain(delivered, tried, i, j) - _plain(reference, tried, i, j))
    return [float(omega) for omega in tried[gap > level * size]]


def test_the_error_bound_holds_for_entries_moved_within_their_errors():
    generator = np.random.default_rng(3)
    for _ in range(20):
        model = random_model(generator, 5, 2, 2, damping=1e-3)
        errors = {name: 1e-7 * np.abs(getattr(model, name)) for name in "ABCD"}
        omega = np.geomspace(0.01, 100.0, 60)
        response, bound = respond_within(model, errors, omega)
        moved = linear(
            *(getattr(model, name) + errors[name] * generator.choice([-1, 1], errors[name].shape) for name in "ABCD")
        )
        assert (np.abs(respond(moved, omega) - response) <= bound).all()
        assert (bound < 0.5 * np.abs(response).max()).mean() > 0.9


def test_an_undamped_pole_in_the_band_leaves_the_response_open():
    plant = _resonance(2.0, 0.0)
    (one,) = channels(pair_of(_resonance(2.0, 0.0), plant), 0.1, 10.0, 0.01)
    assert math.isinf(one.highest)
    assert one.lowest <= 1e-6


def test_an_undamped_pole_of_the_delivered_model_alone_is_a_difference_without_bound():
    (one,) = channels(pair_of(_resonance(2.0, 0.0), _resonance(2.0, 0.3)), 0.1, 10.0, 0.01)
    assert one.lowest > 1e3
    assert math.isfinite(one.peak)


def test_units_of_states_do_not_matter():
    generator = np.random.default_rng(8)
    reference, delivered = (random_model(np.random.default_rng(5), 6, 2, 2, damping=1e-4, change=c) for c in (0, 1e-3))
    T = 10.0 ** generator.uniform(-8, 8, 6)
    turned = [linear(m.A * T / T[:, None], m.B / T[:, None], m.C * T, m.D) for m in (delivered, reference)]
    for one, other in zip(
        channels(pair_of(delivered, reference), 0.01, 100.0, 0.01),
        channels(pair_of(*turned), 0.01, 100.0, 0.01),
        strict=True,
    ):
        assert other.share == pytest.approx(one.share, rel=1e-6)


def test_a_walk_is_short_where_nothing_happens_and_dense_where_something_does():
    pair = pair_of(_resonance(2.0, 1e-6), _resonance(2.0, 1e-6))
    omega = walk(singularities(pair), 0.001, 1000.0)
    assert len(omega) < 1500
    assert np.abs(omega - 2.0).min() < 2e-6
    assert (np.diff(omega) > 0).all()
