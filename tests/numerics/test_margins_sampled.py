"""Sampled loops: margins by the mapping, digits at fast sampling, and the dead time between controller and hold."""

from __future__ import annotations

import math

import numpy as np
import pytest
from open_loops import held, product, ratio, scaled, static

from linverify.core.outcome import Outcome
from linverify.numerics.bilinear import held_change
from linverify.numerics.delay_margin import sampled_delay_margin
from linverify.numerics.margins import margins
from linverify.numerics.transfer import Transfer

INTEGRATOR = ratio([1], [1, 0])


@pytest.mark.parametrize("gain", [0.01, 0.5, 1.5])
def test_held_integrator(gain: float) -> None:
    # L = a / (z - 1), a = k step: pole 1 - a; a < 2, met at half the sample rate; |L| = 1 at sin(w step / 2) = a / 2
    step = 0.1
    found = margins(ratio([gain], [1, -1], step=step))
    assert found.stable
    assert found.poles == pytest.approx([1 - gain])
    assert found.gain_up.value == pytest.approx(2 / gain, rel=1e-12)
    assert found.gain_up.frequency == pytest.approx(math.pi / step, rel=1e-12)
    crossover = 2 / step * math.asin(gain / 2)
    assert found.phase.frequency == pytest.approx(crossover, rel=1e-12)
    assert found.phase.value == pytest.approx(math.pi / 2 - crossover * step / 2, rel=1e-12)
    # S = (z - 1) / (z - 1 + a) is largest at z = -1
    assert found.sensitivity.value == pytest.approx(2 / (2 - gain), rel=1e-7)
    assert found.sensitivity.frequency == pytest.approx(math.pi / step, rel=1e-12)
    assert math.isnan(found.delay.value)


def test_unstable_pole_is_told_in_z() -> None:
    found = margins(ratio([2.5], [1, -1], step=0.1))
    assert found.unstable == (pytest.approx(-1.5),)
    assert margins(ratio([-0.5], [1, -1], step=0.1)).opposite_stable


def test_fast_sampling_keeps_the_digits() -> None:
    # three lags, and a resonance of damping 1e-6, sampled every 1e-6: as the continuous loop but for half a sample
    loop = ratio([3], product([1, 1], [1, 1], [1, 1]))
    found = margins(held(loop, 1e-6))
    assert found.gain_up.value == pytest.approx(8 / 3, rel=1e-5)
    assert math.degrees(found.phase.value) == pytest.approx(41.6903, abs=1e-4)
    zeta = 1e-6
    sharp = ratio([3e-6], [1, 2 * zeta, 1])
    slow, fast = margins(sharp), margins(held(sharp, 1e-6))
    assert [each.frequency for each in fast.crossovers] == pytest.approx(
        [each.frequency for each in slow.crossovers], rel=1e-9
    )
    assert fast.phase.value == pytest.approx(slow.phase.value, abs=1e-5)


def test_units_of_states_do_not_matter() -> None:
    loop = held(ratio(8.75 * np.array([4, 0.4, 1]), product([100, 1], [1, 0.22, 1], [0.01, 0.008, 1])), 0.01)
    one = margins(loop)
    other = margins(scaled(loop, np.array([1.0, 1e8, 1.0, 1e-8, 1e8])))
    for name in ("gain_up", "phase", "disk", "sensitivity", "complementary"):
        assert getattr(other, name).value == pytest.approx(getattr(one, name).value, rel=1e-8)


@pytest.mark.parametrize("size", [1e-9, 1.0, 1e9])
def test_pole_at_half_the_sample_rate_is_not_guessed_at(size: float) -> None:
    loop = scaled(ratio([0.1], product([1, 1], [1, -0.5]), step=1.0), np.array([1.0, size]))
    assert margins(loop).outcome is Outcome.UNVERIFIED


@pytest.mark.parametrize("size", [1e-9, 1e9])
def test_two_integrators_in_units_far_apart_have_no_pole_at_half_the_sample_rate(size: float) -> None:
    # nothing comes back from one integrator to the other, so balancing A alone leaves 1e9 beside 1 as it stands
    loop = held(ratio([1, 1], [1, 0, 0]), 0.05)
    one, other = margins(loop), margins(scaled(loop, np.array([1.0, size])))
    assert one.outcome is other.outcome is Outcome.DONE
    for name in ("gain_up", "phase", "disk", "sensitivity", "complementary"):
        assert getattr(other, name).value == pytest.approx(getattr(one, name).value, rel=1e-9)


def test_held_change_keeps_small_differences() -> None:
    A, B = np.array([[-1e-3, 1.0], [0.0, -2e-3]]), np.array([[0.0], [1.0]])
    F, G = held_change(A, B, 1e-8)
    assert F[0, 0] == pytest.approx(math.expm1(-1e-11), rel=1e-14)
    assert G[1, 0] == pytest.approx(math.expm1(-2e-11) / -2e-3, rel=1e-14)


