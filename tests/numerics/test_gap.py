"""The nu-gap and the stability margin: published values, brute force on the axis, and what theory says of them."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from channels import closed, respond, scan, transfer
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.signal import cont2discrete, tf2ss

from linverify.core.outcome import Outcome
from linverify.numerics.gap import Gap, nu_gap, stability_margin
from linverify.numerics.multiloop import around
from linverify.numerics.transfer import Transfer

ONE = np.ones(1)


def fraction(top: list[float], below: list[float]) -> Transfer:
    return Transfer(*tf2ss(top, below))


def gain(D: np.ndarray) -> Transfer:
    k, m = D.shape
    return Transfer(np.zeros((0, 0)), np.zeros((0, m)), np.zeros((k, 0)), D)


def gap(one: Transfer, other: Transfer) -> Gap:
    k, m = one.D.shape
    return nu_gap(one, other, np.ones(m), np.ones(k))


# K. Astrom & R. Murray, Feedback Systems, chapter on robust performance (value from memory); K. Zhou & J. Doyle,
# Essentials of Robust Control, gap and nu-gap chapter (value from memory); the last row is derived.
@pytest.mark.parametrize(
    ("one", "other", "printed", "within", "exact"),
    [
        (fraction([1], [1, 0]), fraction([1], [1, 0.1]), 0.0995, 5e-5, 0.1 / math.sqrt(1.01)),
        (fraction([100], [2, 1]), fraction([100], [2, -1]), 0.02, 5e-3, 200.0 / 10001.0),
        (fraction([100], [2, 1]), fraction([100], [1, 2, 1]), 0.8988, 5e-5, 0.898769),
        (fraction([1, -1], [1, 1]), fraction([2, -1], [1, 1]), 1.0 / math.sqrt(10.0), 1e-9, 1.0 / math.sqrt(10.0)),
        (fraction([0.5], [1, 1]), fraction([0.5], [1, -1]), 1.0, 0.0, 1.0),
    ],
)
def test_published(one: Transfer, other: Transfer, printed: float, within: float, exact: float) -> None:
    found = gap(one, other)
    assert found.outcome is Outcome.DONE
    assert found.value == pytest.approx(printed, abs=max(within, 1e-12))
    assert found.value == pytest.approx(exact, rel=1e-6)
    assert found.winding == (exact < 1.0)
    assert gap(other, one).value == pytest.approx(found.value, rel=1e-9)
    # the bilinear image in z has the same distance
    sampled = [
        Transfer(*cont2discrete((each.A, each.B, each.C, each.D), 0.01, method="bilinear")[:4], step=0.01)
        for each in (one, other)
    ]
    assert gap(*sampled).value == pytest.approx(found.value, rel=1e-6)


def test_frequency_of_the_supremum() -> None:
    assert gap(fraction([100], [2, 1]), fraction([100], [1, 2, 1])).frequency == pytest.approx(19.545, abs=1e-3)
    assert gap(fraction([1, -1], [1, 1]), fraction([2, -1], [1, 1])).frequency == math.inf
    assert gap(fraction([1], [1, 0]), fraction([1], [1, 0.1])).frequency == pytest.approx(0.0, abs=1e-3)


def test_gains_alone() -> None:
    """Chords of the sphere: |1 - 3| / sqrt(2 * 10)."""
    assert gap(gain(np.array([[1.0]])), gain(np.array([[3.0]]))).value == pytest.approx(2.0 / math.sqrt(20.0))
    assert gap(gain(np.array([[2.0]])), gain(np.array([[-0.5]]))).value == 1.0  # 1 + 2 (-0.5) = 0: the graphs touch


def test_sizes_scale_first() -> None:
    one, other = fraction([1, 1], [1, 3]), fraction([1.4, 0.4], [1, 3])
    scaled = nu_gap(one, other, np.array([10.0]), np.array([2.0]))
    assert scaled.value == pytest.approx(gap(fraction([5, 5], [1, 3]), fraction([7, 2], [1, 3])).value, rel=1e-12)
    assert scaled.value != pytest.approx(gap(one, other).value, rel=1e-3)


def test_hidden_integrator_changes_nothing() -> None:
    """A heading that no output shows."""
    one, other = fraction([1], [1, 1]), fraction([1.2], [1, 1])
    A = np.block([[one.A, np.zeros((1, 1))], [np.ones((1, 1)), np.zeros((1, 1))]])
    more = Transfer(A, np.vstack([one.B, [[0.0]]]), np.hstack([one.C, [[0.0]]]), one.D)
    assert gap(more, other).value == pytest.approx(gap(one, other).value, rel=1e-9)


def test_dead_times() -> None:
    one, other = fraction([1], [1, 1]), fraction([1.2], [1, 1])
    late = [replace(each, delay=0.3) for each in (one, other)]
    assert gap(*late).value == pytest.approx(gap(one, other).value, rel=1e-12)
    assert gap(one, late[1]).outcome is Outcome.DEAD_TIMES
    assert not gap(one, late[1]).value < 1.0


def test_what_does_not_fit_is_refused() -> None:
    with pytest.raises(ValueError, match="do not fit"):
        gap(gain(np.ones((1, 1))), gain(np.ones((1, 2))))
    with pytest.raises(ValueError, match="do not fit"):
        stability_margin(gain(np.ones((1, 2))), gain(np.ones((1, 2))), np.ones(2), ONE)


def brute(one: Transfer, other: Transfer) -> tuple[float, bool]:
    """The largest chord between the graphs, and the winding condition by the turns of det(1 + P2~ P1) on a fine scan.

    Upwards along the axis det turns once for each unstable pole of P1 beyond those of P2, none of them on the axis
    (Vinnicombe 1993).
    """
    poles = np.concatenate([np.linalg.eigvals(one.A), np.linalg.eigvals(other.A)])
    omega = scan(poles, 1e-5, 1e6, 20000)
    graphs = []
    for each in (one, other):
        P = respond(each, omega)
        eye = np.broadcast_to(np.eye(P.shape[2]), (len(omega), P.shape[2], P.shape[2]))
        graphs.append((P, np.linalg.qr(np.concatenate([P, eye], axis=1))[0]))
    (P1, Q1), (P2, Q2) = graphs
    cosine = np.linalg.svd(np.conj(np.swapaxes(Q2, 1, 2)) @ Q1, compute_uv=False)[:, -1]
    chord = float(np.sqrt(np.maximum(0.0, 1.0 - cosine**2)).max())
    turns = np.linalg.det(np.eye(P1.shape[2]) + np.conj(np.swapaxes(P2, 1, 2)) @ P1)
    phase = np.unwrap(np.angle(turns))
    winding = 2.0 * (phase[-1] - phase[0]) / (2.0 * math.pi)  # the lower half of the axis mirrors the upper
    number = [int(np.sum(np.linalg.eigvals(each.A).real > 0)) for each in (one, other)]
    assert abs(winding - round(winding)) < 0.05
    return chord, round(winding) == number[0] - number[1]


def near(rng: np.random.Generator, one: Transfer, share: float) -> Transfer:
    """A model whose entries are off by a share."""
    A, B, C, D = (each * (1.0 + share * rng.normal(size=each.shape)) for each in (one.A, one.B, one.C, one.D))
    return Transfer(A, B, C, D)


@pytest.mark.parametrize("seed", [*range(18), *(pytest.param(seed, marks=pytest.mark.slow) for seed in range(18, 150))])
def test_against_chords_and_turns_on_a_scan(seed: int) -> None:
    rng = np.random.default_rng(seed)
    k, m = rng.integers(1, 4, 2)
    one = transfer(rng, int(rng.integers(1, 7)), k, m, 0.1, 0.3, float(rng.integers(0, 2)))
    other = near(rng, one, 10 ** rng.uniform(-2.0, 0.0))
    if seed % 3 == 0:
        other = transfer(rng, int(rng.integers(1, 7)), k, m, 0.1, 0.3)
    found = gap(one, other)
    chord, holds = brute(one, other)
    assert found.outcome is Outcome.DONE
    assert found.winding == holds
    if not holds:
        assert found.value == 1.0
        return
    assert found.value >= chord - 1e-9
    assert found.value == pytest.approx(chord, rel=1e-4)


def test_both_answers_of_the_winding_condition_are_met() -> None:
    rng = np.random.default_rng(1)
    answers = {brute(*(transfer(rng, 3, 2, 2, 0.1, 0.4) for _ in range(2)))[1] for _ in range(6)}
    assert answers == {True, False}


# --- what theory says ---------------------------------------------------------------------------------------------

seeds = st.integers(min_value=0, max_value=10**6)


def family(seed: int) -> tuple[Transfer, Transfer, Transfer]:
    """Three models of two inputs and two outputs, not far from each other."""
    rng = np.random.default_rng(seed)
    one = transfer(rng, 4, 2, 2, 0.02, 0.2, 0.3)
    share = 10 ** rng.uniform(-3.0, -0.5)
    return one, near(rng, one, share), near(rng, one, share)


@settings(max_examples=20, deadline=None, derandomize=True)
@given(seeds)
def test_a_metric(seed: int) -> None:
    one, two, three = family(seed)
    with np.errstate(all="ignore"):
        ab, bc, ac = gap(one, two), gap(two, three), gap(one, three)
        assert gap(two, one).value == pytest.approx(ab.value, rel=1e-6)
    assert ac.value <= ab.value + bc.value + 1e-6
    assert all(0.0 <= each.value <= 1.0 for each in (ab, bc, ac))


@settings(max_examples=15, deadline=None, derandomize=True)
@given(seeds)
def test_other_coordinates_of_the_states_are_the_same_model(seed: int) -> None:
    one, _, _ = family(seed)
    rng = np.random.default_rng(seed)
    T = np.linalg.qr(rng.normal(size=(4, 4)))[0] * 10 ** rng.uniform(-2.0, 2.0, 4)
    other = replace(one, A=np.linalg.solve(T, one.A @ T), B=np.linalg.solve(T, one.B), C=one.C @ T)
    with np.errstate(all="ignore"):
        found = gap(one, other)
    assert found.value <= 1e-6 + found.error
    assert found.winding


@settings(max_examples=40, deadline=None, derandomize=True)
@given(seeds)
def test_a_loop_keeps_its_margin_to_within_the_gap(seed: int) -> None:
    """|arcsin b(P1, C) - arcsin b(P2, C)| <= arcsin gap (Vinnicombe 1993), b being zero for unstable loops."""
    one, other, _ = family(seed)
    controller = transfer(np.random.default_rng(seed + 1), 2, 2, 2, 0.3, 0.0, 0.2)
    sizes = np.ones(2)
    with np.errstate(all="ignore"):
        first, second = (stability_margin(each, controller, sizes, sizes) for each in (one, other))
        distance = gap(one, other)
    assume(first.outcome.done and second.outcome.done and distance.outcome.done)
    change = abs(math.asin(min(1.0, first.value)) - math.asin(min(1.0, second.value)))
    if max(first.value, second.value) > distance.value:
        assert change <= math.asin(distance.value) + 1e-5
        assert min(first.value, second.value) > 0.0


# --- the stability margin -----------------------------------------------------------------------------------------


def test_margin_of_an_integrator() -> None:
    """P = 1/s, K = 1: [P; 1] (1 + K P)^-1 [K 1] has norm sqrt(1 + |P|^2) sqrt(2) / |1 + P|, at most sqrt 2."""
    found = stability_margin(fraction([1], [1, 0]), gain(np.array([[1.0]])), ONE, ONE)
    omega = np.geomspace(1e-6, 1e6, 200001)
    P = 1.0 / (1j * omega)
    assert found.value == pytest.approx(
        1.0 / float((np.sqrt(2.0 * (1 + np.abs(P) ** 2)) / np.abs(1 + P)).max()), rel=1e-6
    )


def test_margin_is_zero_for_unstable_loops_and_for_the_wrong_sign() -> None:
    plant = fraction([1], [1, -1])
    assert stability_margin(plant, gain(np.array([[3.0]])), ONE, ONE).value > 0.3
    assert stability_margin(plant, gain(np.array([[-3.0]])), ONE, ONE).value == 0.0
    assert stability_margin(plant, gain(np.array([[0.5]])), ONE, ONE).value == 0.0


def test_margin_of_loops_without_answer() -> None:
    plant = fraction([1, 0], [1, 1])
    assert stability_margin(plant, gain(np.array([[-1.0]])), ONE, ONE).outcome is Outcome.ILL_POSED
    late = replace(plant, delay=0.1)
    assert stability_margin(late, gain(np.array([[0.5]])), ONE, ONE).outcome is Outcome.DEAD_TIMES


@pytest.mark.parametrize("seed", range(10))
def test_margin_against_a_scan(seed: int) -> None:
    rng = np.random.default_rng(seed)
    plant, controller = transfer(rng, 4, 2, 3, 0.05, 0.0), transfer(rng, 3, 3, 2, 0.3, 0.0, 0.1)
    controller = replace(controller, C=0.05 * controller.C)
    inputs, outputs = 10 ** rng.uniform(-1, 1, 3), 10 ** rng.uniform(-1, 1, 2)
    found = stability_margin(plant, controller, inputs, outputs)
    poles = closed(around(plant, controller))
    if poles.real.max() >= 0.0:
        assert found.value == 0.0
        return
    omega = scan(poles)
    P = respond(plant, omega) * inputs / outputs[:, np.newaxis]
    K = respond(controller, omega) * outputs / inputs[:, np.newaxis]
    eye = np.broadcast_to(np.eye(3), (len(omega), 3, 3))
    inner = np.linalg.solve(eye + K @ P, np.concatenate([K, eye], axis=2))
    size = np.linalg.svd(np.concatenate([P, eye], axis=1) @ inner, compute_uv=False)[:, 0].max()
    assert found.value <= 1.0 / size * (1.0 + 1e-9)
    assert found.value == pytest.approx(1.0 / size, rel=1e-3)
