"""Disk margins of several channels: closed forms, certified bounds against sampling, perturbations that destabilize."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from channels import closed, highest, respond, scan, sigma, transfer
from scipy.signal import cont2discrete

from linverify.core.outcome import Outcome
from linverify.numerics.multiloop import around, both_sides, multiloop
from linverify.numerics.scalings import from_above
from linverify.numerics.transfer import Transfer


def rotating(a: float) -> Transfer:
    """A body that rotates about one axis, torques and rates of the other two coupled by `a`."""
    A, C = np.array([[0.0, a], [-a, 0.0]]), np.array([[1.0, a], [-a, 1.0]])
    return Transfer(A, np.eye(2), C, np.zeros((2, 2)))


def gain(D: np.ndarray) -> Transfer:
    k, m = D.shape
    return Transfer(np.zeros((0, 0)), np.zeros((0, m)), np.zeros((k, 0)), D)


def stable_loops(seed: int, m: int, number: int, *, lightest: float = 1e-3, feed: float = 0.0) -> list[Transfer]:
    """Random loops of m channels that are stable when closed."""
    rng = np.random.default_rng(seed)
    found: list[Transfer] = []
    while len(found) < number:
        one = transfer(rng, int(rng.integers(m, 13)), m, m, lightest, 0.1, feed)
        share = 10 ** rng.uniform(-1.0, 1.0)
        one = replace(one, C=share * one.C)
        if closed(one).real.max() < 0.0:
            found.append(one)
    return found


def difference(loop: Transfer, omega: np.ndarray) -> np.ndarray:
    """(S - T) / 2, from the open loop's response."""
    eye = np.eye(len(loop.D))
    return np.linalg.inv(eye + respond(loop, omega)) - 0.5 * eye


# Skogestad & Postlethwaite, Multivariable Feedback Control, section 3.7.1, origin Doyle: "unstable for gains 1 + e,
# 1 - e beyond |e| = 1 / sqrt(a^2 + 1), although each loop alone has 90 deg" (from memory); closed forms derived.
@pytest.mark.parametrize("a", [10.0, 3.0])
def test_rotating_body(a: float) -> None:
    found, root = multiloop(rotating(a)), math.sqrt(1.0 + a**2)
    assert (found.outcome, found.stable, found.unstable) == (Outcome.DONE, True, ())
    assert found.complementary.value == pytest.approx(root, rel=1e-6)
    assert found.complementary.frequency == pytest.approx(0.0, abs=1e-6)
    assert found.sensitivity.value == pytest.approx(root, rel=1e-6)
    assert found.sensitivity.frequency == pytest.approx(1.0 / a, rel=1e-5)
    alpha = 2.0 / (a + root)
    assert found.disk.low <= alpha * (1.0 + 1e-12)
    assert found.disk.high >= alpha * (1.0 - 1e-12)
    assert found.disk.low == pytest.approx(alpha, rel=2e-6)
    assert found.disk.high == pytest.approx(alpha, rel=2e-6)
    assert found.disk.frequency == pytest.approx(root - a, rel=1e-4)
    assert math.degrees(2.0 * math.atan(0.5 * found.disk.low)) == pytest.approx(
        math.degrees(math.atan(1.0 / a)), rel=2e-6
    )
    for share in (0.999, 1.001):
        factors = 1.0 + np.array([1.0, -1.0]) * share / root
        assert (closed(rotating(a), factors).real.max() < 0.0) == (share < 1.0)


@pytest.mark.parametrize(
    ("a", "low", "high", "phase"), [(10.0, 0.904988, 1.104988, 5.71059), (3.0, 0.720759, 1.387426, 18.43495)]
)
def test_rotating_body_guarantees_in_figures(a: float, low: float, high: float, phase: float) -> None:
    alpha = multiloop(rotating(a)).disk.low
    assert (2.0 - alpha) / (2.0 + alpha) == pytest.approx(low, abs=1e-6)
    assert (2.0 + alpha) / (2.0 - alpha) == pytest.approx(high, abs=2e-6)
    assert math.degrees(2.0 * math.atan(0.5 * alpha)) == pytest.approx(phase, rel=2e-6)


# Seiler, Packard & Gahinet, IEEE Control Systems Magazine 40(5), 2020, example 1: printed 0.46, 25.8 deg
def test_one_channel_is_its_own_disk_margin() -> None:
    A = np.array([[-10.0, -10.0, -10.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0]])
    loop = Transfer(A, np.array([[1.0], [0.0], [0.0]]), np.array([[0.0, 0.0, 25.0]]), np.zeros((1, 1)))
    found = multiloop(loop).disk
    assert found.low == pytest.approx(0.458093, abs=1e-6)
    assert found.high == pytest.approx(0.458093, abs=1e-6)
    assert found.frequency == pytest.approx(1.955027, rel=1e-4)
    assert np.abs(closed(loop, np.array(found.factors)) - 1j * found.frequency).min() < 1e-6