@pytest.mark.parametrize("gain", [1.05, 1.5, 1.9])
def test_delay_within_a_sample(gain: float) -> None:
    # z^2 - (1 - a (1 - m)) z + a m: the product of the poles reaches one at m = 1 / a
    found = sampled_delay_margin(INTEGRATOR, static(gain / 0.1, step=0.1))
    assert found.value == pytest.approx(0.1 / gain, rel=1e-10)
    assert found.frequency == pytest.approx(math.acos(0.5 * (2 - gain)) / 0.1, rel=1e-9)
    assert found.error < 1e-8


def test_delay_of_many_samples_tends_to_that_of_the_continuous_loop() -> None:
    # k / s bears pi / (2 k); the hold has used half a sample of it
    for step in (1e-1, 1e-2, 1e-3):
        found = sampled_delay_margin(INTEGRATOR, static(1.0, step=step))
        assert found.value == pytest.approx(0.5 * math.pi - 0.5 * step, abs=step**2)


def test_declared_delay_is_taken_off() -> None:
    whole = sampled_delay_margin(INTEGRATOR, static(1.0, step=0.25)).value
    for declared in (0.1, 0.25, 0.6):
        left = sampled_delay_margin(INTEGRATOR, static(1.0, step=0.25), declared).value
        assert left == pytest.approx(whole - declared, rel=1e-9)


def test_small_gain_bears_any_delay() -> None:
    assert math.isinf(sampled_delay_margin(ratio([1], [1, 1]), static(0.9, step=0.1)).value)


@pytest.mark.parametrize("step", [0.02, 0.3, 1.0])
@pytest.mark.parametrize("name", ["lags", "resonance", "fast"])
def test_first_loss_by_poles(name: str, step: float) -> None:
    plant = {
        "lags": ratio([2], product([1, 1], [0.5, 1])),
        "resonance": ratio([0.15], [1, 0.15, 1]),
        "fast": ratio([0.8], product([1, 1], [0.004, 0.06, 1])),
    }[name]
    controller = ratio([0.7, -0.3], [1, -0.6], step=step)
    assert _stable(plant, controller, 0.0)
    found = sampled_delay_margin(plant, controller)
    if math.isinf(found.value):
        assert all(_stable(plant, controller, delay) for delay in np.linspace(0, 12 * step, 200))
        return
    assert all(_stable(plant, controller, delay) for delay in np.linspace(0, found.value * (1 - 1e-7), 150))
    assert not _stable(plant, controller, found.value * (1 + 1e-7))


def _stable(plant: Transfer, controller: Transfer, delay: float) -> bool:
    """By the poles of the difference equation with all commands under way as states, written out step by step."""
    step = controller.step
    assert step is not None
    whole = math.floor(delay / step * (1 + 1e-12))
    rest = max(0.0, delay - whole * step)
    F1, G1 = held_change(plant.A, plant.B, rest)
    F2, G2 = held_change(plant.A, plant.B, step - rest)
    n, q = len(plant.A), len(controller.A)
    size = n + q + whole + 1

    def onward(state: np.ndarray) -> np.ndarray:
        x, k, way = state[:n], state[n : n + q], state[n + q :]  # way: the command that acts, then those under way
        e = -plant.C @ x
        u = controller.C @ k + controller.D @ e
        queue = np.concatenate([way, u])
        first = x + F1 @ x + G1[:, 0] * queue[0]
        then = first + F2 @ first + G2[:, 0] * queue[1]
        return np.concatenate([then, controller.A @ k + controller.B @ e, queue[1:]])

    matrix = np.column_stack([onward(column) for column in np.eye(size)])
    return bool(np.abs(np.linalg.eigvals(matrix)).max() < 1.0)


def test_wrong_parts_are_refused() -> None:
    with pytest.raises(ValueError, match="a continuous plant"):
        sampled_delay_margin(INTEGRATOR, static(1.0))


def test_feedthrough_of_the_plant_loses_stability_at_an_instant() -> None:
    # y sees the held command itself, later by one sample as soon as the delay reaches a whole one
    plant = Transfer(np.array([[-1.0]]), np.array([[1.0]]), np.array([[1.0]]), np.array([[0.75]]))
    found = sampled_delay_margin(plant, static(0.6, step=0.1))
    assert math.isnan(found.frequency) or found.error < 1e-8
    for delay in np.linspace(0.0, min(found.value, 3.0) * (1 - 1e-9), 60):
        assert _stable_with_feedthrough(0.75, 0.6, float(delay))


def _stable_with_feedthrough(d: float, gain: float, delay: float) -> bool:
    """x' = -x + u, y = x + d u, u = -gain y read before each instant; commands under way as states."""
    step = 0.1
    whole = math.floor(delay / step * (1 + 1e-12))
    rest = max(0.0, delay - whole * step)
    size = whole + 2  # x, the command that acts, those under way

    def onward(state: np.ndarray) -> np.ndarray:
        x, way = state[0], state[1:]
        queue = np.append(way, -gain * (x + d * way[0]))
        for time, u in ((rest, queue[0]), (step - rest, queue[1])):
            x = x * math.exp(-time) + (1 - math.exp(-time)) * u
        return np.concatenate([[x], queue[1:]])

    matrix = np.column_stack([onward(column) for column in np.eye(size)])
    return bool(np.abs(np.linalg.eigvals(matrix)).max() < 1.0)