@pytest.mark.parametrize("m", [2, 3, 4])
def test_bounds_meet_and_the_perturbation_destabilizes(m: int) -> None:
    for loop in stable_loops(m, m, 3, lightest=1e-5, feed=0.1):
        found = multiloop(loop)
        disk = found.disk
        assert found.stable
        assert disk.done
        assert 0.0 < disk.low <= disk.high
        assert disk.high <= disk.low * (1.0 + (1e-5 if m < 4 else 0.05))
        if not np.isfinite(np.array(disk.factors)).all() or math.isinf(disk.frequency):
            continue
        # each factor is as far off as the margin says, and no further
        factors = np.array(disk.factors)
        assert np.abs(2.0 * (factors - 1.0) / (factors + 1.0)) == pytest.approx(np.full(m, disk.high), rel=1e-6)
        poles = closed(loop, factors)
        nearest = poles[np.argmin(np.abs(poles - 1j * disk.frequency))]
        assert abs(nearest - 1j * disk.frequency) <= 1e-5 * max(disk.frequency, 1.0)
        assert poles.real.max() >= -1e-6 * max(disk.frequency, 1.0)


@pytest.mark.parametrize("m", [2, 3])
def test_no_sampled_perturbation_is_smaller(m: int) -> None:
    rng = np.random.default_rng(m)
    for loop in stable_loops(10 + m, m, 3):
        disk = multiloop(loop).disk
        poles = closed(loop)
        omega = scan(poles, number=400)[::3]
        M = difference(loop, omega)
        below = 0.0
        for _ in range(60):
            turned = M * np.exp(1j * rng.uniform(-np.pi, np.pi, m))
            below = max(below, float(np.abs(np.linalg.eigvals(turned)).max()))
        assert below <= 1.0 / disk.low * (1.0 + 1e-9)
        assert below >= 0.7 / disk.low  # the sampling comes near, so that the line above says something


def test_never_more_than_each_channel_alone() -> None:
    for m in (2, 3):
        for loop in stable_loops(20 + m, m, 2, lightest=1e-4):
            poles = closed(loop)
            alone = [
                highest(lambda w, i=i, L=loop: np.abs(difference(L, w)[:, i, i]), scan(poles), poles) for i in range(m)
            ]
            assert multiloop(loop).disk.low <= 1.0 / max(alone) * (1.0 + 1e-9)


def test_peaks_against_a_scan_of_the_open_loop() -> None:
    eye = np.eye(3)
    for loop in stable_loops(5, 3, 2, lightest=1e-5, feed=0.1):
        found, poles = multiloop(loop), closed(loop)
        S = highest(lambda w, L=loop: sigma(np.linalg.inv(eye + respond(L, w))), scan(poles), poles)
        T = highest(lambda w, L=loop: sigma(eye - np.linalg.inv(eye + respond(L, w))), scan(poles), poles)
        assert found.sensitivity.value == pytest.approx(S, rel=1e-5)
        assert found.complementary.value == pytest.approx(T, rel=1e-5)


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(50))
def test_nothing_on_a_scan_is_above_the_bounds(seed: int) -> None:
    """Loops of two to four channels, of orders up to twelve, with light damping and feedthrough, half of them large."""
    rng = np.random.default_rng(1000 + seed)
    m = int(rng.integers(2, 5))
    for loop in stable_loops(
        seed, m, 2, lightest=10 ** rng.uniform(-5.0, -1.0), feed=float(rng.choice([0.0, 0.1, 1.0]))
    ):
        found, poles, eye = multiloop(loop), closed(loop), np.eye(m)
        S = np.linalg.inv(eye + respond(loop, scan(poles, number=600)))
        for peak, values in ((found.sensitivity, S), (found.complementary, eye - S)):
            assert sigma(values).max() <= peak.value + peak.error
        assert from_above(S - 0.5 * eye)[0].max() * found.disk.low <= 1.0 + 1e-9
        assert found.disk.high <= found.disk.low * (1.0 + (1e-5 if m < 4 else 0.05))
        factors = np.array(found.disk.factors)
        if np.isfinite(factors).all() and math.isfinite(found.disk.frequency):
            assert closed(loop, factors).real.max() >= -1e-6 * max(found.disk.frequency, 1e-3 * np.abs(poles).max())


def test_units_of_the_channels_do_not_matter() -> None:
    (loop,) = stable_loops(31, 3, 1)
    units = np.array([1e4, 1.0, 1e-5])
    other = replace(loop, B=loop.B * units, C=loop.C / units[:, np.newaxis], D=loop.D * units / units[:, np.newaxis])
    assert multiloop(other).disk.low == pytest.approx(multiloop(loop).disk.low, rel=1e-5)


def test_channels_that_do_not_touch_each_other() -> None:
    """The smaller of the two margins, though no finite scaling reaches it where one channel feeds the other."""
    A = np.array([[-1.0, 0.0], [0.0, -2.0]])
    for cross in (0.0, 5.0):
        loop = Transfer(A, np.eye(2), np.array([[4.0, 0.0], [cross, 1.0]]), np.zeros((2, 2)))
        disk = multiloop(loop).disk
        # L = k / (s + p): (1 - L) / (1 + L) / 2 is largest at infinity, one half
        assert disk.low == pytest.approx(2.0, rel=1e-4)
        assert disk.high == pytest.approx(2.0, rel=1e-4)


def test_both_sides_of_one_channel() -> None:
    """Both perturbations of one channel multiply."""
    A = np.array([[-10.0, -10.0, -10.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0]])
    plant = Transfer(A, np.array([[1.0], [0.0], [0.0]]), np.array([[0.0, 0.0, 1.0]]), np.zeros((1, 1)))
    loop = replace(plant, C=25.0 * plant.C)
    both = both_sides(plant, gain(np.array([[25.0]])))
    # together the factors must be -1 / L; nearest to one are two equal ones
    root = np.sqrt(-1.0 / respond(loop, np.linspace(1.0, 3.0, 200001))[:, 0, 0])
    alpha = float(2.0 * np.abs((root - 1.0) / (root + 1.0)).min())
    assert both.low == pytest.approx(alpha, rel=2e-6)
    assert both.high == pytest.approx(alpha, rel=2e-6)
    assert both.high < multiloop(loop).disk.low
    product = np.prod(np.array(both.factors))
    assert np.abs(closed(loop, np.array([product])) - 1j * both.frequency).min() < 1e-5


def test_both_sides_of_the_rotating_body() -> None:
    plant = rotating(3.0)
    both, at_input = both_sides(plant, gain(np.eye(2))), multiloop(plant).disk
    assert both.high < at_input.low
    assert both.low == pytest.approx(0.161223, abs=2e-6)  # from this code, kept as a mark
    rng = np.random.default_rng(0)
    loop = around(plant, gain(np.eye(2)))
    for _ in range(300):
        deltas = 0.9999 * both.low * np.exp(1j * rng.uniform(-np.pi, np.pi, 4))
        assert closed(loop, (1.0 + 0.5 * deltas) / (1.0 - 0.5 * deltas)).real.max() < 0.0
    poles = closed(loop, np.array(both.factors))
    assert poles.real.max() > -1e-6


def test_unstable_loops_have_no_margins() -> None:
    loop = rotating(3.0)
    found = multiloop(replace(loop, C=-loop.C))
    assert found.outcome is Outcome.DONE
    assert not found.stable
    assert len(found.unstable) == 2
    assert np.real(found.unstable) == pytest.approx([1.0, 1.0], rel=1e-6)
    assert (found.disk.low, found.disk.high, found.sensitivity.value) == (0.0, 0.0, math.inf)


def test_ill_posed_and_not_finite_are_outcomes() -> None:
    loop = rotating(3.0)
    assert multiloop(replace(loop, D=-np.eye(2))).outcome is Outcome.ILL_POSED
    assert multiloop(replace(loop, D=np.full((2, 2), math.inf))).outcome is Outcome.NOT_FINITE


def test_pole_on_the_axis_is_on_the_edge() -> None:
    oscillator = Transfer(
        np.array([[0.0, 1.0], [-1.0, 0.0]]), np.array([[0.0], [1.0]]), np.eye(2)[[0]], np.zeros((1, 1))
    )
    found = multiloop(oscillator)
    assert (found.outcome, found.stable, found.disk.low) == (Outcome.ON_THE_EDGE, False, 0.0)
    sampled = Transfer(np.array([[0.5]]), np.ones((1, 1)), np.array([[1.5]]), np.zeros((1, 1)), step=0.1)
    assert multiloop(sampled).outcome is Outcome.ON_THE_EDGE  # closed at z = -1


def test_what_does_not_fit_is_refused() -> None:
    loop = rotating(3.0)
    with pytest.raises(ValueError, match="as many outputs as inputs"):
        multiloop(replace(loop, C=loop.C[:1], D=loop.D[:1]))
    with pytest.raises(ValueError, match="do not fit"):
        both_sides(loop, gain(np.ones((2, 1))))


def test_sampled_loop() -> None:
    """The bilinear image of a loop has its margins, at the frequencies that belong to it."""
    loop, step = rotating(3.0), 0.05
    A, B, C, D, _ = cont2discrete((loop.A, loop.B, loop.C, loop.D), step, method="bilinear")
    found, plain = multiloop(Transfer(A, B, C, D, step=step)), multiloop(loop)
    assert found.stable
    assert found.disk.low == pytest.approx(plain.disk.low, rel=1e-6)
    assert found.sensitivity.value == pytest.approx(plain.sensitivity.value, rel=1e-6)
    warped = 2.0 / step * math.atan(0.5 * step * plain.sensitivity.frequency)
    assert found.sensitivity.frequency == pytest.approx(warped, rel=1e-3)
    held = cont2discrete((loop.A, loop.B, loop.C, loop.D), 2.0)
    unstable = multiloop(Transfer(*held[:4], step=2.0))
    assert not unstable.stable
    assert min(abs(pole) for pole in unstable.unstable) >= 1.0
